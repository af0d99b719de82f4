"""Stops, turns and plateaus in a log of a sensor that is turned on purpose."""

import numpy as np

from stillbench.foundation.arrays import BoolArray, FloatArray
from stillbench.foundation.errors import LogError

BLOCKS_A_SECOND = 8.0
SHORTEST_BLOCK = 4
STILL_QUANTILE = 0.25
MOVING = 6.0
"""Spreads of a still block by which a block's mean departs from the null, or its spread grows, when it is turned."""
SHORTEST_STOP = 3
"""Blocks."""
EDGE = 2
"""Blocks that a turn is widened by on both sides, so that it is whole."""
LEVEL_STEP = 6.0


def _blocks(values: FloatArray, interval: float) -> tuple[FloatArray, FloatArray, int]:
    length = max(SHORTEST_BLOCK, round(1.0 / (BLOCKS_A_SECOND * interval)))
    count = values.size // length
    if count < 4 * SHORTEST_STOP:
        raise LogError(f"the log has {values.size} samples", "stops and turns of some seconds", "log for longer")
    rows = values[: count * length].reshape(count, length)
    return rows.mean(axis=1), rows.std(axis=1), length


def _stretches(flags: BoolArray) -> list[tuple[int, int]]:
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))


def find_turns(values: FloatArray, interval: float) -> list[tuple[int, int]]:
    """Return first and past-the-last sample of every turn between two stops.

    Parameters
    ----------
    values : (n,) float array
        Readings.
    interval : float
        s.

    Raises
    ------
    LogError
        When there is no turn, or no stop before the first or after the last.
    """
    mean, spread, length = _blocks(values, interval)
    still = float(np.quantile(spread, STILL_QUANTILE))
    quiet = spread <= MOVING * still
    # The null is the level at which the sensor rests most of the time.
    null = float(np.median(mean[quiet]))
    off = np.abs(mean - null) > max(MOVING * still / np.sqrt(length) * 2.0, 0.01 * float(np.abs(mean - null).max()))
    moving = off | (spread > MOVING * still)
    for first, last in _stretches(~moving):  # a moment of rest within a turn is part of it
        if last - first < SHORTEST_STOP and first > 0 and last < moving.size:
            moving[first:last] = True
    turns = _stretches(moving)
    if not turns:
        raise LogError("no turn is seen in the log", "turns with stops between them")
    if turns[0][0] < SHORTEST_STOP or turns[-1][1] > mean.size - SHORTEST_STOP:
        raise LogError(
            "the log begins or ends within a turn",
            "a stop before the first turn and after the last",
            "log again, or use --from",
        )
    return [(max(0, first - EDGE) * length, min(mean.size, last + EDGE) * length) for first, last in turns]


def find_plateaus(values: FloatArray, interval: float) -> list[tuple[int, int]]:
    """Return first and past-the-last sample of the plateaus at which the reading stands still, edges cut.

    Parameters
    ----------
    values : (n,) float array
    interval : float
        s.

    Raises
    ------
    LogError
        When the log is too short for plateaus.
    """
    mean, spread, length = _blocks(values, interval)
    still = float(np.quantile(spread, STILL_QUANTILE))
    step = LEVEL_STEP * max(still / np.sqrt(length), 1e-3 * float(np.ptp(mean)) / LEVEL_STEP)
    jump = np.concatenate([[False], np.abs(np.diff(mean)) > 2.0 * step]) | (spread > MOVING * still)
    jump[:-1] |= jump[1:]
    found = [(first, last) for first, last in _stretches(~jump) if last - first >= SHORTEST_STOP + 2]
    return [((first + 1) * length, (last - 1) * length) for first, last in found]
