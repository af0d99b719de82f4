"""Clock audit: from stamps to an even grid, with everything that is odd about them found and said.

Where most steps are near whole multiples of one interval, each row gets its place on the grid and a missing row is seen.
Where they are not (stamps in bursts, or coarser than the interval), the rows are taken as even and only long gaps show.
"""

import itertools
from dataclasses import dataclass

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.foundation.errors import ClockError
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.sensor_log import SensorLog, Stamps

NEAR = 0.25
"""A step counts as even when it lies within this share of an interval of a whole multiple."""
EVEN_SHARE = 0.98
COARSE_SHARE = 1.0 / 3.0
"""Of the sampling interval: with stamps written no finer than this, rows that seem lost or doubled may be a beat."""
FEWEST_BEATS = 4
BEAT_SPREAD = 0.3
"""Standard deviation over mean of the distances between odd steps: a beat is regular, chance gives 1."""
REPEATED_SHARE = 0.05
"""Above this share of repeated stamps they are coarser than the sampling."""
BACKWARD_SHARE = 0.2
BURST_SHARE = 0.05
BURST_MULTIPLE = 2.0
LONG_STEP = 1_000.0
"""Stamps come in bursts when more than this share of the steps are multiples and their mean exceeds two usual steps."""
MISMATCH = 0.005
BEND = 0.01
BEND_ROWS = 256
FEWEST_BEND_BLOCKS = 24
SHORTEST_BEND_BLOCK = 8
BEND_WINDOW = 5
BEND_SPREADS = 6.0
SHIFT_UNIT = 1800.0
LARGEST_SHIFT = 14 * 3600.0
LISTED_STEPS = 20
GAP_INTERVALS = 20
FEWEST_STAMPS = 3
BLOCK = 64
LINE_BLOCK = 1 << 18


@dataclass(frozen=True)
class Grid:
    """Where each row stands.

    Attributes
    ----------
    sample_interval : float
        s.
    placed : Placed or None
        Where each row stands, row by row; None where all rows stand in a line, one behind the other.
    rows : int
    source : str
    jitter : float
        s.
    findings : tuple of Finding
    stamps : (rows,) float array or None
        Seconds of the rows that stand in a line, where there are stamps.
    """

    sample_interval: float
    placed: "Placed | None"
    rows: int
    source: str
    jitter: float
    findings: tuple[Finding, ...]
    stamps: FloatArray | None = None

    @property
    def kept(self) -> BoolArray:
        """False for rows with a repeated stamp, shape (rows,)."""
        return self.placed.kept if self.placed else np.broadcast_to(np.True_, (self.rows,))

    @property
    def index(self) -> IntArray:
        """Place on the even grid within its segment's time, shape (rows,); only differences inside a segment count."""
        return self.placed.index if self.placed else np.arange(self.rows)

    @property
    def segment(self) -> IntArray:
        """Rises by one where the time between two rows is not known, shape (rows,)."""
        return self.placed.segment if self.placed else np.broadcast_to(np.int64(0), (self.rows,))

    @property
    def seconds(self) -> FloatArray:
        """Time of each row from the first, shifts of the clock taken out, shape (rows,)."""
        if self.placed is not None:
            return self.placed.seconds
        return self.stamps if self.stamps is not None else np.asarray(np.arange(self.rows) * self.sample_interval)


@dataclass(frozen=True)
class Placed:
    """Places of rows that do not all stand in a line; see Grid for the meaning of each."""

    kept: BoolArray
    index: IntArray
    segment: IntArray
    seconds: FloatArray


def audit_clock(log: SensorLog) -> Grid:
    """Find the even grid of a log.

    Raises
    ------
    ClockError
        When the stamps run backwards or do not move.
    """
    rows = log.source.rows
    if log.stamps is None:
        if log.rate is None:
            raise ClockError("the log has no stamps and no rate", "one of them", "give --rate HZ")
        interval = 1.0 / log.rate
        inner = [row for row in log.restarts if 0 < row < rows]
        if not inner:
            return Grid(interval, None, rows, "declared rate", 0.0, ())
        index = np.arange(rows)
        segment = np.zeros(rows, dtype=np.int64)
        segment[inner] = 1
        placed = Placed(
            np.broadcast_to(np.True_, (rows,)), index, np.cumsum(segment), index.astype(np.float64) * interval
        )
        findings = tuple(_restart(row * interval) for row in inner[:LISTED_STEPS])
        return Grid(interval, placed, rows, "declared rate", 0.0, findings)
    return _audit_stamps(log.stamps, log.rate)


