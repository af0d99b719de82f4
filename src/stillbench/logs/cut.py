"""cut_record: one channel of a log on its even grid, in SI, between the instants that are wanted."""

import itertools
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.foundation.errors import LogError, NothingToMeasureError, RecordTooShortError, UsageError
from stillbench.foundation.scratch import blocks
from stillbench.foundation.suggestions import plural
from stillbench.logs.clock import Grid, audit_clock
from stillbench.logs.front_end import convert
from stillbench.logs.runs import CARRIED_SHARE, SHORTEST_RUN, build_runs, hole_limit, whole_run
from stillbench.logs.site import known_input
from stillbench.logs.spans import Instants, within
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.log_sheet import LogSheet
from stillbench.vocabulary.record import Clock, Record
from stillbench.vocabulary.sensor_log import Channel, SensorLog

LISTED_GAPS = 20
NARROW = "; with so many lost, intervals are somewhat too narrow"
SLOWER_SHARE = 0.6
"""Of the rows with a value below which a channel may be slower than the log."""
REGULAR_SHARE = 0.8
LARGEST_READING = 1e100
"""Squares of larger ones do not fit a number of the machine."""


def cut_record(
    log: SensorLog,
    label: str,
    *,
    sheet: LogSheet | None = None,
    start: str | None = None,
    stop: str | None = None,
    exclude: Sequence[str] = (),
    grid: Grid | None = None,
) -> Record:
    """Cut one channel out of a log.

    Parameters
    ----------
    log : SensorLog
    label : str
        Of the channel.
    sheet : LogSheet, optional
        For the front end.
    start, stop : str, optional
        Seconds from the start, clock time, or ``row:N``.
    exclude : sequence of str
        Spans ``T1:T2`` that the user leaves out.
    grid : Grid, optional
        Of an earlier ``audit_clock``, when several channels are cut from one log.

    Returns
    -------
    Record
        Short holes are NaN.

    Raises
    ------
    ClockError, UnitError, UsageError
    NothingToMeasureError
        When no finite number is left.
    RecordTooShortError
        When fewer than 16 samples are left.
    """
    sheet = sheet or LogSheet()
    channel = next(channel for channel in log.channels if channel.label == label)
    grid = grid or audit_clock(log)
    section = sheet.channel.get(label)
    conversion = convert(channel, section.front_end if section else None, grid.sample_interval)
    findings = [*conversion.findings, *grid.findings]
    whole = grid.placed is None and start is None and stop is None and not exclude and channel.reference is None
    if whole and all(bool(np.isfinite(channel.values[part]).all()) for part in blocks(channel.values.size)):
        # All of the log, as it stands: the usual case, and the only one for which a log may be larger than memory.
        wanted: BoolArray = np.broadcast_to(np.True_, channel.values.shape)
        use = wanted
        _require_readings(label, max(float(channel.values.max()), -float(channel.values.min())))
        values, missing, runs, dropped = whole_run(conversion.apply(channel.values))
    else:
        wanted = grid.kept & _chosen(log, grid, start, stop, exclude, findings)
        use = _usable(channel, wanted, grid, findings)
        chosen = slice(None) if use.all() else use  # all of it needs no copy
        reference = channel.reference[chosen] if channel.reference is not None else None
        values, missing, runs, dropped = build_runs(
            conversion.apply(channel.values[chosen], reference),
            grid.index[chosen],
            grid.segment[chosen],
            grid.seconds[chosen],
        )
    if not runs:
        raise RecordTooShortError(int(np.count_nonzero(use)), SHORTEST_RUN, "any estimate")
    findings += _gap_findings(grid, wanted, dropped)
    spans = tuple((run.start, run.start + run.n_samples * grid.sample_interval) for run in runs)
    gaps = [after[0] - before[1] for before, after in itertools.pairwise(spans)]
    absent = _absent(grid, wanted)
    clock = Clock(grid.source, grid.jitter, max([0.0, *gaps]), absent, spans)
    record = Record(
        label,
        conversion.quantity.name,
        conversion.unit.text,
        values,
        missing,
        grid.sample_interval,
        runs,
        clock,
        channel.kind == "increment",
        conversion.front_end,
        (),
        conversion.limits,
        log.source.rows,
        known_input(sheet, section, conversion.quantity.name, findings),
        conversion.step,
        log.side,
    )
    return replace(record, findings=tuple(findings))


