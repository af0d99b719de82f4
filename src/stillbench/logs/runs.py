"""Runs of a record: broken at long gaps, short holes carried as missing samples."""

import itertools
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray, IntArray
from stillbench.vocabulary.record import Clock, Record, Run

LONGEST_HOLE = 20
"""Samples; a longer gap splits the run."""
CARRIED_SHARE = 0.10
"""Of the record that holes may make up in all; beyond, the longest of them split. Filled by the draw of screening/fill.py
they leave estimates and coverage as they were up to that share (tests/calibration/test_holes.py)."""
SINGLES_SHARE = 0.20
"""Of the record that single missing samples may make up in any case: splitting at each would leave nothing of the log."""
SHORTEST_RUN = 16
"""Samples; shorter stretches between gaps are left out."""


def hole_limit(holes: IntArray, n_samples: int) -> int:
    """Return the longest hole that is carried, so that all holes up to that length stay below the share."""
    lost = np.bincount(holes[holes <= LONGEST_HOLE], minlength=LONGEST_HOLE + 1) * np.arange(LONGEST_HOLE + 1)
    within = np.flatnonzero(np.cumsum(lost) <= CARRIED_SHARE * n_samples)
    limit = int(within[-1])
    return 1 if limit == 0 and lost[1] <= SINGLES_SHARE * n_samples else limit


def whole_run(values: FloatArray, start: float = 0.0) -> tuple[FloatArray, BoolArray, tuple[Run, ...], int]:
    """Return values of which none is missing as their own run, in the form of ``build_runs``."""
    if values.size < SHORTEST_RUN:
        return np.empty(0), np.empty(0, dtype=bool), (), values.size
    return values, np.broadcast_to(np.False_, values.shape), (Run(0, values.size, start),), 0


def build_runs(
    values: FloatArray, index: IntArray, segment: IntArray, seconds: FloatArray
) -> tuple[FloatArray, BoolArray, tuple[Run, ...], int]:
    """Lay rows out on the grid.

    Parameters
    ----------
    values, index, segment, seconds : (rows,) arrays
        Finite values, their places, segments and times; only usable rows.

    Returns
    -------
    values, missing : (n,) arrays
        Runs one after the other, NaN and True in holes.
    runs : tuple of Run
    dropped : int
        Rows in stretches that are too short.
    """
    if not values.size:
        return np.empty(0), np.empty(0, dtype=bool), (), 0
    if values.size >= SHORTEST_RUN and index[-1] - index[0] == values.size - 1 and segment[0] == segment[-1]:
        return whole_run(values, float(seconds[0]))
    steps = np.diff(index)
    apart = np.diff(segment) != 0
    limit = hole_limit((steps - 1)[(steps > 1) & ~apart], values.size)
    breaks = np.flatnonzero(apart | (steps - 1 > limit)) + 1
    bounds = np.concatenate([[0], breaks, [values.size]])
    parts, masks, runs = [], [], []
    position = dropped = 0
    for first, last in itertools.pairwise(bounds):
        if last - first < SHORTEST_RUN:
            dropped += int(last - first)
            continue
        places = index[first:last] - index[first]
        length = int(places[-1]) + 1
        part = np.full(length, np.nan)
        part[places] = values[first:last]
        parts.append(part)
        masks.append(np.isnan(part))
        runs.append(Run(position, position + length, float(seconds[first])))
        position += length
    if not runs:
        return np.empty(0), np.empty(0, dtype=bool), (), dropped
    return np.concatenate(parts), np.concatenate(masks), tuple(runs), dropped


def regroup(record: Record, missing: BoolArray) -> Record:
    """Return a record without the samples marked ``missing``: runs are broken or holes carried as the rule says.

    Parameters
    ----------
    record : Record
    missing : (n,) bool array
        On the samples of the record; those already missing included.
    """
    index = np.empty(record.values.size, dtype=np.int64)
    segment = np.empty(record.values.size, dtype=np.int64)
    seconds = np.empty(record.values.size)
    for number, run in enumerate(record.runs):
        places = np.arange(run.n_samples)
        index[run.first : run.last] = places
        segment[run.first : run.last] = number
        seconds[run.first : run.last] = run.start + places * record.sample_interval
    use = ~missing
    values, mask, runs, _ = build_runs(record.values[use], index[use], segment[use], seconds[use])
    return replace(
        record, values=values, missing=mask, runs=runs, clock=clock_of(record.clock, runs, record.sample_interval)
    )


def clock_of(clock: Clock, runs: Sequence[Run], interval: float) -> Clock:
    """Return a clock summary with the spans of other runs."""
    spans = tuple((run.start, run.start + run.n_samples * interval) for run in runs)
    return replace(clock, runs=spans)


def sample_times(record: Record) -> FloatArray:
    """Seconds from the first sample of the log to each sample of the record; shape (n,)."""
    times = np.empty(record.values.size)
    for run in record.runs:
        times[run.first : run.last] = run.start + np.arange(run.n_samples) * record.sample_interval
    return times
