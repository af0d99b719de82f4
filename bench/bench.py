"""Speed and memory, as ratios against named references measured in the same run. Run by `make bench`; writes bench/results.md.

Reference for the curve: allantools.oadev at the same 57 averaging times. Reference for the whole job: the script a user would
write by hand: pandas.read_csv, allantools.oadev at the report's own averaging times, scipy.optimize.curve_fit on the result.
"""

import os

os.environ.setdefault("OMP_NUM_THREADS", "1")

import platform
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from importlib import metadata
from pathlib import Path
from typing import Any
from unittest import mock

import allantools
import numpy as np
import pyarrow as pa
from pyarrow import csv

from stillbench.deviation.averaging import averaging_factors
from stillbench.deviation.overlapping import estimate_deviation, pooled_deviation
from stillbench.identification.identify import identify_noise
from stillbench.logs.cut import cut_record
from stillbench.logs.read import read_log
from stillbench.screening.screen import screen

ROOT = Path(__file__).resolve().parents[1]
RESULTS = ROOT / "bench" / "results.md"
HOURS, RATE, CHANNELS = 12, 200, 3
REPEATS = 3

BY_HAND = """
import sys
import allantools, numpy as np, pandas as pd
from scipy.optimize import curve_fit
frame = pd.read_csv(sys.argv[1])
factors = np.load(sys.argv[2])
for name in frame.columns[1:]:
    rate = frame[name].to_numpy()
    taus, deviation, _, _ = allantools.oadev(rate, rate=200.0, data_type="freq", taus=factors / 200.0)
    model = lambda t, n, b, k: n**2 / t + 0.4413 * b**2 + k**2 * t / 3
    guess = (deviation[0] * taus[0] ** 0.5, deviation.min(), deviation[-1] / taus[-1] ** 0.5)
    best, _ = curve_fit(lambda t, n, b, k: np.log(model(t, n, b, k)), taus, np.log(deviation**2), guess, maxfev=10000)
    print(name, best)
"""


def best_of(work: Callable[[], object], repeats: int = REPEATS) -> float:
    """Return the shortest of several runs, s."""
    times = []
    for _ in range(repeats):
        began = time.perf_counter()
        work()
        times.append(time.perf_counter() - began)
    return min(times)


def timed_child(arguments: list[str | Path]) -> tuple[float, float]:
    """Run a command; return its time, s, and its peak memory, MiB."""
    began = time.perf_counter()
    probe = (
        "import resource, subprocess, sys; code = subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL).returncode;"
        " print(resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss); sys.exit(code)"
    )
    done = subprocess.run(
        [sys.executable, "-c", probe, *map(str, arguments)], capture_output=True, text=True, check=False
    )
    if done.returncode not in (0, 3, 4):
        raise RuntimeError(done.stderr)
    return time.perf_counter() - began, int(done.stdout.split()[-1]) / 1024.0


def curve_lines() -> list[str]:
    """Return the curve estimator against allantools at 57 averaging times of 1e7 samples."""
    rate = np.random.default_rng(1).standard_normal(10_000_000)
    factors = np.unique(np.rint(np.geomspace(1, 3_333_333, 59)).astype(np.int64))[:57]
    theirs = best_of(lambda: allantools.oadev(rate, rate=1.0, data_type="freq", taus=factors))
    one = best_of(lambda: pooled_deviation([rate], factors, processes=1))
    two = best_of(lambda: pooled_deviation([rate], factors, processes=2))
    return [
        f"| Allan deviation, 1e7 samples, {factors.size} averaging times, one process | allantools.oadev {theirs:.2f} s | {one:.2f} s | {theirs / one:.1f} times faster | >= 4.5 |",
        f"| the same, two processes | the same {theirs:.2f} s | {two:.2f} s | {theirs / two:.1f} times faster, {one / two:.2f} times one process | near 9 |",
    ]


def reading_lines(path: Path) -> list[str]:
    """Return how fast a text is read, whole and block by block, against the reader of the library beneath."""
    chosen: dict[str, Any] = {"channels": ["gx", "gy", "gz"], "units": {"": "deg/s"}, "time_unit": "s"}
    theirs = best_of(lambda: csv.read_csv(path))
    ours = best_of(lambda: read_log(path, **chosen))
    with mock.patch("stillbench.logs.text.LARGE", 1_000):
        blockwise = best_of(lambda: read_log(path, **chosen))
    return [
        f"| reading the same CSV, stamps and hash included | pyarrow.csv.read_csv {theirs:.2f} s | {ours:.2f} s | {theirs / ours:.2f} of its speed | >= 0.7 |",
        f"| the same, block by block into scratch files | the same {theirs:.2f} s | {blockwise:.2f} s | {theirs / blockwise:.2f} of its speed | >= 0.7 |",
    ]


