"""The two sensors of the demonstration, their log sheets, and the specification they are held to.

Everything here is invented: the harbour survey launch Tern's sonar mount carries an old spinning-wheel rate gyro, read as a
voltage through a demodulator and a converter, and a MEMS part is tried beside it on the same pier.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from stillbench.foundation.arrays import FloatArray
from stillbench.foundation.files import write_whole
from stillbench.logs.site import earth_rate_along, parse_latitude
from stillbench.simulation.night import Night, make_night

HOURS = 8.0
RATE = 100.0
MADE_AT = "2026-03-02T06:30:00+00:00"
"""The morning after the invented night; stands in the demonstration reports so that they are the same on every machine."""

SCALE_FACTOR = 0.0482
ZERO = 2.5012
EARTH = math.degrees(earth_rate_along(parse_latitude("54 deg"), 0.0, 0.0))
"""deg/s about an axis that points up on the pier; no part of the sensor's null."""
STEP = 5.0 / 65_536
FEW_DEGREES_PER_HOUR = 1.0 / 3_600.0

WHEEL = Night(
    HOURS,
    RATE,
    # deg/s: N 0.15 deg/sqrt(h), B 4 deg/h, K 9 deg/h/sqrt(h).
    {"white": 0.15 / 60.0, "flicker": 4.0 / 3_600.0, "walk": 9.0 / 216_000.0},
    null=0.021 + EARTH,
    seed=1_701,
    spikes=((5_431.27, 0.9), (17_805.6, -0.7)),
    lost=((9_000.0, 9_000.05), (12_345.6, 12_345.61), (20_700.0, 20_742.0)),
)
MEMS = Night(
    HOURS,
    RATE,
    # deg/s: N 0.31 deg/sqrt(h), B 14 deg/h.
    {"white": 0.31 / 60.0, "flicker": 14.0 / 3_600.0},
    null=-0.36 + EARTH,
    seed=1_702,
)

WHEEL_SHEET = """\
# Log sheet of the wheel gyro of the sonar mount, survey launch Tern (invented).
[log]
format = "text"

[clock]
column = "time"
unit = "s"

[channel.rate_out]
column = "rate_out"
unit = "V"

[channel.rate_out.front_end]
zero = "2.5012 V"
scale_factor = "48.2 mV/(deg/s)"
scale_factor_uncertainty = "0.4 %"   # standard, from the turning-jig test sheet
range = "0 V to 5 V"
bits = 16

[sensor]
designation = "WG-2"
serial = "0031"
kind = "spinning-wheel rate gyro"
axis = "z"

[conditions]
temperature = "18.5 degC to 19.5 degC"
latitude = "54 deg"
attitude = "input axis up, within 0.5 deg"
supply = "28.0 V"
excitation = "26 V, 400 Hz"
wheel_frequency = "400 Hz"
mains = "50 Hz"
procedure = "SB-TP-11, clause 6.3"
operator = "night watch"
equipment = ["pier 2", "turning jig 4", "16-bit logger 7"]

[report]
number = "SB-0142"
issue = "1"
client = "Sonar mount of the survey launch Tern, steadying loop"
"""

MEMS_SHEET = """\
# Log sheet of the MEMS part tried on the sonar mount, survey launch Tern (invented).
[log]
format = "text"

[clock]
column = "time"
unit = "s"

[channel.gz]
column = "gz"
unit = "deg/s"

[sensor]
designation = "MP-5"
serial = "0007"
kind = "MEMS rate sensor"
axis = "z"

[conditions]
temperature = "18.5 degC to 19.5 degC"
latitude = "54 deg"
attitude = "input axis up, within 0.5 deg"
supply = "3.30 V"
procedure = "SB-TP-11, clause 6.3"
operator = "night watch"
equipment = ["pier 2", "logger 7"]

[report]
number = "SB-0143"
issue = "1"
client = "Sonar mount of the survey launch Tern, steadying loop"
"""

SPECIFICATION = """\
# Rate sensor of the sonar mount (invented). Resolution and drift are those usual for a good analog rate gyro: common
# practice, no source.
[specification]
title = "Rate sensor of the sonar mount"
issue = "B"

[[requirement]]
id = "resolution"
clause = "3.2.4"
quantity = "resolution"
limit = "0.01 deg/s"
averaging_time = "1 s"

[[requirement]]
id = "drift"
clause = "3.2.5"
quantity = "drift"
limit = "0.1 deg/s"
averaging_time = "1 s"
null = "60 s"
over = "8 h"

[[requirement]]
id = "arw"
clause = "3.2.6"
quantity = "angle random walk"
limit = "0.2 deg/sqrt(h)"

[[requirement]]
id = "bias-instability"
clause = "3.2.7"
quantity = "bias instability"
limit = "5 deg/h"

[[requirement]]
id = "rrw"
clause = "3.2.8"
quantity = "rate random walk"
limit = "10 deg/h/sqrt(h)"
"""


@dataclass(frozen=True)
class Bench:
    """One sensor of the demonstration: file names, recipe, column, and how readings become what the logger wrote."""

    name: str
    words: str
    night: Night
    column: str
    sheet: str
    read_out: Callable[[FloatArray], FloatArray]
    decimals: int


def _as_voltage(rate: FloatArray) -> FloatArray:
    """Read the demodulated rate as a 16-bit converter of 0 V to 5 V does."""
    return np.rint((ZERO + SCALE_FACTOR * rate) / STEP) * STEP


def _as_written(rate: FloatArray) -> FloatArray:
    """Round to the steps of the digital part, 0.0005 deg/s."""
    return np.rint(rate / 0.0005) * 0.0005


BENCHES = (
    Bench("wheel-gyro", "spinning-wheel rate gyro, in volts", WHEEL, "rate_out", WHEEL_SHEET, _as_voltage, 6),
    Bench("mems-part", "MEMS rate sensor, in deg/s", MEMS, "gz", MEMS_SHEET, _as_written, 4),
)


def write_bench(bench: Bench, folder: Path) -> tuple[Path, Path]:
    """Write the night log and the log sheet of one sensor; return their paths."""
    import io  # noqa: PLC0415

    import pyarrow as pa  # noqa: PLC0415  heavy, wanted only here
    from pyarrow import csv  # noqa: PLC0415

    time, rate = make_night(bench.night)
    columns = {"time": np.round(time, 2), bench.column: np.round(bench.read_out(rate), bench.decimals)}
    buffer = io.BytesIO()
    csv.write_csv(pa.table(columns), buffer)
    log, sheet = folder / f"{bench.name}.csv", folder / f"{bench.name}.toml"
    write_whole({log: buffer.getvalue(), sheet: bench.sheet.encode()})
    return log, sheet
