"""The page stands alone, says SIMULATED when it must, and shows the numbers that the data hold."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from io import StringIO

import pytest
from fakes.report_run import invented_recipe, invented_rig, write_run
from rich.console import Console

from rigd.report.collect import read_run
from rigd.report.page import render_page, write_page
from rigd.report.summary import summary
from rigd.report.words import percent


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    folder = write_run(tmp_path_factory.mktemp("runs") / "full")
    return read_run(folder, invented_rig(), invented_recipe())


class _Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.found: list[tuple[str, dict[str, str | None]]] = []

    def handle_starttag(self, tag, attrs):
        self.found.append((tag, dict(attrs)))


def tags(page: str):
    parser = _Tags()
    parser.feed(page)
    return parser.found


def test_nothing_is_fetched_and_nothing_runs(run):
    page = render_page(run)
    found = tags(page)
    assert not [tag for tag, _ in found if tag in ("script", "link", "iframe", "img", "object", "embed")]
    outside = [value for _, attrs in found for key, value in attrs.items() if key in ("src", "href", "xlink:href")]
    assert all(value.startswith("#") for value in outside if value)
    assert not re.search(r"url\((?!#)", page)
    assert not [key for _, attrs in found for key in attrs if key.startswith("on")]
    assert sum(tag == "svg" for tag, _ in found) == 2


def test_simulated_is_said_in_title_banner_and_figures(run):
    page = render_page(run)
    assert page.count("SIMULATED") >= 2
    assert '<div class="simulated">' in page
    real = render_page(replace(run, simulated=False))
    assert "SIMULATED" not in real


def test_numbers_on_the_page_are_those_of_the_data(run):
    page = render_page(run)
    for point in run.points:
        assert percent(point.conversion, point.conversion_sd) in page
        assert f"{point.collected_mL:.2f}" in page
    assert "6 of 6 points collected" in page
    assert "nobody" in page
    assert run.rig.digest in page


def test_words_from_files_cannot_become_markup(run):
    nasty = replace(run, title="<b onload=alert(1)>", outcome_text="<script>alert(1)</script>")
    page = render_page(nasty)
    assert "<script" not in page
    assert "<b onload" not in page


def test_a_trip_is_told_with_first_out_and_what_to_do(tmp_path):
    run = read_run(write_run(tmp_path / "trip", trip_after=2), invented_rig(), invented_recipe())
    page = render_page(run)
    assert "first-out" in page
    assert "Find the block." in page
    assert "Pumps stopped, valves to solvent." in page


@pytest.mark.parametrize("points", [0, 1])
def test_a_run_that_got_nowhere_has_a_page_too(tmp_path, points):
    run = read_run(write_run(tmp_path / "early", trip_after=points), invented_rig(), invented_recipe())
    page = render_page(run)
    assert ("No point with a conversion was reached." in page) == (points == 0)
    assert f"{points} of 6 points collected" in page


def test_a_run_without_its_files_has_a_page_too(tmp_path):
    path = write_page(read_run(write_run(tmp_path / "bare")))
    assert path == tmp_path / "bare" / "report.html"
    assert "can no longer be read" in path.read_text()


def test_the_same_run_gives_the_same_page(run):
    assert render_page(run) == render_page(run)


def test_summary_fits_eighty_columns_and_names_outcome_points_and_constant(run):
    out = StringIO()
    Console(file=out, width=80, force_terminal=False).print(summary(run))
    text = out.getvalue()
    assert "Done" in text
    assert "SIMULATED" in text
    assert "P6" in text
    assert "k(60 °C) = " in text
    assert max(map(len, text.splitlines())) <= 80