def _restart(seconds: float) -> Finding:
    return Finding(
        "gap",
        seconds,
        None,
        None,
        "s",
        excluded=False,
        because="the logger was started again here, or another file begins, and there are no stamps",
        disposition="the record is split there; how much time passed is not known",
    )


def _on_a_line(stamps: Stamps, rate: float | None) -> Grid | None:
    """Return the grid where every stamp lies within a quarter interval of one line; None where any does not.

    The usual case, done block by block: what the full audit finds of such stamps is only how they scatter.
    """
    seconds = stamps.seconds
    if seconds.size < FEWEST_STAMPS:
        return None
    interval = float(seconds[-1] - seconds[0]) / (seconds.size - 1)
    if not interval > 0:
        return None
    blocks = [(first, min(first + LINE_BLOCK, seconds.size)) for first in range(0, seconds.size, LINE_BLOCK)]
    count = float(seconds.size)
    middle = (count - 1.0) / 2.0
    total = product = 0.0
    for first, stop in blocks:
        off = seconds[first:stop] - (seconds[0] + interval * np.arange(first, stop))
        if np.abs(off).max() >= NEAR / 2.0 * interval:
            return None
        total += float(off.sum())
        product += float(off @ (np.arange(first, stop) - middle))
    slope = product / (count * (count**2 - 1.0) / 12.0)
    mean, square = total / count, 0.0
    for first, stop in blocks:
        off = seconds[first:stop] - (seconds[0] + interval * np.arange(first, stop))
        square += float(np.sum((off - mean - slope * (np.arange(first, stop) - middle)) ** 2))
    interval += slope
    findings = _mismatch(interval, rate)
    jitter = float(np.sqrt(square / count))
    return Grid(interval, None, seconds.size, "stamps", jitter, tuple(findings), seconds)


def _audit_stamps(stamps: Stamps, rate: float | None) -> Grid:
    simple = _on_a_line(stamps, rate)
    if simple is not None:
        return simple
    findings: list[Finding] = []
    steps = np.diff(stamps.seconds)
    if steps.size < FEWEST_STAMPS or not (steps != 0).any():
        raise ClockError(
            f"the stamps in {stamps.column!r} do not move", "stamps that rise", "use --time none --rate HZ"
        )
    if np.count_nonzero(steps < 0) > BACKWARD_SHARE * steps.size:
        raise ClockError(
            f"the stamps in {stamps.column!r} run backwards in {np.count_nonzero(steps < 0)} of {steps.size} steps",
            "stamps that rise",
            "sort the log, name the right column with --time, or use --time none --rate HZ",
        )
    seconds = stamps.seconds.copy()
    if stamps.kind == "local":
        findings += _take_out_shifts(seconds, stamps.origin or 0.0)
    segment = np.zeros(seconds.size, dtype=np.int64)
    findings += _split_backward(seconds, segment)
    _refuse_bend(seconds, stamps.column)
    steps = np.diff(seconds)
    kept = np.ones(seconds.size, dtype=bool)
    repeated = np.append(False, steps == 0)
    by_row = float(np.median(_long_steps(seconds)))
    coarse = bool(np.count_nonzero(repeated) > REPEATED_SHARE * steps.size)
    coarse = coarse or (stamps.resolution > COARSE_SHARE * by_row and _beats(steps, by_row))
    if repeated.any() and not coarse:
        kept = ~repeated
        where = seconds[repeated]
        findings.append(
            Finding(
                "duplicate_stamps",
                float(where[0]),
                float(where[-1]),
                float(where.size),
                "rows",
                excluded=True,
                because=f"{where.size} rows carry the stamp of the row before",
                disposition="the later row of each pair is left out",
            )
        )
    interval, index, even = _place_by_row(seconds, segment, kept) if coarse else _place(seconds, segment, kept)
    jitter = _jitter(seconds, index, segment, kept, interval)
    if not even:
        findings.append(_uneven(stamps, interval, jitter, coarse=coarse, steps=steps))
    findings += _mismatch(interval, rate)
    return Grid(interval, Placed(kept, index, segment, seconds), seconds.size, "stamps", jitter, tuple(findings))


