"""Each bad input ends in one line that says what was found, what was wanted and the way out, and in its exit code."""

import gzip
import os
import subprocess
import zipfile
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pyarrow as pa
import pytest
from pyarrow import feather, parquet
from scipy import io as scipy_io
from scipy.io import wavfile
from tests.conftest import Command

pytestmark = pytest.mark.installed

Table = Callable[..., Path]


@pytest.fixture
def good(tmp_path: Path, table: Table) -> Path:
    values = np.random.default_rng(1).normal(0.1, 0.02, 200).round(6)
    return table(tmp_path / "good.csv", {"time [s]": (np.arange(200) * 0.01).round(3), "rate": values})


def refused(done: subprocess.CompletedProcess[bytes], code: int, *words: str) -> None:
    text = done.stderr.decode()
    assert done.returncode == code, text
    assert done.stdout == b""
    assert text.startswith("stillbench: ")
    assert text.count("\n") == 1
    for word in words:
        assert word in text, (word, text)


def test_missing_file(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", "god.csv", "--unit", "V"), 1, "no file", "good.csv")
    assert good.exists()


def test_empty_file(stillbench: Command, tmp_path: Path) -> None:
    (tmp_path / "empty.csv").touch()
    refused(stillbench("characterize", "empty.csv", "--unit", "V"), 1, "'empty.csv' is empty")


def test_binary_file_named_csv(stillbench: Command, tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_bytes(np.random.default_rng(0).bytes(5_000))
    refused(stillbench("characterize", "log.csv", "--unit", "V"), 1, "not a text", "Export the log as CSV")


def test_spreadsheet(stillbench: Command, tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "night.xlsx", "w") as archive:
        archive.writestr("[Content_Types].xml", "<Types/>")
    refused(stillbench("characterize", "night.xlsx", "--unit", "V"), 1, "spreadsheet", "save the sheet as CSV")
    (tmp_path / "night.xlsx").rename(tmp_path / "night.zip")
    refused(stillbench("characterize", "night.zip", "--unit", "V"), 1, "spreadsheet", "save the sheet as CSV")


HDF5 = ("characterize", "log.h5", "--unit", "V", "--rate", "1")


def test_hdf5_that_declares_more_than_it_holds(stillbench: Command, tmp_path: Path) -> None:
    """Two kilobytes that declare 1.6 TB."""
    with h5py.File(tmp_path / "log.h5", "w") as file:
        file.create_dataset("rate", shape=(200_000_000_000,), dtype="f8", chunks=(1_000,))
    assert (tmp_path / "log.h5").stat().st_size < 4_000
    refused(stillbench(*HDF5), 1, "declares 1525879 MiB")


def test_hdf5_that_reaches_outside_itself(stillbench: Command, tmp_path: Path) -> None:
    """External links, external storage and virtual datasets."""
    with h5py.File(tmp_path / "inner.h5", "w") as file:
        file["rate"] = np.arange(100.0)
    (tmp_path / "samples.bin").write_bytes(np.arange(100.0).tobytes())
    with h5py.File(tmp_path / "log.h5", "w") as file:
        file["rate"] = h5py.ExternalLink("inner.h5", "rate")
    refused(stillbench(*HDF5), 1, "'/rate' of 'log.h5' is a link to another file")
    with h5py.File(tmp_path / "log.h5", "w") as file:
        file.create_dataset("rate", (100,), "f8", external=[(str(tmp_path / "samples.bin"), 0, 800)])
    refused(stillbench(*HDF5), 1, "lies in another file")
    layout = h5py.VirtualLayout(shape=(100,), dtype="f8")
    layout[:] = h5py.VirtualSource(str(tmp_path / "inner.h5"), "rate", shape=(100,))
    with h5py.File(tmp_path / "log.h5", "w") as file:
        file.create_virtual_dataset("rate", layout)
    refused(stillbench(*HDF5), 1, "put together from other files")


def test_damaged_files_of_every_binary_format(stillbench: Command, tmp_path: Path) -> None:
    """Each cut in half, and each with a stretch of noise in it: one line or a result, never a traceback."""
    generator = np.random.default_rng(9)
    rate = generator.normal(size=2_000)
    np.savez(tmp_path / "log.npz", rate=rate)
    np.save(tmp_path / "log.npy", rate)
    scipy_io.savemat(tmp_path / "log.mat", {"rate": rate}, do_compression=True)
    parquet.write_table(pa.table({"rate": rate}), tmp_path / "log.parquet")
    feather.write_feather(pa.table({"rate": rate}), tmp_path / "log.feather")
    wavfile.write(tmp_path / "log.wav", 100, rate.astype(np.float32))
    with h5py.File(tmp_path / "log.h5", "w") as file:
        file["rate"] = rate
    for path in sorted(tmp_path.glob("log.*")):
        whole = path.read_bytes()
        (tmp_path / f"half{path.suffix}").write_bytes(whole[: len(whole) // 2])
        noisy = bytearray(whole)
        noisy[20:120] = generator.bytes(100)
        (tmp_path / f"noisy{path.suffix}").write_bytes(noisy)
        for name in ("half", "noisy"):
            done = stillbench("characterize", f"{name}{path.suffix}", "--unit", "V", "--rate", "100")
            assert done.returncode in (0, 1, 2), (path, done.stderr)
            assert done.stderr.count(b"\n") <= 2
            assert b"an error of the program" not in done.stderr, (path, done.stderr)


def test_compressed_bombs(stillbench: Command, tmp_path: Path) -> None:
    with pa.CompressedOutputStream(str(tmp_path / "log.csv.zst"), "zstd") as stream:
        for _ in range(300):
            stream.write(b"0" * (1 << 20))
    refused(stillbench("characterize", "log.csv.zst", "--unit", "V", "--rate", "1"), 1, "expands to")


def test_several_logs_without_a_word(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, good, "--unit", "V"), 2, "2 logs are given", "--joined")


def test_column_that_is_not_there(stillbench: Command, good: Path) -> None:
    refused(
        stillbench("characterize", good, "--channel", "rat", "--unit", "V"),
        2,
        "no column 'rat'",
        "Did you mean 'rate'?",
    )
    refused(stillbench("characterize", good, "--channel", "7", "--unit", "V"), 2, "no column number 7", "2 columns")


def test_text_in_a_number_column(stillbench: Command, good: Path) -> None:
    lines = good.read_text().splitlines()
    lines[120] = "1.19,overload"
    good.write_text("\n".join(lines))
    refused(stillbench("characterize", good, "--unit", "V"), 1, "line 121", "'overload'", "'rate'")


def test_no_unit(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good), 2, "no unit", "--unit deg/s")


def test_unit_in_the_head_is_offered(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"rate [°/s]": np.arange(40) % 7})
    refused(stillbench("characterize", "log.csv", "--rate", "10"), 2, "its head says 'deg/s'", "--unit 'deg/s'")


def test_wrong_dimension_of_unit(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, "--unit", "degC"), 2, "a temperature", "a rate")
    refused(stillbench("characterize", good, "--unit", "deg"), 2, "an angle", "increment")
    refused(stillbench("characterize", good, "--unit", "deg/s", "--report-unit", "mg"), 2, "report unit", "rad/s")