def clip_log(log: SensorLog, start: str | None, stop: str | None) -> SensorLog:
    """Return the rows of a log from ``start`` to ``stop``, times still counted from its first stamp.

    What lies outside has no say on the clock then; ``cut_record`` takes the same span again, sample by sample.
    """
    if log.stamps is None or (start is None and stop is None):
        return log
    seconds = log.stamps.seconds
    instants = Instants(seconds, log.stamps)
    first = instants.instant(start) if start is not None else None
    last = instants.end(stop) if stop is not None else None
    rows = np.flatnonzero(within(seconds, first, last))
    if rows.size < SHORTEST_RUN:
        return log  # cut_record says what is wrong
    part = slice(int(rows[0]), int(rows[-1]) + 1)
    channels = tuple(
        replace(
            channel,
            values=channel.values[part],
            reference=None if channel.reference is None else channel.reference[part],
        )
        for channel in log.channels
    )
    return replace(log, channels=channels, stamps=replace(log.stamps, seconds=seconds[part]))


def own_rows(log: SensorLog) -> tuple[SensorLog, str]:
    """Return a log of one channel at the rate of that channel, where it has a value in some rows only; and a sentence on it.

    A slower sensor beside a faster one leaves its cells empty in the rows between. Where the rows with a value stand at
    regular distances the others are no rows of it; where they do not, the log is returned as it is.
    """
    (channel,) = log.channels
    count = sum(int(np.isfinite(channel.values[part]).sum()) for part in blocks(channel.values.size))
    if count < SHORTEST_RUN or count > SLOWER_SHARE * channel.values.size:
        return log, ""
    rows = np.flatnonzero(np.isfinite(channel.values))
    apart = np.diff(rows)
    usual = int(np.median(apart))
    if usual < 2 or np.mean(apart == usual) < REGULAR_SHARE:  # noqa: PLR2004  every second row
        return log, ""
    reference = None if channel.reference is None else channel.reference[rows]
    stamps = log.stamps and replace(log.stamps, seconds=log.stamps.seconds[rows])
    slower = replace(
        log,
        channels=(replace(channel, values=channel.values[rows], reference=reference),),
        stamps=stamps,
        rate=None if log.rate is None else log.rate / usual,
        restarts=tuple(int(row) for row in np.searchsorted(rows, log.restarts)),
        source=replace(log.source, rows=rows.size),
    )
    return slower, f"channel {channel.label!r} has a value in one row of {usual}: analysed at its own rate"


def _usable(channel: Channel, wanted: BoolArray, grid: Grid, findings: list[Finding]) -> BoolArray:
    """Return which rows hold a finite reading; say how many of those wanted do not."""
    label, finite = channel.label, np.isfinite(channel.values)
    lost = wanted & ~finite
    if not (wanted & finite).any():
        raise NothingToMeasureError(
            f"channel {label!r} holds no finite number" + ("" if not finite.any() else " in the chosen span"),
            "numbers",
            "check the column, and --from and --to",
        )
    if lost.any():
        where = grid.seconds[lost]
        findings.append(
            Finding(
                "not_finite",
                float(where[0]),
                float(where[-1]),
                float(where.size),
                "samples",
                excluded=True,
                because=f"{plural(where.size, 'cell')} empty, NaN or infinite",
                disposition="treated as missing samples",
            )
        )
    use = np.asarray(wanted & finite)
    if channel.reference is not None:
        use &= np.isfinite(channel.reference) & (channel.reference != 0)
    largest = max(float(channel.values.max(where=use, initial=0.0)), -float(channel.values.min(where=use, initial=0.0)))
    _require_readings(label, largest)
    return use


def _require_readings(label: str, largest: float) -> None:
    if largest > LARGEST_READING:
        raise LogError(
            f"channel {label!r} holds a value of {largest:.3g}",
            f"readings below {LARGEST_READING:g}",
            'if it marks missing data, list it as missing = ["..."] under [log] in a log sheet',
        )


