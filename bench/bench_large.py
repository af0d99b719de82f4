"""Time and memory of large logs, up to a thousand million samples. Run by `make bench-large`; writes bench/large.md.

A raw binary log of 24-bit samples is made block by block; `stillbench characterize` reads it. Memory is that of the process and
its helper together, mapped files left out. The curve is timed at the same 57 averaging times for every length.
"""

import argparse
import os

os.environ.setdefault("OMP_NUM_THREADS", "1")

import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from stillbench.deviation.averaging import averaging_factors
from stillbench.deviation.overlapping import pooled_deviation
from stillbench.foundation.scratch import blocks, large_array

ROOT = Path(__file__).resolve().parents[1]
RESULTS = ROOT / "bench" / "large.md"
CHUNK = 1 << 22
LONGEST_FACTOR = 3_000_000
SHEET = """
[log]
format = "raw"
sample_type = "int24"
[clock]
rate = 1000.0
[channel.1]
unit = "count"
"""


def make_log(path: Path, n_samples: int) -> None:
    """Write white noise of 100 counts over a random walk."""
    generator, level = np.random.default_rng(1), 0.0
    with path.open("wb") as file:
        for part in blocks(n_samples, CHUNK):
            walk = level + 0.02 * np.cumsum(generator.standard_normal(part.stop - part.start))
            level = float(walk[-1])
            codes = np.rint(100.0 * generator.standard_normal(walk.size) + walk).astype("<i4")
            file.write(np.ascontiguousarray(codes.view(np.uint8).reshape(-1, 4)[:, :3]).tobytes())


def family(pid: int) -> list[int]:
    """Return a process and all that it started."""
    try:
        children = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
    except OSError:
        return [pid]
    return [pid, *(member for child in children for member in family(int(child)))]


def memory(pid: int) -> float:
    """Return anonymous and shared memory of a process, MiB; mapped files left out."""
    try:
        status = Path(f"/proc/{pid}/status").read_text()
    except OSError:
        return 0.0
    return (
        sum(int(line.split()[1]) for line in status.splitlines() if line.startswith(("RssAnon", "RssShmem"))) / 1024.0
    )


def characterized(path: Path, sheet: Path, scratch: Path) -> tuple[float, float]:
    """Run the command; return its time, s, and its peak memory, MiB."""
    command = [sys.executable, "-m", "stillbench", "characterize", path, "--log-sheet", sheet, "--scratch", scratch]
    began, peak = time.perf_counter(), 0.0
    process = subprocess.Popen(
        [*map(str, command), "--quiet", "--json", str(path.with_suffix(".json"))], stdout=subprocess.DEVNULL
    )
    while process.poll() is None:
        peak = max(peak, sum(map(memory, family(process.pid))))
        time.sleep(0.05)
    if process.returncode:
        raise RuntimeError(process.returncode)
    return time.perf_counter() - began, peak


def curve_time(n_samples: int) -> float:
    """Return the time of the curve at 57 averaging times, s."""
    factors = np.unique(np.rint(np.geomspace(1, LONGEST_FACTOR, 59)).astype(np.int64))[:57]
    generator, values = np.random.default_rng(2), large_array(n_samples)
    for part in blocks(n_samples, CHUNK):
        values[part] = generator.standard_normal(part.stop - part.start)
    began = time.perf_counter()
    pooled_deviation([values], factors)
    return time.perf_counter() - began


def main() -> None:
    """Measure and write the results."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--sizes", type=float, nargs="+", default=[1e7, 1e8, 1e9])
    parser.add_argument("--out", type=Path, default=RESULTS)
    parser.add_argument("--most-memory", type=float, help="MiB; exit with an error when more was needed")
    chosen = parser.parse_args()
    lines = []
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "sheet.toml").write_text(SHEET)
        for size in map(int, chosen.sizes):
            curve = curve_time(size)
            path = folder / f"{size}.bin"
            make_log(path, size)
            whole, peak = characterized(path, folder / "sheet.toml", folder)
            path.unlink()
            lines.append((size, curve, whole, peak, averaging_factors(size).size))
            print(lines[-1], flush=True)
    first = lines[0]
    rows = [
        f"| {size:.0e} | {1e9 * curve / size:.0f} | {curve / size / (first[1] / first[0]):.2f} | {whole:.0f} | {count} | {1e9 * whole / size:.0f} | {peak:.0f} |"
        for size, curve, whole, peak, count in lines
    ]
    chosen.out.write_text(
        "# Large logs\n\nOne run of `make bench-large`: raw 24-bit samples, one channel; memory of the process and its helper, mapped"
        " files left out.\n\n| samples | curve at 57 averaging times, ns a sample | over the shortest | characterize, s | its averaging"
        " times | ns a sample | peak memory, MiB |\n|---|---|---|---|---|---|---|\n" + "\n".join(rows) + "\n"
    )
    print(chosen.out.read_text())
    if chosen.most_memory is not None and max(peak for *_, peak, _ in lines) > chosen.most_memory:
        sys.exit(f"more than {chosen.most_memory:g} MiB were needed")


if __name__ == "__main__":
    main()
