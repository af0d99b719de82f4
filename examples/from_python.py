"""Characterize an array, print the noise terms, write the report. Invented data: an hour of a made rate sensor at 50 Hz."""

import sys
from pathlib import Path

import numpy as np

from stillbench import characterize, render_report

folder = Path(sys.argv[1] if len(sys.argv) > 1 else ".")
generator = np.random.default_rng(7)
rate = 0.05 + 0.02 * generator.standard_normal(180_000)  # deg/s

result = characterize(rate, rate=50.0, unit="deg/s", name="made hour", made_at="2026-03-02T06:30:00")
for channel in result.channels:
    print(channel.noise.to_frame()[["coefficient", "lower", "upper", "unit", "state"]])
(folder / "made-hour.html").write_bytes(render_report(result))