def _chosen(
    log: SensorLog, grid: Grid, start: str | None, stop: str | None, exclude: Sequence[str], findings: list[Finding]
) -> BoolArray:
    instants = Instants(grid.seconds, log.stamps)
    first = instants.instant(start) if start is not None else None
    last = instants.end(stop) if stop is not None else None
    if first is not None and last is not None and not last > first:
        raise UsageError(f"--to {stop} is not after --from {start}", "a span that runs forwards")
    wanted = within(grid.seconds, first, last)
    if not wanted.any():
        raise UsageError(
            f"nothing of the log lies between {'its start' if start is None else f'--from {start}'} and"
            f" {'its end' if stop is None else f'--to {stop}'}",
            f"instants between 0 and {grid.seconds[-1]:.6g} s",
        )
    end = float(grid.seconds[-1])
    for name, said, lost in (("--from", start, (0.0, first)), ("--to", stop, (last, end))):
        if said is not None:
            left, right = lost[0] or 0.0, lost[1] or 0.0
            count = int(np.count_nonzero(within(grid.seconds, left, right)))
            findings.append(
                Finding(
                    "gap",
                    left,
                    right,
                    float(count),
                    "rows",
                    excluded=True,
                    because=f"left out on request ({name} {said})",
                    disposition="chosen by the user",
                )
            )
    for text in exclude:
        left, right = instants.span(text)
        inside = within(grid.seconds, left, right)
        wanted &= ~inside
        findings.append(
            Finding(
                "gap",
                left,
                right,
                float(np.count_nonzero(inside)),
                "rows",
                excluded=True,
                because=f"left out on request (--exclude {text})",
                disposition="chosen by the user",
            )
        )
    return wanted


def _whole(grid: Grid) -> bool:
    """Whether every place of the grid has its row."""
    return grid.placed is None or bool(
        grid.kept.all()
        and grid.index[-1] - grid.index[0] == grid.index.size - 1
        and grid.segment[-1] == grid.segment[0]
    )


def _absent(grid: Grid, wanted: BoolArray) -> int:
    """Grid places without a row between the first and last row wanted, within segments."""
    if _whole(grid):
        return 0
    rows = np.flatnonzero(grid.kept)
    rows = rows[(rows >= np.argmax(wanted)) & (rows <= wanted.size - 1 - np.argmax(wanted[::-1]))]
    steps = np.diff(grid.index[rows])
    inside = np.diff(grid.segment[rows]) == 0
    return int(np.sum((steps - 1)[inside & (steps > 1)]))


def _gap_findings(grid: Grid, wanted: BoolArray, dropped: int) -> list[Finding]:
    """Gaps and holes that are in the log itself, not those that the user made."""
    if _whole(grid):
        return []
    rows = np.flatnonzero(grid.kept)
    rows = rows[(rows >= np.argmax(wanted)) & (rows <= wanted.size - 1 - np.argmax(wanted[::-1]))]
    steps = np.diff(grid.index[rows]) - 1
    inside = np.diff(grid.segment[rows]) == 0
    holes = np.where(inside & (steps > 0), steps, 0)
    limit = hole_limit(holes[holes > 0], rows.size)
    findings = []
    short = np.flatnonzero((holes > 0) & (holes <= limit))
    if short.size:
        findings.append(
            Finding(
                "missing_samples",
                float(grid.seconds[rows[short[0]]]),
                float(grid.seconds[rows[short[-1] + 1]]),
                float(holes[short].sum()),
                "samples",
                excluded=True,
                because=f"{plural(int(holes[short].sum()), 'row')} missing in {plural(short.size, 'hole')} of at most {limit} samples",
                disposition="carried as missing, filled by a conditional random draw so that the runs stay whole"
                + (NARROW if holes[short].sum() > CARRIED_SHARE * rows.size else ""),
            )
        )
    gaps = np.flatnonzero(holes > limit)
    for i in gaps[np.argsort(-holes[gaps])][:LISTED_GAPS]:
        left = float(grid.seconds[rows[i]]) + grid.sample_interval
        right = float(grid.seconds[rows[i + 1]])
        findings.append(
            Finding(
                "gap",
                left,
                right,
                right - left,
                "s",
                excluded=False,
                because=f"no rows for {right - left:.6g} s ({int(holes[i])} samples)",
                disposition="the record is split there; no average crosses the gap",
            )
        )
    if gaps.size > LISTED_GAPS:
        findings.append(
            Finding(
                "gap",
                None,
                None,
                float(gaps.size),
                "gaps",
                excluded=False,
                because=f"{gaps.size} gaps in all; the {LISTED_GAPS} longest are listed",
                disposition="the record is split at each",
            )
        )
    if dropped:
        share = 100.0 * dropped / max(1, int(np.count_nonzero(wanted)))
        findings.insert(
            0,
            Finding(
                "gap",
                None,
                None,
                float(dropped),
                "samples",
                excluded=True,
                because=f"{plural(dropped, 'sample')} ({share:.2g} % of the log) in stretches shorter than {SHORTEST_RUN} between gaps",
                disposition="left out",
            ),
        )
    return findings
