"""Values logged faster than they are refreshed: the true refresh rate is found and the log analysed at that rate.

Must run first: every later figure is wrong otherwise. The share of changes between neighbours is compared with the share
of unequal pairs far apart, which gives the mean hold; the phases of the changes then give it to parts in a million.
"""

from dataclasses import replace

import numpy as np

from stillbench.foundation.arrays import FloatArray, IntArray
from stillbench.logs.runs import SHORTEST_RUN, clock_of
from stillbench.vocabulary.finding import Finding
from stillbench.vocabulary.record import Record, Run

FAR_LAGS = (97, 131, 193, 257)
FEWEST_SAMPLES = 200
HOLD_SCORE = 5.0
SMALLEST_HOLD = 1.02
COARSE_EVENTS = 2_000
FINE_EVENTS = 4_000
FEWEST_EVENTS = 50
FEW_REPEATS = 2.0
"""Below this hold the repeats are fewer than the changes and tell the phase better."""
SIGNIFICANT = 6.0
"""Sum of unit phasors over the square root of their number; chance reaches 4 over the frequencies tried."""
COHERENT_SHARE = 0.5
SEED = 20_011
MOST_COMPARED = 1 << 24
"""Samples in which a hold is looked for."""


def mean_hold(values: FloatArray) -> tuple[float, float, float]:
    """Return the mean number of samples a value is held, the score of the test, and the share of far ties.

    Parameters
    ----------
    values : (n,) float array
        One run; NaN counts as unequal and is left out of the shares.
    """
    pairs = ~(np.isnan(values[1:]) | np.isnan(values[:-1]))
    changes = int(np.count_nonzero((values[1:] != values[:-1]) & pairs)) / max(1, int(np.count_nonzero(pairs)))
    ties = float(
        np.mean(
            [np.mean(values[lag:] == values[:-lag]) for lag in FAR_LAGS if lag <= max(values.size // 2, FAR_LAGS[0])]
        )
    )
    score = (1.0 - ties - changes) / np.sqrt(2.0 * ties * (1.0 - ties) / values.size + 1e-10)
    return (1.0 - ties) / changes if changes > 0 else np.inf, float(score), ties


def _phasor(events: IntArray, frequencies: FloatArray) -> FloatArray:
    return np.asarray(np.abs(np.exp(2j * np.pi * np.outer(frequencies, events)).sum(axis=1)))


def hold_events(values: FloatArray, hold: float) -> IntArray:
    """Return the samples whose places tell the phase of the holds: changes, or repeats where those are the fewer."""
    equal = values[1:] == values[:-1]
    return np.flatnonzero(equal if hold < FEW_REPEATS else ~equal) + 1


def refine_hold(events: IntArray, hold: float) -> tuple[float, float]:
    """Return the hold period from the phases of changes or repeats, and their coherence (1 for regular holds).

    Parameters
    ----------
    events : (c,) int array
        From ``hold_events``.
    hold : float
        A first value, within three percent.
    """
    generator = np.random.default_rng(SEED)
    frequency = 1.0 / hold
    width = 0.03 * min(frequency, max(1.0 - frequency, 1.0 / 64.0))
    stop = min(COARSE_EVENTS, events.size)
    while True:
        part = events[:stop]
        if part.size > FINE_EVENTS:
            part = np.sort(generator.choice(part, FINE_EVENTS, replace=False))
        span = float(part[-1] - part[0])
        grid = frequency + np.arange(-width, width, 0.2 / span)
        frequency = float(grid[np.argmax(_phasor(part, grid))])
        width = 1.0 / span
        if stop == events.size:
            break
        stop = min(events.size, 4 * stop)
    fine = frequency + np.linspace(-0.2, 0.2, 41) / span
    sizes = _phasor(part, fine)
    refined = 1.0 / float(fine[np.argmax(sizes)])
    if abs(refined - round(refined)) < 0.2 / span * refined**2:
        refined = float(round(refined))
    # Phases of the events are even over a share 1/hold (changes) or 1 - 1/hold (repeats) of the period.
    share = 1.0 - 1.0 / refined if hold < FEW_REPEATS else 1.0 / refined
    expected = abs(float(np.sinc(share))) if refined != round(refined) else 1.0
    mean = float(sizes.max()) / part.size
    if mean * np.sqrt(part.size) < SIGNIFICANT:
        return refined, 0.0
    return refined, mean / max(expected, 1e-6)


def undo_repeats(record: Record) -> tuple[Record, tuple[Finding, ...]]:
    """Return the record at its true refresh rate.

    Parameters
    ----------
    record : Record
        Short holes NaN.

    Returns
    -------
    Record
        Unchanged when values are not repeated, or repeated irregularly.
    tuple of Finding
    """
    longest = max(record.runs, key=lambda run: run.n_samples)
    values = record.values[longest.first : longest.last]
    if values.size < FEWEST_SAMPLES:
        return record, ()
    hold, score, ties = mean_hold(values[:MOST_COMPARED])
    if not np.isfinite(hold) or not (score > HOLD_SCORE and hold > SMALLEST_HOLD):
        return record, ()
    events = hold_events(values, hold)
    period, coherence = refine_hold(events, hold) if events.size >= FEWEST_EVENTS else (hold, 0.0)
    if coherence < COHERENT_SHARE:
        if ties > 1e-3:  # noqa: PLR2004  ties by rounding: a slow signal in coarse steps, not a hold
            return record, ()
        return record, (
            Finding(
                "repeated_values",
                None,
                None,
                hold,
                "samples",
                excluded=False,
                because=f"one value in {hold:.3g} is new: values repeat, but not at a steady rate",
                disposition="not corrected: deviations below some ten refresh periods read low",
            ),
        )
    runs, parts, masks, position = [], [], [], 0
    for run in record.runs:
        piece = record.values[run.first : run.last]
        own = hold_events(piece, hold)
        if own.size < SHORTEST_RUN:
            continue
        middle = 0.5 if hold >= FEW_REPEATS else (period + 1.0) / 2.0  # of the events, after the start of a hold
        angle = float(np.angle(np.exp(2j * np.pi * own / period).sum()))
        first = (angle / (2.0 * np.pi) * period - middle) % period
        places = np.rint(np.arange(first + period / 2.0, piece.size - 0.5, period)).astype(np.int64)
        places = places[places < piece.size]
        if places.size < SHORTEST_RUN:
            continue
        parts.append(piece[places])
        masks.append(record.missing[run.first : run.last][places])
        start = run.start + float(places[0]) * record.sample_interval
        runs.append(Run(position, position + places.size, start))
        position += places.size
    interval = record.sample_interval * period
    finding = Finding(
        "repeated_values",
        None,
        None,
        1.0 / interval,
        "Hz",
        excluded=True,
        because=f"each value is logged {period:.6g} times: the log runs at {1.0 / record.sample_interval:.6g} Hz, the"
        f" sensor refreshes at {1.0 / interval:.6g} Hz",
        disposition="analysed at the refresh rate, one sample for each value",
    )
    if not runs:
        return record, ()
    slower = replace(
        record,
        values=np.concatenate(parts),
        missing=np.concatenate(masks),
        sample_interval=interval,
        runs=tuple(runs),
        clock=clock_of(record.clock, runs, interval),
    )
    return slower, (finding,)
