"""Each format gives back the numbers that another library wrote, bit by bit.

The judges are the writers: numpy, scipy.io, h5py, pyarrow, rosbags, and the standard library.
"""

import gzip
import struct
import sys
import wave
import zipfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pyarrow as pa
import pytest
from pyarrow import feather, parquet
from rosbags.rosbag1 import Writer as Writer1
from rosbags.rosbag2 import StoragePlugin
from rosbags.rosbag2 import Writer as Writer2
from rosbags.typesys import Stores, get_typestore
from scipy import io as scipy_io

from stillbench.foundation.errors import LogError, UsageError
from stillbench.logs.arrays import ArrayTable
from stillbench.logs.formats import GROUP, Format
from stillbench.logs.read import read_log
from stillbench.logs.understand import understand_log
from stillbench.vocabulary.log_sheet import LogSection, LogSheet

N = 500
RATE = np.random.default_rng(11).normal(0.1, 0.02, N)
OTHER = np.random.default_rng(12).normal(-3.0, 1e-9, N)
TIME = np.arange(N) * 0.01


def write_npy(path: Path) -> None:
    np.save(path, np.column_stack([TIME, RATE, OTHER]))


def write_npz(path: Path) -> None:
    np.savez_compressed(path, time=TIME, rate=RATE, other=OTHER)


def write_mat(path: Path) -> None:
    scipy_io.savemat(
        path, {"time": TIME, "sensor": {"rate": RATE, "other": OTHER}, "note": "still"}, do_compression=True
    )


def write_hdf5(path: Path) -> None:
    with h5py.File(path, "w") as file:
        file["time"] = TIME
        file["sensor/rate"] = RATE
        file["sensor/rate"].attrs["units"] = "rad/s"
        file.create_dataset("sensor/other", data=OTHER, compression="gzip", chunks=(100,))
        file["sensor/label"] = "still"


def write_parquet(path: Path) -> None:
    parquet.write_table(pa.table({"time": TIME, "rate": RATE, "other": OTHER}), path)


def write_feather(path: Path) -> None:
    feather.write_feather(pa.table({"time": TIME, "rate": RATE, "other": OTHER}), path, compression="lz4")


@pytest.mark.parametrize(
    ("write", "suffix", "columns"),
    [
        (write_npy, ".npy", ("1", "2", "3")),
        (write_npz, ".npz", ("time", "rate", "other")),
        (write_mat, ".mat", ("time", "sensor.rate", "sensor.other")),
        (write_hdf5, ".h5", ("time", "sensor/rate", "sensor/other")),
        (write_parquet, ".parquet", ("time", "rate", "other")),
        (write_feather, ".feather", ("time", "rate", "other")),
    ],
)
@pytest.mark.parametrize("packing", ["plain", "gzip", "zip", "zstd", "no suffix"])
def test_round_trip(
    tmp_path: Path, write: Callable[[Path], None], suffix: str, columns: tuple[str, str, str], packing: str
) -> None:
    """Chosen by content, whatever the file is called."""
    path = tmp_path / f"log{suffix}"
    write(path)
    if packing == "gzip":
        packed = path.with_name(path.name + ".gz")
        packed.write_bytes(gzip.compress(path.read_bytes()))
        path = packed
    elif packing == "zip":
        packed = tmp_path / "log.zip"
        with zipfile.ZipFile(packed, "w", zipfile.ZIP_DEFLATED) as archive:
            archive.write(path, path.name)
        path = packed
    elif packing == "zstd":
        packed = path.with_name(path.name + ".zst")
        with pa.CompressedOutputStream(str(packed), "zstd") as stream:
            stream.write(path.read_bytes())
        path = packed
    elif packing == "no suffix":
        if suffix == ".npz":
            return  # a zip of arrays is told from a zip with a log by its suffix
        path = path.rename(tmp_path / "log")
    log = read_log(path, channels=columns[1:], units={"": "rad/s"}, time=columns[0], time_unit="s")
    assert np.array_equal(log.channels[0].values, RATE)
    assert np.array_equal(log.channels[1].values, OTHER)
    assert log.stamps is not None
    assert np.array_equal(log.stamps.seconds, TIME)


