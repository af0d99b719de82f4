"""The screening stage: checks in their order, and what is done about their findings."""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from stillbench.foundation.arrays import BoolArray
from stillbench.foundation.errors import RecordTooShortError, UsageError
from stillbench.foundation.progress import SILENT, Progress
from stillbench.foundation.suggestions import did_you_mean, plural
from stillbench.logs.runs import SHORTEST_RUN, regroup
from stillbench.screening.constant import find_stuck, require_movement
from stillbench.screening.converter import check_converter
from stillbench.screening.fill import fill_holes
from stillbench.screening.motion import find_motion
from stillbench.screening.outcome import Outcome
from stillbench.screening.repeated import undo_repeats
from stillbench.screening.saturation import find_saturation
from stillbench.screening.spikes import find_spikes
from stillbench.screening.variance import find_variance_change
from stillbench.screening.view import RecordView
from stillbench.vocabulary.finding import FINDING_KINDS, Finding
from stillbench.vocabulary.record import Record
from stillbench.vocabulary.screened_record import ScreenedRecord

CHECKS = (find_stuck, find_saturation, find_motion, check_converter, find_spikes, find_variance_change)
"""In this order, each on what the ones before it left; repeated values come before all of them."""


def screen(
    record: Record, *, exclusions: bool = True, keep: Mapping[str, str] | None = None, progress: Progress = SILENT
) -> ScreenedRecord:
    """Screen a record: find what would ruin its numbers, leave it out or carry it, and say so.

    Parameters
    ----------
    record : Record
    exclusions : bool
        Whether findings may leave samples out.
    keep : mapping of finding kind to reason
        Findings that the user overrules: named in the result, their samples stay in.
    progress : Progress

    Returns
    -------
    ScreenedRecord

    Raises
    ------
    UsageError
        For a kind of finding that does not exist.
    NothingToMeasureError
        For a constant channel or one that is never at rest.
    RecordTooShortError
        When fewer than 16 samples are left.
    """
    progress.stage("screening")
    keep = dict(keep or {})
    for kind in keep:
        if kind not in FINDING_KINDS:
            hint = did_you_mean(kind, FINDING_KINDS) or f"the kinds are {', '.join(FINDING_KINDS)}"
            raise UsageError(f"there is no finding {kind!r}", "a kind of finding", hint)
    require_movement(record)
    slower, findings = undo_repeats(record)
    found = list(record.findings)
    if "repeated_values" in keep or (not exclusions and slower is not record):
        found += [_overruled(finding, keep) for finding in findings]
        slower = record
    else:
        found += list(findings)
    # Where values were repeated, what the log offers is the number of values of the sensor.
    offered = max(slower.n_samples, round(record.n_rows * record.sample_interval / slower.sample_interval))
    plain, current, view = slower, slower, RecordView(slower)
    for number, check in enumerate(CHECKS):
        outcome = check(view)
        progress.step((number + 1) / len(CHECKS))
        marked = _judged(outcome, found, keep, exclusions=exclusions)
        if marked.any():
            before, left = current, int(np.count_nonzero(~(current.missing | marked)))
            current = regroup(current, current.missing | marked)
            lost = left - int(np.count_nonzero(~current.missing))
            if lost:
                found.append(_short_stretches(before, lost))
            if not current.runs:
                raise RecordTooShortError(
                    int(np.count_nonzero(~marked)), SHORTEST_RUN, "any estimate after the exclusions listed"
                )
            require_movement(current)
            view = RecordView(current)
    del view
    used = int(np.count_nonzero(~current.missing))
    edited = current is not plain
    return ScreenedRecord(
        _filled(current),
        tuple(found),
        offered,
        used,
        _filled(plain) if edited else None,
    )


def _short_stretches(record: Record, lost: int) -> Finding:
    return Finding(
        "gap",
        None,
        None,
        float(lost),
        "samples",
        excluded=True,
        because=f"{plural(lost, 'sample')} of {record.label} in stretches shorter than {SHORTEST_RUN} between what was left out",
        disposition="left out",
    )


def _filled(record: Record) -> Record:
    return replace(record, values=fill_holes(record))


def _overruled(finding: Finding, keep: Mapping[str, str]) -> Finding:
    if finding.kind in keep:
        return replace(finding, excluded=False, disposition=f"kept on request: {keep[finding.kind]}")
    return replace(finding, excluded=False, disposition="kept: exclusions are switched off")


def _judged(outcome: Outcome, found: list[Finding], keep: Mapping[str, str], *, exclusions: bool) -> BoolArray:
    """Note findings, overruled or not; return the samples to leave out."""
    marked = outcome.marked
    for finding in outcome.findings:
        overruled = finding.excluded and (finding.kind in keep or not exclusions)
        if overruled:
            marked = np.zeros_like(marked)
        found.append(_overruled(finding, keep) if overruled or finding.kind in keep else finding)
    return marked


def levels_differ(findings: tuple[Finding, ...]) -> bool:
    """Whether the sensor stood at different levels in the kept runs (a turn between them)."""
    return any(finding.kind == "motion" and "the level afterwards differs" in finding.because for finding in findings)
