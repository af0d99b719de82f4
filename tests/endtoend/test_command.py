"""The command as a user starts it: outputs, exit codes, what --help loads, the same bytes for the same input."""

import json
import subprocess
import sys
from collections.abc import Callable
from importlib import resources
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from tests.conftest import Command, made_noise

pytestmark = pytest.mark.installed

SPECIFICATION = """
[specification]
title = "made"
[[requirement]]
id = "r1"
clause = "1"
quantity = "resolution"
limit = "{resolution} deg/s"
averaging_time = "1 s"
[[requirement]]
id = "r2"
quantity = "rate random walk"
limit = "{walk} deg/h/sqrt(h)"
"""


@pytest.fixture
def log(tmp_path: Path, table: Callable[..., Path]) -> Path:
    rate = 0.3 + made_noise(40_000, 9, white=0.02)
    return table(tmp_path / "log.csv", {"time [s]": (np.arange(40_000) * 0.02).round(2), "rate": rate.round(6)})


def test_help_loads_click_and_a_version_only() -> None:
    code = (
        "import sys; before = set(sys.modules); from stillbench.cli.main import _run; _run(['--help'])\n"
        "new = {name.split('.')[0] for name in set(sys.modules) - before}\n"
        "ours = {name for name in sys.modules if name.startswith('stillbench')}\n"
        "print('|', sorted(new - set(sys.stdlib_module_names)), sorted(ours))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    loaded = done.stdout.rsplit("|", 1)[1]
    assert loaded.strip() == (
        "['click', 'stillbench'] ['stillbench', 'stillbench.cli', 'stillbench.cli.main', 'stillbench.version']"
    )


def test_files_and_json(stillbench: Command, log: Path, tmp_path: Path) -> None:
    done = stillbench("characterize", log, "--unit", "deg/s", "--out", "out", "--made-at", "2026-03-02T06:30:00")
    assert done.returncode == 0
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == ["curve.csv", "report.html", "result.json"]
    result = json.loads((tmp_path / "out" / "result.json").read_text())
    assert (result["schema"], result["version"]) == ("stillbench/characterization", 1)
    assert result["made_at"] == "2026-03-02T06:30:00+00:00"
    channel = result["channels"][0]
    terms = channel["noise"]["terms"]
    assert set(terms) == {"angle_random_walk", "bias_instability", "rate_random_walk", "rate_ramp"}
    white = terms["angle_random_walk"]
    assert white["unit"] == "rad/sqrt(s)"
    assert white["lower"] < np.radians(0.02) * np.sqrt(0.02) < white["upper"]
    assert terms["bias_instability"]["state"] == "upper bound"
    assert channel["noise"]["accepted"] == [["angle_random_walk"]]
    assert channel["bias"]["lower"] < np.radians(0.3) < channel["bias"]["upper"]
    head, *rows = (tmp_path / "out" / "curve.csv").read_text().splitlines()
    assert head.startswith("channel,unit,tau_s,deviation,lower,upper")
    assert len(rows) == len(channel["curve"]["tau_s"])
    assert channel["curve"]["tau_s"][-1] == pytest.approx(40_000 // 3 * 0.02)


def test_json_keeps_its_schema(stillbench: Command, log: Path) -> None:
    done = stillbench("characterize", log, "--unit", "deg/s", "--json", "-", "--quiet", check=0)
    schema = json.loads((resources.files("stillbench.archive") / "schema" / "characterization-1.json").read_text())
    jsonschema.validate(json.loads(done.stdout), schema, cls=jsonschema.Draft202012Validator)
    assert done.stderr == b""


@pytest.mark.parametrize(
    ("resolution", "walk", "code"), [(1.0, 1000.0, 0), (0.001, 1000.0, 3), (1.0, 1e-3, 4), (0.001, 1e-3, 3)]
)
def test_exit_codes_of_verdicts(
    stillbench: Command, log: Path, tmp_path: Path, resolution: float, walk: float, code: int
) -> None:
    (tmp_path / "spec.toml").write_text(SPECIFICATION.format(resolution=resolution, walk=walk))
    flags = ["characterize", log, "--unit", "deg/s", "--spec", "spec.toml"]
    assert stillbench(*flags).returncode == code
    assert stillbench(*flags, "--json", "-").returncode == code


def test_same_input_same_bytes(stillbench: Command, log: Path, tmp_path: Path) -> None:
    other = tmp_path / "other folder"
    other.mkdir()
    copy = other / log.name
    copy.write_bytes(log.read_bytes())
    flags = ["--unit", "deg/s", "--made-at", "2026-03-02"]
    stillbench("characterize", log, *flags, "--out", "a", check=0, PYTHONHASHSEED="1", TZ="UTC", LC_ALL="C")
    stillbench(
        "characterize", copy, *flags, "--out", "b", check=0, PYTHONHASHSEED="2", TZ="Asia/Tokyo", OMP_NUM_THREADS="2"
    )
    stillbench("characterize", log, "--unit", "deg/s", "--out", "c", check=0, SOURCE_DATE_EPOCH="1772409600")
    for name in ("report.html", "result.json", "curve.csv"):
        first = (tmp_path / "a" / name).read_bytes()
        assert first == (tmp_path / "b" / name).read_bytes()
        assert first == (tmp_path / "c" / name).read_bytes()
        assert str(tmp_path).encode() not in first


def test_old_files_are_replaced_whole_and_others_left(stillbench: Command, log: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    out.mkdir()
    (out / "result.json").write_text("old")
    (out / "mine.txt").write_text("mine")
    stillbench("characterize", log, "--unit", "deg/s", "--out", out, check=0)
    assert (out / "mine.txt").read_text() == "mine"
    assert json.loads((out / "result.json").read_text())["version"] == 1
    assert len(list(out.iterdir())) == 4


def test_nothing_is_written_unless_asked(stillbench: Command, log: Path, tmp_path: Path) -> None:
    stillbench("characterize", log, "--unit", "deg/s", check=0)
    assert [path.name for path in tmp_path.iterdir()] == [log.name]


def test_terminal_output_is_plain_ascii(stillbench: Command, log: Path) -> None:
    done = stillbench("characterize", log, "--unit", "°/s", check=0)
    assert done.stdout.isascii()
    assert b"\x1b" not in done.stdout + done.stderr
    text = done.stdout.decode()
    assert "angle random walk" in text
    assert "deg/sqrt(h)" in text
    assert "override with --time" in text


def test_channels_all_with_units_from_flags(stillbench: Command, tmp_path: Path, table: Callable[..., Path]) -> None:
    noise = [made_noise(2_000, seed, white=1.0).round(5) for seed in range(4)]
    table(tmp_path / "log.csv", dict(zip(["gx", "gy", "ax", "temp"], noise, strict=True)))
    flags = ["--rate", "50", "--json", "-", "--channel", "all"]
    done = stillbench("characterize", "log.csv", *flags, "--unit", "gx=deg/s", "--unit", "ax=mg", check=0)
    channels = json.loads(done.stdout)["channels"]
    assert [(c["label"], c["quantity"]) for c in channels] == [("gx", "angular rate"), ("ax", "acceleration")]
    assert "velocity_random_walk" in channels[1]["noise"]["terms"]
    assert stillbench("characterize", "log.csv", "--rate", "50").returncode == 2


def test_voltage_through_the_front_end_is_the_rate(
    stillbench: Command, tmp_path: Path, table: Callable[..., Path]
) -> None:
    rate = 0.3 + made_noise(20_000, 4, white=0.02)  # deg/s
    table(tmp_path / "volts.csv", {"u": (2.5 + 0.05 * rate).round(9)})
    (tmp_path / "sheet.toml").write_text(
        '[clock]\nrate = 50\n[channel.u]\nunit = "V"\n[channel.u.front_end]\nzero = "2.5 V"\n'
        'scale_factor = "50 mV/(deg/s)"\nscale_factor_uncertainty = "2 %"\n'
    )
    done = stillbench("characterize", "volts.csv", "--log-sheet", "sheet.toml", "--json", "-", check=0)
    channel = json.loads(done.stdout)["channels"][0]
    white = channel["noise"]["terms"]["angle_random_walk"]
    truth = np.radians(0.02) / np.sqrt(50)
    assert channel["quantity"] == "angular rate"
    assert white["coefficient"] == pytest.approx(truth, rel=4 / np.sqrt(2 * 20_000))  # four standard errors
    # The common factor rules: 2 % standard, 1.96 times on each side.
    assert (white["upper"] / white["coefficient"] - 1) == pytest.approx(1.96 * 0.02, rel=0.1)
    assert channel["bias"]["value"] == pytest.approx(np.radians(0.3), abs=5 * np.radians(0.02) / np.sqrt(20_000))

    done = stillbench("characterize", "volts.csv", "--unit", "V", "--rate", "50", "--json", "-", check=0)
    channel = json.loads(done.stdout)["channels"][0]
    assert channel["unit"] == "V"
    assert set(channel["noise"]["terms"]) == {"white_noise", "flicker_noise", "random_walk", "ramp"}
    assert "scale_factor_unknown" in {finding["kind"] for finding in channel["findings"]}


def test_findings_can_be_overruled_by_name(stillbench: Command, tmp_path: Path, table: Callable[..., Path]) -> None:
    rate = made_noise(5_000, 4, white=1.0)
    rate[2_000] += 200.0
    table(tmp_path / "log.csv", {"rate": rate.round(5)})
    flags = ["characterize", "log.csv", "--unit", "deg/s", "--rate", "50"]
    run = {
        "screened": [],
        "kept": ["--keep", "spike", "--because", "a door was slammed <on> purpose"],
        "all": ["--no-exclusions"],
    }
    channels = {
        name: json.loads(stillbench(*flags, *extra, "--json", "-", check=0).stdout)["channels"][0]
        for name, extra in run.items()
    }
    white = {name: channel["noise"]["terms"]["angle_random_walk"]["coefficient"] for name, channel in channels.items()}
    assert white["kept"] == white["all"] > 2 * white["screened"]
    spikes = {name: next(f for f in channel["findings"] if f["kind"] == "spike") for name, channel in channels.items()}
    assert spikes["screened"]["excluded"]
    assert spikes["screened"]["start_s"] == pytest.approx(40.0)
    assert not spikes["kept"]["excluded"]
    assert "slammed <on> purpose" in spikes["kept"]["disposition"]
    unscreened = channels["screened"]["unscreened"]["angle_random_walk"]["coefficient"]
    assert unscreened == pytest.approx(white["all"], rel=1e-9)
    stillbench(*flags, *run["kept"], "--out", "out", check=0)
    assert "slammed &lt;on&gt; purpose" in (tmp_path / "out" / "report.html").read_text()


def test_spans_by_seconds_rows_and_clock(stillbench: Command, tmp_path: Path, table: Callable[..., Path]) -> None:
    stamps = [f"2025-03-01 {22 + i // 3600}:{i // 60 % 60:02d}:{i % 60:02d}" for i in range(4_000)]
    table(tmp_path / "log.csv", {"time": stamps, "rate": made_noise(4_000, 4, white=1.0).round(5)})
    flags = ["characterize", "log.csv", "--unit", "deg/s", "--json", "-"]

    def runs(*extra: str) -> list[list[float]]:
        spans: list[list[float]] = json.loads(stillbench(*flags, *extra, check=0).stdout)["channels"][0]["clock"][
            "runs"
        ]
        return spans

    assert runs() == [[0, 4_000]]
    assert runs("--from", "100", "--to", "3000") == [[100, 3_000]]
    assert runs("--from", "row:101", "--to", "row:3000") == [[100, 3_000]]
    assert runs("--from", "21:59:59") == [[0, 4_000]]
    assert runs("--from", "22:01:40", "--to", "2025-03-01 22:50:00") == [[100, 3_000]]
    assert runs("--exclude", "1000:2000") == [[0, 1_000], [2_000, 4_000]]
    assert runs("--exclude", "22:10:00:22:20:00") == [[0, 600], [1_200, 4_000]]
    assert runs("--exclude", "row:601:row:1200") == [[0, 600], [1_200, 4_000]]


def test_arrays_and_compressed_files(stillbench: Command, tmp_path: Path) -> None:
    import gzip  # noqa: PLC0415
    import zipfile  # noqa: PLC0415

    values = made_noise(3_000, 4, white=1.0)
    text = "rate\n" + "".join(f"{value!r}\n" for value in values.tolist())
    np.save(tmp_path / "a.npy", values)
    np.savez(tmp_path / "b.npz", rate=values)
    np.save(tmp_path / "c.npy", np.vstack([values, values]))
    (tmp_path / "d.csv.gz").write_bytes(gzip.compress(text.encode()))
    with zipfile.ZipFile(tmp_path / "e.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("night.csv", text)
    found = set()
    for name in ("a.npy", "b.npz", "c.npy", "d.csv.gz", "e.zip"):
        done = stillbench("characterize", name, "--channel", "1", "--unit", "V", "--rate", "10", "--json", "-", check=0)
        found.add(json.loads(done.stdout)["channels"][0]["noise"]["terms"]["white_noise"]["coefficient"])
    assert len(found) == 1


def test_demo(stillbench: Command, tmp_path: Path) -> None:
    done = stillbench("demo", "--out", "demo", check=0)
    for name in ("wheel-gyro", "mems-part"):
        assert f"demo/{name}/report.html" in done.stdout.decode()
        result = json.loads((tmp_path / "demo" / name / "result.json").read_text())
        page = (tmp_path / "demo" / name / "report.html").read_text()
        assert page.count("<svg") == page.count("</svg>") >= 4
        assert len(page) < 350_000
        assert result["channels"][0]["verdicts"][0]["decision"] in ("conforms", "does not conform")


def test_check_says_what_a_log_is_and_writes_a_sheet_that_says_it(stillbench: Command, tmp_path: Path) -> None:
    rows = "\n".join(f"{i / 10:.1f};{(i * 37 % 101) / 100:.2f}".replace(".", ",") for i in range(400))
    (tmp_path / "night.csv").write_text(f"Logger 7\nstarted by hand\nt;rate\ns;deg/s\n{rows}\n")
    done = stillbench("check", "night.csv", "--write-sheet", "sheet.toml", "--quiet", check=0)
    text = done.stdout.decode()
    for word in ("400 rows", "semicolon", "decimal comma", "10 Hz", "deg/s", "head_lines"):
        assert word in text, word
    sheet = (tmp_path / "sheet.toml").read_text()
    assert '# unit = "deg/s"' in sheet
    (tmp_path / "sheet.toml").write_text(sheet.replace('# unit = "deg/s"', 'unit = "deg/s"'))
    by_sheet = stillbench("characterize", "night.csv", "--log-sheet", "sheet.toml", "--json", "-", check=0)
    by_flags = stillbench("characterize", "night.csv", "--channel", "rate", "--unit", "deg/s", "--json", "-", check=0)
    (first,), (second,) = (json.loads(done.stdout)["channels"] for done in (by_sheet, by_flags))
    assert first["noise"] == second["noise"]


def test_scale_factor_from_turns(stillbench: Command, tmp_path: Path) -> None:
    """The front end it writes is one that characterize takes."""
    generator = np.random.default_rng(8)
    course = np.sin(np.pi * (np.arange(200) + 0.5) / 200) ** 2
    turn = course / course.sum() / 0.02 * 90.0
    rate = np.concatenate([np.zeros(400), *[part for sign in (1, -1) * 3 for part in (sign * turn, np.zeros(400))]])
    readings = 2.5 + 0.0482 * rate + generator.normal(0.0, 1e-3, rate.size)
    text = "out\n" + "\n".join(f"{value:.6f}" for value in readings)
    (tmp_path / "turns.csv").write_text(text)
    done = stillbench(
        "scale", "turns.csv", "--unit", "V", "--rate", "50", "--turns", "90 deg, -90 deg", "--applied-uncertainty",
        "0.05 deg", "--out", "scale", "--write-sheet", "front.toml", "--made-at", "2026-03-01", check=0,
    )  # fmt: skip
    assert b"running wheel" in done.stdout
    found = json.loads((tmp_path / "scale" / "scale.json").read_text())
    assert found["schema"] == "stillbench/scale-factor"
    assert found["lower"] < 0.0482 / (np.pi / 180) < found["upper"]
    page = (tmp_path / "scale" / "scale.html").read_text()
    assert "running wheel" in page
    sheet = '[channel.out]\nunit = "V"\n' + (tmp_path / "front.toml").read_text()
    (tmp_path / "sheet.toml").write_text(sheet)
    (tmp_path / "still.csv").write_text("out\n" + "\n".join(f"{v:.6f}" for v in 2.5 + generator.normal(0, 1e-3, 600)))
    done = stillbench("characterize", "still.csv", "--log-sheet", "sheet.toml", "--rate", "50", "--json", "-", check=0)
    (channel,) = json.loads(done.stdout)["channels"]
    assert channel["quantity"] == "angular rate"
    assert "6 turns, 2026-03-01" in channel["front_end"]


def test_two_files_of_one_night(stillbench: Command, tmp_path: Path) -> None:
    values = np.random.default_rng(5).normal(0.1, 0.02, 800)
    rows = [f"{i / 10:.1f},{value:.6f}" for i, value in enumerate(values)]
    for name, part in (("whole", rows), ("a", rows[:300]), ("b", rows[300:])):
        (tmp_path / f"{name}.csv").write_text("time [s],rate\n" + "\n".join(part) + "\n")
    flags = ["--unit", "deg/s", "--json", "-"]
    whole = json.loads(stillbench("characterize", "whole.csv", *flags, check=0).stdout)["channels"]
    joined = json.loads(stillbench("characterize", "a.csv", "b.csv", "--joined", *flags, check=0).stdout)
    assert joined["channels"] == whole
    assert joined["source"]["name"] == "a.csv, b.csv"