def test_unknown_unit(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, "--unit", "furlong"), 2, "'furlong'", "not a known unit")


def test_no_rate_and_no_stamps(stillbench: Command, tmp_path: Path) -> None:
    (tmp_path / "log.txt").write_text("".join(f"{i % 7}\n" for i in range(50)))
    refused(stillbench("characterize", "log.txt", "--unit", "V"), 2, "no rate", "--rate HZ")


@pytest.mark.parametrize("rate", ["0", "-5", "nan"])
def test_rate_that_is_none(stillbench: Command, good: Path, rate: str) -> None:
    refused(stillbench("characterize", good, "--unit", "V", "--rate", rate), 2, "the rate is", "above zero")


def test_unit_of_time_that_is_not_known(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"time": np.arange(50), "rate": np.arange(50) % 7})
    refused(
        stillbench("characterize", "log.csv", "--unit", "V"),
        2,
        "unit of the time column 'time'",
        "--time-unit",
        "ms means 1000 Hz",
    )


def test_fewer_than_sixteen_samples(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"rate": np.arange(15)})
    refused(stillbench("characterize", "log.csv", "--unit", "V", "--rate", "1"), 1, "15 rows", "at least 16")


def test_all_equal_values(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"rate": [2.5] * 50})
    refused(stillbench("characterize", "log.csv", "--unit", "V", "--rate", "1"), 1, "all 50 values", "equal")


def test_only_nan(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"rate": ["nan"] * 50, "other": np.arange(50)})
    refused(
        stillbench("characterize", "log.csv", "--channel", "rate", "--unit", "V", "--rate", "1"), 1, "no finite number"
    )


def test_stamps_running_backwards(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"t [s]": np.arange(50)[::-1], "rate": np.arange(50) % 7})
    refused(stillbench("characterize", "log.csv", "--unit", "V"), 2, "backwards", "Sort the log")