def _refuse_bend(seconds: FloatArray, column: str) -> None:
    """Refuse stamps whose mean step changes by more than a hundredth along the log: two rates, or a clock that drifts.

    Means of the steps over blocks, those over gaps left out, smoothed by a running median so that a burst or a late row is no
    change; the two levels parted best must differ by more than a hundredth and by more than they scatter. So must the medians:
    lost rows change the means only, coarse stamps the medians only.
    """
    steps = np.diff(seconds)
    rows = min(BEND_ROWS, steps.size // FEWEST_BEND_BLOCKS)
    if rows < SHORTEST_BEND_BLOCK:
        return
    count = steps.size // rows
    blocks = steps[: count * rows].reshape(count, rows)
    usual = np.median(blocks, axis=1, keepdims=True)
    single = blocks <= GAP_INTERVALS * np.maximum(usual, float(np.median(steps)))
    level = (blocks * single).sum(axis=1) / np.maximum(single.sum(axis=1), 1)
    window = np.lib.stride_tricks.sliding_window_view(level, BEND_WINDOW)
    smooth = np.median(window, axis=1)
    places = np.arange(1, smooth.size)
    total = np.cumsum(smooth)
    before, after = total[:-1] / places, (total[-1] - total[:-1]) / (smooth.size - places)
    at = int(np.argmax(places * (smooth.size - places) * (after - before) ** 2))
    first, second = float(before[at]), float(after[at])
    spread = max(
        float(np.median(np.abs(smooth[: at + 1] - first))), float(np.median(np.abs(smooth[at + 1 :] - second)))
    )
    middle = [float(np.median(usual[: at + 1])), float(np.median(usual[at + BEND_WINDOW :]))]
    if not first > 0 or abs(second / first - 1.0) <= BEND or abs(second - first) <= BEND_SPREADS * spread:
        return
    if abs(middle[1] - middle[0]) <= BEND * middle[0]:
        return
    when = float(seconds[min(seconds.size - 1, (at + 1 + BEND_WINDOW // 2) * rows)])
    raise ClockError(
        f"the steps of the stamps in {column!r} change from {first:.6g} s to {second:.6g} s ({100 * (second / first - 1):+.3g} %)"
        f" at about {when:.6g} s",
        "one sampling rate",
        f"take one part: --to {when:.6g} or --from {when:.6g}; or --time none --rate HZ if the rows are evenly spaced all the same",
    )


def _take_out_shifts(seconds: FloatArray, origin: float) -> list[Finding]:
    """Undo jumps of a local clock by whole half hours (daylight saving, a changed zone), in place."""
    steps = np.diff(seconds)
    usual = float(np.median(steps[steps > 0]))
    findings: list[Finding] = []
    for i in np.flatnonzero((steps < 0) | (np.abs(steps - 3600.0) <= usual + 2.0)):
        step = float(steps[i])
        shift = np.rint((step - usual) / SHIFT_UNIT) * SHIFT_UNIT
        left = step - shift
        if shift == 0 or abs(shift) > LARGEST_SHIFT or not 0 < left <= 3.0 * usual + 1.0:
            continue
        if shift > 0:
            # An hour that is missing is a change to summer time only when it begins on a full hour.
            past = (origin + seconds[i] + usual + 1.0) % 3600.0
            if usual > 60.0 or past > 2.0 * usual + 2.0:  # noqa: PLR2004  a minute: slower logs cannot show the hour
                continue
        seconds[i + 1 :] -= shift
        findings.append(
            Finding(
                "clock_shift",
                float(seconds[i]),
                float(seconds[i + 1]),
                float(shift),
                "s",
                excluded=False,
                because=f"the local clock jumps by {shift / 3600.0:+g} h between two rows, with no rows missing or doubled",
                disposition="taken as a change of the clock, not as a gap",
            )
        )
    return findings


def _split_backward(seconds: FloatArray, segment: IntArray) -> list[Finding]:
    """Start a new segment where the stamps fall back by an interval or more, in place."""
    steps = np.diff(seconds)
    usual = float(np.median(steps[steps > 0]))
    findings: list[Finding] = []
    back = np.flatnonzero(steps <= -usual)
    for i in back:
        fall = float(steps[i])
        seconds[i + 1 :] += usual - fall
        segment[i + 1 :] += 1
        if len(findings) < LISTED_STEPS:
            findings.append(
                Finding(
                    "backward_stamps",
                    float(seconds[i]),
                    float(seconds[i + 1]),
                    fall,
                    "s",
                    excluded=False,
                    because=f"the stamps fall back by {-fall:.6g} s (a restart of the logger or of its clock)",
                    disposition="the record is split there; how much time passed is not known",
                )
            )
    if back.size > LISTED_STEPS:
        findings.append(
            Finding(
                "backward_stamps",
                None,
                None,
                float(back.size),
                "steps",
                excluded=False,
                because=f"{back.size} backward steps in all; the first {LISTED_STEPS} are listed",
                disposition="the record is split at each",
            )
        )
    return findings


def _slope(seconds: FloatArray, index: IntArray, group: IntArray) -> float:
    """Robust common slope of seconds on index within groups: least squares, stamps beyond 4 deviations left out, twice."""
    use = np.ones(seconds.size, dtype=bool)
    slope = 0.0
    for _ in range(3):
        if not use.any():
            break
        x, y, g = index[use].astype(float), seconds[use], group[use]
        starts = np.flatnonzero(np.append(True, np.diff(g) != 0))
        counts = np.diff(np.append(starts, g.size))
        x_mean = np.repeat(np.add.reduceat(x, starts) / counts, counts)
        y_mean = np.repeat(np.add.reduceat(y, starts) / counts, counts)
        spread = float(np.sum((x - x_mean) ** 2))
        if spread == 0:
            break
        slope = float(np.sum((x - x_mean) * (y - y_mean)) / spread)
        residual = np.full(seconds.size, np.inf)
        residual[use] = y - y_mean - slope * (x - x_mean)
        scale = 1.4826 * float(np.median(np.abs(residual[use])))
        if scale == 0:
            break
        use &= np.abs(residual) <= 4.0 * scale
    return slope


def _beats(steps: FloatArray, interval: float) -> bool:
    """Whether double and zero steps come at regular distances, as when coarse stamps beat against the interval."""
    odd = np.flatnonzero((steps == 0) | ((steps > (1.0 + 2.0 * NEAR) * interval) & (steps < 3.0 * interval)))
    if odd.size < FEWEST_BEATS:
        return False
    distance = np.diff(odd)
    return bool(distance.std() < BEAT_SPREAD * distance.mean())


def _long_steps(seconds: FloatArray) -> FloatArray:
    """Mean steps over stretches of 64 rows, s; of all rows where there are fewer."""
    reach = min(BLOCK, seconds.size - 1)
    return np.asarray((seconds[reach:] - seconds[:-reach]) / reach)


def _place(seconds: FloatArray, segment: IntArray, kept: BoolArray) -> tuple[float, IntArray, bool]:
    """Return the interval, the place of every row, and whether the stamps are even."""
    t, s = seconds[kept], segment[kept]
    steps = np.diff(t)
    inside = np.diff(s) == 0
    usual = float(np.median(steps[inside & (steps > 0)]))
    # The mean of the single steps: coarse stamps make the median jump, lost and late rows would draw a mean of all.
    single = inside & (np.abs(steps / usual - 1.0) < NEAR)
    usual = float(steps[single].mean()) if single.any() else usual
    for _ in range(2):
        multiple = np.maximum(np.rint(steps / usual), 1.0)
        near = (np.abs(steps / usual - multiple) < NEAR) | ~inside
        # In bursts the usual step is that inside a packet: many steps are then long, and some are very long.
        mean_multiple = float(np.minimum(multiple, LONG_STEP).mean())
        bursts = np.count_nonzero(multiple > 1) > BURST_SHARE * steps.size and mean_multiple > BURST_MULTIPLE
        if np.count_nonzero(near) < EVEN_SHARE * steps.size or bursts:
            return _place_by_row(seconds, segment, kept)
        multiple = np.where(inside, multiple, 1.0)
        place = np.append(0, np.cumsum(multiple)).astype(np.int64)
        if not near.all():
            place = _place_along_line(t, s, usual)
        short = np.diff(place) <= GAP_INTERVALS + 1
        # Groups end at long gaps, over which an interval that is a little wrong counts too many or too few.
        group = np.append(0, np.cumsum(~(inside & short)))
        usual = _slope(t, place, group)
    index = np.zeros(seconds.size, dtype=np.int64)
    index[kept] = place
    return usual, index, True


def _place_along_line(seconds: FloatArray, segment: IntArray, interval: float) -> IntArray:
    """Return places as whole intervals along a line whose offset follows the median of each block of 64 rows.

    A row that is stamped late stands where the line puts it, and the next one is not pushed on by it.
    """
    place = np.empty(seconds.size, dtype=np.int64)
    last, offset = -1, seconds[0] / interval
    bounds = np.unique(
        np.concatenate([np.arange(0, seconds.size, BLOCK), np.flatnonzero(np.diff(segment)) + 1, [seconds.size]])
    )
    for first, stop in itertools.pairwise(bounds.tolist()):
        turns = seconds[first:stop] / interval - offset
        if first and segment[first] != segment[first - 1]:
            shift = last + 1 - turns[0]  # the time between is not known: the next place will do
            offset -= shift
            turns = turns + shift
        rows = np.arange(stop - first)
        wanted = np.rint(turns).astype(np.int64)
        # Places rise from row to row: a late row gives way to the one behind it, and none goes back behind the last.
        wanted = np.minimum.accumulate((wanted - rows)[::-1])[::-1] + rows
        wanted = np.maximum.accumulate(np.maximum(wanted - rows, last + 1)) + rows
        place[first:stop] = wanted
        offset += float(np.clip(np.median(turns - wanted), -NEAR, NEAR))
        last = int(wanted[-1])
    return place


def _place_by_row(seconds: FloatArray, segment: IntArray, kept: BoolArray) -> tuple[float, IntArray, bool]:
    """Take rows as even; leave room on the grid only where a long gap shifts all that follows."""
    t, s = seconds[kept], segment[kept]
    steps = np.diff(t)
    rows = np.arange(t.size)
    group = s.copy()
    interval = _slope(t, rows, group)
    if not interval > 0:
        raise ClockError("the stamps hardly move", "stamps that rise", "use --time none --rate HZ")
    suspects = np.flatnonzero((steps > GAP_INTERVALS * interval) & (steps > 3.0 * np.quantile(steps, 0.999)))
    jumps = np.zeros(t.size, dtype=np.int64)
    for i in suspects:
        window = 200
        before = np.median((t - interval * rows)[max(0, i - window + 1) : i + 1])
        after = np.median((t - interval * rows)[i + 1 : i + 1 + window])
        if after - before > 0.5 * steps[i]:
            jumps[i + 1] = max(1, round(float(after - before) / interval))
            group[i + 1 :] += 1
    interval = _slope(t, rows, group)
    index = np.zeros(seconds.size, dtype=np.int64)
    index[kept] = rows + np.cumsum(jumps)
    return interval, index, False


def _jitter(seconds: FloatArray, index: IntArray, segment: IntArray, kept: BoolArray, interval: float) -> float:
    """Return the standard deviation of the stamps about the even grid, robust, s."""
    t, k, s = seconds[kept], index[kept], segment[kept]
    group = np.append(0, np.cumsum((np.diff(s) != 0) | (np.diff(k) > GAP_INTERVALS)))
    starts = np.flatnonzero(np.append(True, np.diff(group) != 0))
    counts = np.diff(np.append(starts, group.size))
    residual = t - interval * k
    residual = residual - np.repeat(np.add.reduceat(residual, starts) / counts, counts)
    return float(np.sqrt(np.mean(residual**2)))


def _uneven(stamps: Stamps, interval: float, jitter: float, *, coarse: bool, steps: FloatArray) -> Finding:
    if coarse:
        return Finding(
            "stamp_resolution",
            None,
            None,
            stamps.resolution,
            "s",
            excluded=False,
            because=f"the stamps are written to {stamps.resolution:g} s, coarser than the interval of {interval:.6g} s",
            disposition="rows are taken as even; single missing rows cannot be seen",
        )
    usual = float(np.median(steps[steps > 0]))
    return Finding(
        "clock_jitter",
        None,
        None,
        jitter,
        "s",
        excluded=False,
        because=f"the stamps are uneven: the usual step is {usual:.4g} s though rows come every {interval:.6g} s on the"
        " average (bursts, or stamps of the host)",
        disposition="the sensor's own clock is taken as even; single missing rows cannot be seen",
    )


def _mismatch(interval: float, rate: float | None) -> list[Finding]:
    if rate is None or abs(rate * interval - 1.0) <= MISMATCH:
        return []
    because = f"the stamps say {1.0 / interval:.6g} Hz, the declared rate is {rate:.6g} Hz"
    return [
        Finding(
            "rate_mismatch",
            None,
            None,
            1.0 / interval,
            "Hz",
            excluded=False,
            because=because,
            disposition="the stamps are used",
        )
    ]