RAW_TYPES = ("int8", "int16", "int24", "int32", "float32", "float64")


@pytest.mark.parametrize("kind", RAW_TYPES)
@pytest.mark.parametrize("order", ["little", "big"])
@pytest.mark.parametrize("offset", [False, True])
def test_raw_samples(tmp_path: Path, kind: str, order: str, *, offset: bool) -> None:
    """Against struct of the standard library, sample by sample, the extreme codes among them."""
    generator = np.random.default_rng(5)
    mark = "<" if order == "little" else ">"
    if kind.startswith("float"):
        if offset:
            return
        code = "f" if kind == "float32" else "d"
        samples = generator.normal(size=2 * N).astype(np.dtype(code)).tolist()
        body = struct.pack(f"{mark}{2 * N}{code}", *samples)
    else:
        bits = int(kind[3:])
        low, high = -(1 << (bits - 1)), (1 << (bits - 1)) - 1
        samples = [low, high, *generator.integers(low, high, 2 * N - 2, endpoint=True).tolist()]
        shifted = [(sample - low) if offset else sample & ((1 << bits) - 1) for sample in samples]
        body = b"".join(code.to_bytes(bits // 8, "little" if order == "little" else "big") for code in shifted)
    path = tmp_path / "night.bin"
    path.write_bytes(b"HEAD OF THE LOGGER" + body + b"\x01")
    section = LogSection.model_validate(
        {
            "format": "raw",
            "sample_type": kind,
            "byte_order": order,
            "interleaved": 2,
            "head_bytes": 18,
            "offset_binary": offset,
        }
    )
    log = read_log(path, sheet=LogSheet(log=section), channels=["1", "2"], units={"": "V"}, rate=100.0)
    assert log.channels[0].values.tolist() == samples[0::2]
    assert log.channels[1].values.tolist() == samples[1::2]
    assert (kind == "int8") or any("no whole frame" in sentence for sentence in log.understood)


@pytest.mark.parametrize("write", [write_npy, write_npz, write_mat, write_hdf5, write_parquet, write_feather])
def test_check_shows_the_first_and_the_last_rows(tmp_path: Path, write: Callable[[Path], None]) -> None:
    path = tmp_path / ("log.npy" if write is write_npy else "log.npz")
    write(path)
    found = understand_log(path, rate=100.0, time="none")
    column = next(i for i, cell in enumerate(found.first[1]) if float(cell) == RATE[1])
    assert [float(row[column]) for row in found.first] == RATE[:3].tolist()
    assert [float(row[column]) for row in found.last] == RATE[-3:].tolist()
    assert found.rows == N


def test_raw_samples_that_stand_to_the_left(tmp_path: Path) -> None:
    codes = np.random.default_rng(6).integers(-(1 << 17), 1 << 17, N)
    path = tmp_path / "night.bin"
    path.write_bytes((codes << 14).astype(">i4").tobytes())
    section = LogSection(format="raw", sample_type="int32", byte_order="big", bits=18)
    log = read_log(path, sheet=LogSheet(log=section), units={"": "V"}, rate=100.0)
    assert np.array_equal(log.channels[0].values, codes)


def test_raw_samples_want_their_type(tmp_path: Path) -> None:
    path = tmp_path / "night.bin"
    path.write_bytes(bytes(4_000))
    with pytest.raises(UsageError, match="sample_type under"):
        read_log(path, sheet=LogSheet(log=LogSection(format="raw")), units={"": "V"}, rate=100.0)


@pytest.mark.parametrize("width", [1, 2, 3, 4])
def test_wav(tmp_path: Path, width: int) -> None:
    """Against the writer of the standard library; the rate comes from the file, and the reader warns of AC coupling."""
    bits = 8 * width
    codes = np.random.default_rng(7).integers(-(1 << (bits - 1)), 1 << (bits - 1), (N, 2))
    stored = codes + 128 if width == 1 else codes
    path = tmp_path / "night.wav"
    with wave.open(str(path), "wb") as file:
        file.setnchannels(2)
        file.setsampwidth(width)
        file.setframerate(48_000)
        file.writeframes(b"".join((int(v) & ((1 << bits) - 1)).to_bytes(width, "little") for v in stored.ravel()))
    log = read_log(path, channels=["1", "2"], units={"": "V"})
    scale = 256 if width == 3 else 1  # 24 bits stand to the left of 32
    assert np.array_equal(log.channels[1].values, codes[:, 1] * scale)
    assert log.rate == 48_000
    assert any("AC-coupled" in sentence for sentence in log.understood)


def imu_messages() -> tuple[list[int], list[float]]:
    instants = [1_700_000_000_000_000_000 + 10_000_000 * i for i in range(N)]
    return instants, RATE.tolist()


def write_bag(path: Path, kind: str) -> None:
    """Write a bag with inertial messages and one other topic, by the library rosbags."""
    store = get_typestore(Stores.ROS1_NOETIC if kind == "ros1" else Stores.ROS2_HUMBLE)
    types = store.types
    imu, header, stamp = (
        types[name] for name in ("sensor_msgs/msg/Imu", "std_msgs/msg/Header", "builtin_interfaces/msg/Time")
    )
    vector, quaternion, temperature = (
        types[name]
        for name in ("geometry_msgs/msg/Vector3", "geometry_msgs/msg/Quaternion", "sensor_msgs/msg/Temperature")
    )
    nine = np.zeros(9)
    plugin = StoragePlugin.MCAP if kind == "mcap" else StoragePlugin.SQLITE3
    writer: Any = Writer1(path) if kind == "ros1" else Writer2(path, version=9, storage_plugin=plugin)
    pack = store.serialize_ros1 if kind == "ros1" else store.serialize_cdr
    with writer:
        still = writer.add_connection("/still/imu", imu.__msgtype__, typestore=store)
        air = writer.add_connection("/air", temperature.__msgtype__, typestore=store)
        for i, (instant, rate) in enumerate(zip(*imu_messages(), strict=True)):
            extra = {"seq": i} if kind == "ros1" else {}
            head = header(stamp=stamp(sec=instant // 10**9, nanosec=instant % 10**9), frame_id="deck", **extra)
            message = imu(
                header=head,
                orientation=quaternion(x=0.0, y=0.0, z=0.0, w=1.0),
                orientation_covariance=nine,
                angular_velocity=vector(x=rate, y=-rate, z=0.5),
                angular_velocity_covariance=nine,
                linear_acceleration=vector(x=0.0, y=0.0, z=9.81),
                linear_acceleration_covariance=nine,
            )
            writer.write(still, instant + 1_000_000, pack(message, imu.__msgtype__))
            if i % 10 == 0:
                warm = temperature(header=head, temperature=21.0 + i, variance=0.0)
                writer.write(air, instant, pack(warm, temperature.__msgtype__))


@pytest.mark.parametrize("kind", ["ros1", "sqlite3", "mcap"])
def test_bags(tmp_path: Path, kind: str) -> None:
    path = tmp_path / ("night.bag" if kind == "ros1" else "night")
    write_bag(path, kind)
    if kind == "mcap":
        path = next(path.glob("*.mcap"))
    log = read_log(path, channels=["angular_velocity.x"], units={"": "rad/s"})
    assert np.array_equal(log.channels[0].values, RATE)
    assert log.stamps is not None
    assert np.allclose(np.diff(log.stamps.seconds), 0.01, rtol=0, atol=1e-7)
    other = LogSheet(log=LogSection(dataset="/air"))
    log = read_log(path, sheet=other, channels=["temperature"], units={"": "V"})
    assert np.array_equal(log.channels[0].values, 21.0 + 10 * np.arange(N // 10))


def test_a_bag_cut_short_is_read_as_far_as_it_goes(tmp_path: Path) -> None:
    write_bag(tmp_path / "night", "mcap")
    whole = next((tmp_path / "night").glob("*.mcap"))
    path = tmp_path / "torn.mcap"
    path.write_bytes(whole.read_bytes()[: whole.stat().st_size // 2])
    log = read_log(path, channels=["angular_velocity.x"], units={"": "rad/s"})
    rows = log.source.rows
    assert N // 4 < rows < N
    assert np.array_equal(log.channels[0].values, RATE[:rows])
    assert any("cut short" in sentence for sentence in log.understood)


def test_a_format_is_plugged_in_by_an_entry_point(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    class Point:
        def load(self) -> Format:
            return Format(
                ("harbour",),
                lambda contents: bytes(contents.data[:7]) == b"HARBOUR",
                lambda _, __: ArrayTable({"time": TIME, "rate": RATE}, "harbour log", has_heads=True),
            )

    monkeypatch.setattr(
        "stillbench.logs.formats.metadata.entry_points", lambda group: [Point()] if group == GROUP else []
    )
    path = tmp_path / "night.log"
    path.write_bytes(b"HARBOUR 1\x00\x01\x02")
    log = read_log(path, channels=["rate"], units={"": "rad/s"}, time_unit="s")
    assert np.array_equal(log.channels[0].values, RATE)


def test_a_format_that_does_not_exist(tmp_path: Path) -> None:
    path = tmp_path / "night.csv"
    path.write_text("1\n")
    with pytest.raises(UsageError, match="Did you mean 'parquet'"):
        read_log(path, sheet=LogSheet(log=LogSection(format="parket")), units={"": "V"}, rate=1.0)


def test_files_that_make_one_night(tmp_path: Path) -> None:
    """With stamps they follow each other; without, the record is split where the time between is not known."""
    half = N // 2
    for name, rows in (("a.csv", slice(0, half)), ("b.csv", slice(half, N))):
        lines = [f"{t!r},{v!r}" for t, v in zip(TIME[rows].tolist(), RATE[rows].tolist(), strict=True)]
        (tmp_path / name).write_text("time,rate\n" + "\n".join(lines) + "\n")
    paths = [tmp_path / "a.csv", tmp_path / "b.csv"]
    log = read_log(paths, units={"": "rad/s"}, time_unit="s")
    assert np.array_equal(log.channels[0].values, RATE)
    assert log.restarts == (half,)
    assert log.source.name == "a.csv, b.csv"
    (tmp_path / "b.csv").write_text("time,pace\n" + "1,2\n" * 20)
    with pytest.raises(LogError, match="'pace', 'rate'"):
        read_log(paths, units={"": "rad/s"}, time_unit="s")


@pytest.mark.parametrize("write", [write_parquet, write_feather, write_hdf5, write_npy])
def test_long_columns_go_into_scratch_files(
    tmp_path: Path, write: Callable[[Path], None], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The same numbers, whichever way they are read."""
    path = tmp_path / "log.npy"
    write(path)
    for module in ("foundation.scratch", "logs.columnar", "logs.arrays"):
        monkeypatch.setattr(f"stillbench.{module}.LARGE", 100)
    name, time = (
        ("2", "1") if write is write_npy else ("sensor/rate", "time") if write is write_hdf5 else ("rate", "time")
    )
    log = read_log(path, channels=[name], units={"": "rad/s"}, time=time, time_unit="s")
    assert np.array_equal(log.channels[0].values, RATE)


def test_a_library_that_is_not_installed_is_named_with_its_install_line(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_bag(tmp_path / "night.bag", "ros1")
    for module in ("rosbags", "rosbags.highlevel", "rosbags.typesys"):
        monkeypatch.setitem(sys.modules, module, None)
    with pytest.raises(LogError, match=r"the library rosbags, .* python -m pip install rosbags"):
        read_log(tmp_path / "night.bag", units={"": "V"})