def test_a_folder(stillbench: Command, good: Path, tmp_path: Path) -> None:
    refused(stillbench("characterize", tmp_path, "--unit", "V"), 1, "is a folder", good.name)


def test_a_zip_with_two_files(stillbench: Command, tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "two.zip", "w") as archive:
        archive.writestr("a.csv", "1\n2\n")
        archive.writestr("b.csv", "1\n2\n")
    refused(stillbench("characterize", "two.zip", "--unit", "V"), 1, "2 files", "exactly one")


def test_a_zip_bomb(stillbench: Command, tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "bomb.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("log.csv", b"0\n" * (150 << 20))
    refused(stillbench("characterize", "bomb.zip", "--unit", "V"), 1, "times its size")


def test_a_zip_bomb_that_lies(stillbench: Command, tmp_path: Path) -> None:
    """The declared size is small; the true one shows while expanding."""
    path = tmp_path / "bomb.zip"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("log.csv", b"0\n" * (150 << 20))
    content = bytearray(path.read_bytes())
    for magic, offset in ((b"PK\x03\x04", 22), (b"PK\x01\x02", 24)):
        at = content.index(magic) + offset
        content[at : at + 4] = (1_000).to_bytes(4, "little")
    path.write_bytes(bytes(content))
    done = stillbench("characterize", "bomb.zip", "--unit", "V", "--rate", "1")
    assert done.returncode in (1, 2)
    assert done.stderr.count(b"\n") == 1


def test_a_gzip_bomb(stillbench: Command, tmp_path: Path) -> None:
    with gzip.open(tmp_path / "bomb.csv.gz", "wb") as stream:
        for _ in range(150):
            stream.write(b"0\n" * (1 << 19))
    refused(stillbench("characterize", "bomb.csv.gz", "--unit", "V"), 1, "times its size")


def test_a_damaged_gzip(stillbench: Command, tmp_path: Path) -> None:
    whole = gzip.compress(b"1.5\n" * 5_000)
    (tmp_path / "log.csv.gz").write_bytes(whole[: len(whole) // 2])
    refused(stillbench("characterize", "log.csv.gz", "--unit", "V"), 1, "damaged")


def test_pickled_objects(stillbench: Command, tmp_path: Path) -> None:
    np.save(tmp_path / "log.npy", np.array([{"a": 1}] * 20, dtype=object), allow_pickle=True)
    refused(stillbench("characterize", "log.npy", "--unit", "V", "--rate", "1"), 1, "pickled objects")


def test_an_unwritable_output_folder(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    refused(stillbench("characterize", good, "--unit", "V", "--out", "file"), 1, "'file' is a file")
    refused(stillbench("characterize", good, "--unit", "V", "--out", "file/below"), 1, "cannot write")
    refused(stillbench("characterize", good, "--unit", "V", "--out", "/proc/nowhere"), 1, "cannot write")


def test_an_output_that_is_a_link(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "report.html").symlink_to(tmp_path / "elsewhere")
    refused(stillbench("characterize", good, "--unit", "V", "--out", "out"), 1, "symbolic link")
    assert not (tmp_path / "elsewhere").exists()


@pytest.mark.skipif(os.geteuid() != 0, reason="mounting a small tmpfs needs root")
def test_a_full_disk(stillbench: Command, good: Path, tmp_path: Path) -> None:
    small = tmp_path / "small"
    small.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=64k", "tmpfs", small], capture_output=True, check=False
    )
    if mounted.returncode != 0:
        pytest.skip("this machine does not let a test mount a tmpfs")
    try:
        old = small / "out"
        old.mkdir()
        (old / "result.json").write_text("old\n")
        refused(stillbench("characterize", good, "--unit", "deg/s", "--out", old), 1, "No space left")
        assert [path.name for path in old.iterdir()] == ["result.json"]
        assert (old / "result.json").read_text() == "old\n"
    finally:
        subprocess.run(["umount", small], check=True)


def test_toml_with_several_wrong_keys(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "sheet.toml").write_text(
        '[clock]\nraet = 100\n\n[channel.rate]\nunti = "V"\n\n[sensor]\nserail = "7"\nkind = 3\n'
    )
    done = stillbench("characterize", good, "--log-sheet", "sheet.toml")
    refused(
        done,
        2,
        "4 faults",
        "line 2",
        "did you mean 'rate'?",
        "line 5",
        "did you mean 'unit'?",
        "line 8",
        "did you mean 'serial'?",
        "line 9",
    )


def test_specification_with_several_faults(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "spec.toml").write_text(
        '[[requirement]]\nid = "a"\nquantity = "resolutoin"\nlimit = "0.01 deg/s"\n\n'
        '[[requirement]]\nid = "b"\nquantity = "drift"\nlimit = "0.1"\n\n'
        '[[requirement]]\nid = "c"\nquantity = "drift"\nlimit = "0.1 deg/s"\n'
    )
    done = stillbench("characterize", good, "--unit", "deg/s", "--spec", "spec.toml")
    refused(done, 2, "line 3", "did you mean 'resolution'?", "line 9", "no unit", "averaging_time and null")


def test_toml_that_does_not_parse(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "sheet.toml").write_text("[clock\nrate = 1\n")
    refused(stillbench("characterize", good, "--log-sheet", "sheet.toml"), 2, "sheet.toml", "line 1")
    refused(stillbench("characterize", good, "--log-sheet", "none.toml"), 2, "cannot read the log sheet")


def test_requirement_that_speaks_of_nothing_in_the_log(stillbench: Command, good: Path, tmp_path: Path) -> None:
    (tmp_path / "spec.toml").write_text('[[requirement]]\nid = "a"\nquantity = "bias"\nlimit = "0.01 deg/s"\n')
    refused(
        stillbench("characterize", good, "--unit", "V", "--spec", "spec.toml"),
        2,
        "requirement 'a'",
        "voltage",
        "scale factor",
    )


def test_html_in_names_arrives_escaped(stillbench: Command, tmp_path: Path, table: Table) -> None:
    evil = "<script>alert(1)</script>"
    table(tmp_path / "log.csv", {evil: np.random.default_rng(1).normal(size=300).round(4)})
    done = stillbench("characterize", "log.csv", "--unit", "deg/s", "--rate", "10", "--out", "out")
    assert done.returncode == 0, done.stderr
    page = (tmp_path / "out" / "report.html").read_text()
    assert "<script" not in page
    assert "&lt;script&gt;" in page
    refused(stillbench("characterize", "log.csv", "--unit", evil, "--rate", "10"), 2, "cannot read")


def test_formula_in_a_name_is_no_formula_in_the_table(stillbench: Command, tmp_path: Path, table: Table) -> None:
    table(tmp_path / "log.csv", {"=1+1": np.random.default_rng(1).normal(size=300).round(4)})
    stillbench("characterize", "log.csv", "--unit", "deg/s", "--rate", "10", "--out", "out", check=0)
    assert '"\'=1+1"' in (tmp_path / "out" / "curve.csv").read_text().splitlines()[1]


def test_comma_that_may_be_either(stillbench: Command, tmp_path: Path) -> None:
    (tmp_path / "log.txt").write_text("".join(f"1,{230 + i % 9}\n" for i in range(60)))
    refused(stillbench("characterize", "log.txt", "--unit", "V", "--rate", "1"), 2, "two ways", "decimal")


def test_keep_without_because(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, "--unit", "V", "--keep", "spike"), 2, "--because")
    done = stillbench("characterize", good, "--unit", "V", "--keep", "spik", "--because", "they are real")
    refused(done, 2, "no finding 'spik'", "Did you mean 'spike'?")


def test_spans_that_are_none(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, "--unit", "V", "--from", "5", "--to", "2"), 2, "not after")
    refused(stillbench("characterize", good, "--unit", "V", "--from", "soon"), 2, "'soon'", "row:N")
    refused(stillbench("characterize", good, "--unit", "V", "--from", "03:00"), 2, "clock time")
    refused(stillbench("characterize", good, "--unit", "V", "--from", "100"), 2, "nothing of the log")
    refused(stillbench("characterize", good, "--unit", "V", "--exclude", "1-2"), 2, "'1-2'")


def test_several_devices_in_one_file(stillbench: Command, tmp_path: Path) -> None:
    noise = np.random.default_rng(1).normal(size=(400, 2)).round(3)
    lines = [f"{i % 3 + 1},{100 * (i % 3) + a},{b}\n" for i, (a, b) in enumerate(noise)]
    (tmp_path / "log.csv").write_text("start\nready\n" + "".join(lines))
    refused(
        stillbench("characterize", "log.csv", "--channel", "2", "--unit", "V", "--rate", "1"),
        1,
        "3 devices are interleaved",
    )


def test_unknown_flag_and_command(stillbench: Command, good: Path) -> None:
    refused(stillbench("characterize", good, "--untis", "V"), 2, "--untis")
    refused(stillbench("charakterize"), 2, "charakterize")