def slope_lines() -> list[str]:
    """Return how the time grows with the length of the log, and what each stage costs."""
    lines, totals = [], []
    sizes = (500_000, 4_000_000)
    for n_samples in sizes:
        rate = np.random.default_rng(2).standard_normal(n_samples) + 2e-4 * np.cumsum(
            np.random.default_rng(3).standard_normal(n_samples)
        )
        factors = averaging_factors(100_000)
        log = read_log(rate, units={"": "rad/s"}, rate=200.0)
        record = cut_record(log, "1")
        screened = screen(record)
        curve = estimate_deviation(screened.record, factors)
        stages = {
            "read and cut": best_of(lambda log=log: cut_record(log, "1")),  # type: ignore[misc]
            "screening": best_of(lambda record=record: screen(record)),  # type: ignore[misc]
            "curve": best_of(lambda screened=screened, factors=factors: estimate_deviation(screened.record, factors)),  # type: ignore[misc]
            "fit": best_of(lambda screened=screened, curve=curve: identify_noise(screened.record, curve)),  # type: ignore[misc]
        }
        totals.append(sum(stages.values()))
        lines.append(
            f"| {n_samples} | "
            + " | ".join(f"{1e9 * cost / n_samples:.0f}" for cost in stages.values())
            + f" | {1e9 * totals[-1] / n_samples:.0f} |"
        )
    slope = np.log(totals[1] / totals[0]) / np.log(sizes[1] / sizes[0])
    return [
        "| samples | read and cut | screening | curve (averaging times to 1e5/3 samples) | fit | together |",
        "|---|---|---|---|---|---|",
        *lines,
        "",
        f"Time grows as the length to the power {slope:.2f} (1 is proportional).",
    ]


def whole_lines(folder: Path) -> list[str]:
    """Return the whole job on a large CSV against the script written by hand."""
    n_samples = HOURS * 3600 * RATE
    generator = np.random.default_rng(4)
    columns = {"time": np.arange(n_samples) / RATE}
    for name in ("gx", "gy", "gz")[:CHANNELS]:
        columns[name] = np.round(
            generator.standard_normal(n_samples) + 1e-4 * np.cumsum(generator.standard_normal(n_samples)), 5
        )
    path = folder / "night.csv"
    csv.write_csv(pa.table(columns), path)
    np.save(folder / "factors.npy", averaging_factors(n_samples))
    (folder / "by_hand.py").write_text(BY_HAND)
    command = [
        sys.executable,
        "-m",
        "stillbench",
        "characterize",
        path,
        "--unit",
        "deg/s",
        "--time-unit",
        "s",
        "--channel",
        "gx",
        "--channel",
        "gy",
        "--channel",
        "gz",
        "--out",
        folder / "out",
    ]
    ours, memory = timed_child(command)  # type: ignore[arg-type]
    theirs, their_memory = timed_child([sys.executable, folder / "by_hand.py", path, folder / "factors.npy"])
    channel = n_samples * 8 / 2**20
    allowed = 8 * channel + 500
    return [
        f"| characterize, {n_samples} rows x {CHANNELS} channels of CSV, report included | by hand {theirs:.1f} s | {ours:.1f} s | {ours / theirs:.2f} of its time | <= 0.5 |",
        *reading_lines(path),
        f"| peak memory of the whole job | by hand {their_memory:.0f} MiB | {memory:.0f} MiB | {(memory - 500) / channel:.1f} copies of a channel + 500 MiB | <= {allowed:.0f} MiB |",
    ]


def main() -> None:
    """Measure and write the results."""
    with tempfile.TemporaryDirectory() as name:
        lines = [*curve_lines(), *whole_lines(Path(name))]
    slope = slope_lines()
    versions = ", ".join(
        f"{library} {metadata.version(library)}" for library in ("numpy", "scipy", "pandas", "pyarrow", "allantools")
    )
    RESULTS.write_text(
        "# Bench\n\nRatios of one run of `make bench`, the shortest of three where it is quick. "
        f"Python {platform.python_version()}, {versions}, {os.cpu_count()} processors.\n\n"
        "| what | reference | stillbench | ratio | wanted |\n|---|---|---|---|---|\n"
        + "\n".join(lines)
        + "\n\n## Cost of each stage, nanoseconds a sample\n\n"
        + "\n".join(slope)
        + "\n"
    )
    print(RESULTS.read_text())
    print(
        f"peak memory of the bench itself {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB",
        file=sys.stderr,
    )


if __name__ == "__main__":
    main()
