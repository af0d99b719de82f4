"""The page: one file, no network, no script, unique ids, small."""

import re
from html.parser import HTMLParser

import numpy as np
import pytest
from tests.conftest import made_noise

from stillbench.archive.codec import decode, encode
from stillbench.pipeline import characterize
from stillbench.report.render import render_report
from stillbench.report.strip import strip
from stillbench.report.words import verdict_row
from stillbench.vocabulary.characterization import Characterization
from stillbench.vocabulary.specification import Requirement, Specification


@pytest.fixture(scope="module")
def result() -> Characterization:
    logs = {
        name: made_noise(60_000, i, white=1.0, flicker=0.1, walk=0.01 * i)
        for i, name in enumerate(("x & y", "<b>", "z"))
    }
    logs["z"][30_000] += 90.0
    wanted = Specification(
        requirement=(
            Requirement(id="a", quantity="angle random walk", limit="60 deg/sqrt(h)"),
            Requirement(id="b", quantity="resolution", limit="1 deg/s", averaging_time="1 s"),
            Requirement(id="c", quantity="rate random walk", limit="2000 deg/h/sqrt(h)"),
        )
    )
    return characterize(logs, channels=["all"], unit="deg/s", rate=100.0, specification=wanted, made_at="2026-01-01")


@pytest.fixture(scope="module")
def page(result: Characterization) -> str:
    return render_report(result).decode()


def test_three_channels_stay_below_a_megabyte(page: str) -> None:
    assert len(page.encode()) < 1_000_000
    assert page.count('role="img" aria-label="Allan deviation') == 3


def test_ids_are_unique_and_references_resolve(page: str) -> None:
    ids = re.findall(r'\bid="([^"]+)"', page)
    assert len(ids) == len(set(ids))
    references = re.findall(r'(?:xlink:href="#|url\(#)([^")]+)', page)
    assert references
    assert set(references) <= set(ids)


def test_nothing_is_fetched_and_nothing_runs(page: str) -> None:
    assert "<script" not in page
    assert "@import" not in page
    assert not re.search(r"\son\w+=", page)
    assert not re.search(r'(?:src|href)="(?!#)', page)
    assert "url(http" not in page


def test_names_are_escaped(page: str) -> None:
    assert "x &amp; y" in page
    assert "&lt;b&gt;" in page
    assert "<b>:" not in page


def test_tags_are_closed(page: str) -> None:
    void = {"meta", "br", "path", "use", "rect", "line", "link"}
    stack: list[str] = []

    class Checker(HTMLParser):
        def handle_starttag(self, tag: str, attrs: object) -> None:  # noqa: ARG002
            if tag not in void:
                stack.append(tag)

        def handle_startendtag(self, tag: str, attrs: object) -> None:
            pass

        def handle_endtag(self, tag: str) -> None:
            if tag not in void:
                assert stack.pop() == tag

    Checker().feed(page)
    assert stack == []


def test_the_page_is_rebuilt_from_its_json_alone(result: Characterization, page: str) -> None:
    assert render_report(decode(encode(result))).decode() == page


def test_numbers_in_labels_are_not_cut(result: Characterization, page: str) -> None:
    """Coordinates are shortened, texts are not."""
    white = result.channels[0].noise.terms["angle_random_walk"]
    assert white.coefficient is not None
    label = f"{np.degrees(white.coefficient) * 60:.2f}"[:5]
    assert re.search(rf"<text[^>]*>{re.escape(label)}\d* \(", page)


def test_sections_in_order(page: str) -> None:
    heads = re.findall(r"<h2>(.*?)</h2>", page)
    assert heads[0] == "Verdict"
    assert heads[-3:] == ["What a log at rest cannot show", "Signatures", "Tables of the figures"]
    for words in ("prepared", "reviewed", "approved", "no release for guidance", "SHA-256"):
        assert words in page


def test_strip_of_a_value_off_the_scale(result: Characterization) -> None:
    for verdict in result.channels[0].verdicts:
        row = verdict_row(verdict)
        drawn = strip(row)
        assert drawn.count("<line") in (2, 3)
        if row.value is not None and row.value > 2 * row.limit_value:
            assert 'class="arrow"' in drawn
