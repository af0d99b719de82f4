"""The report as a reader sees and prints it, in headless Chromium."""

import os
import re
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from tests.conftest import made_noise

from stillbench.pipeline import characterize
from stillbench.report.render import render_report
from stillbench.vocabulary.specification import Requirement, Specification

PAPERS = {"A4": (595, 842), "Letter": (612, 792)}
"""Points."""


def tool(name: str) -> str:
    found = shutil.which(name)
    if found is None:
        if os.environ.get("STILLBENCH_NEEDS_TOOLS"):
            pytest.fail(f"{name} is not installed")
        pytest.skip(f"{name} is not installed")
    return found


def chromium(folder: Path, *arguments: str) -> str:
    flags = "--headless --no-sandbox --disable-gpu --disable-quic --no-first-run --disable-background-networking"
    flags += " --disable-component-update --disable-sync --hide-scrollbars"
    done = subprocess.run(
        [tool("chromium"), *flags.split(), f"--user-data-dir={folder / 'profile'}", *arguments],
        capture_output=True,
        timeout=120,
        check=True,
    )
    return done.stdout.decode()


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    log = np.degrees(1e-4) * made_noise(200_000, 4, white=1.0, flicker=0.1, walk=2e-3)
    wanted = Specification(
        requirement=(
            Requirement(id="a", clause="3.1", quantity="resolution", limit="0.01 deg/s", averaging_time="1 s"),
            Requirement(id="b", clause="3.2", quantity="rate random walk", limit="1 deg/h/sqrt(h)"),
        )
    )
    result = characterize({"rate": log}, unit="deg/s", rate=50.0, specification=wanted, made_at="2026-01-01")
    path = tmp_path_factory.mktemp("page") / "report.html"
    path.write_bytes(render_report(result))
    return path


@pytest.mark.parametrize("width", [420, 820, 1160])
def test_nothing_sticks_out_sideways(page: Path, tmp_path: Path, width: int) -> None:
    """A probe appended to a copy of the page writes the widths it finds; the report itself has no script."""
    probe = (
        "<script>window.onload = () => { const e = document.documentElement;"
        "document.title = 'WIDTHS ' + e.scrollWidth + ' ' + e.clientWidth; };</script>"
    )
    copy = tmp_path / "probe.html"
    copy.write_text(page.read_text().replace("</body>", probe + "</body>"))
    dom = chromium(tmp_path, f"--window-size={width},900", "--virtual-time-budget=3000", "--dump-dom", copy.as_uri())
    found = re.search(r"<title>WIDTHS (\d+) (\d+)</title>", dom)
    assert found, dom[:500]
    assert int(found.group(1)) <= int(found.group(2))


@pytest.mark.parametrize("paper", PAPERS)
def test_prints(page: Path, tmp_path: Path, paper: str) -> None:
    tool("pdftotext")
    copy = tmp_path / "paper.html"
    copy.write_text(page.read_text().replace("size: auto", f"size: {paper}"))
    pdf = tmp_path / "report.pdf"
    chromium(tmp_path, "--no-pdf-header-footer", f"--print-to-pdf={pdf}", copy.as_uri())
    text = subprocess.run([tool("pdftotext"), "-layout", pdf, "-"], capture_output=True, check=True).stdout.decode()
    for words in (
        "Verdict",
        "does not conform",
        "angle random walk",
        "Findings and edits",
        "prepared",
        "averaging time",
    ):
        assert words in text, words
    info = subprocess.run([tool("pdfinfo"), pdf], capture_output=True, check=True).stdout.decode()
    pages = int(re.search(r"Pages:\s+(\d+)", info).group(1))  # type: ignore[union-attr]
    size = re.search(r"Page size:\s+([\d.]+) x ([\d.]+)", info)
    assert size
    assert (round(float(size.group(1))), round(float(size.group(2)))) == pytest.approx(PAPERS[paper], abs=2)
    assert 3 <= pages <= 7


def test_it_is_drawn(page: Path, tmp_path: Path) -> None:
    picture = tmp_path / "page.png"
    chromium(tmp_path, "--window-size=1160,3000", f"--screenshot={picture}", page.as_uri())
    import matplotlib.image  # noqa: PLC0415

    pixels = matplotlib.image.imread(picture)[..., :3]
    assert pixels.shape[:2] == (3000, 1160)
    petrol = np.array([0x0F, 0x6B, 0x75]) / 255
    assert np.sum(np.all(np.abs(pixels - petrol) < 0.02, axis=2)) > 500  # the circles of the curve
