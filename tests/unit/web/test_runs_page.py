"""The list of runs and the home page, from plain records."""

from datetime import UTC, datetime

import pytest

from web.pages.home import Sample, home_page
from web.pages.runs import run_row, runs_page
from web.render import render
from web.thumbnails import Sketch

NOW = datetime(2026, 12, 1, 15, 0, tzinfo=UTC)
FINISHED = {
    "id": "abc", "title": "Chute", "state": "finished", "verdict": "local minimum", "value": 0.72831, "seconds": 0.14,
    "value_error": 1e-4, "value_unit": "s", "created": NOW.timestamp() - 60,
}  # fmt: skip


def test_a_finished_run_says_verdict_value_and_error():
    row = run_row(FINISHED, NOW)
    assert (row.outcome, row.tone, row.took) == ("local minimum", "good", "0.14\N{NO-BREAK SPACE}s")
    assert row.value == "0.7283 ± 0.0001\N{NO-BREAK SPACE}s"
    assert (row.delete, row.stop) == ("/runs/abc/delete", "")


def test_a_run_on_its_way_can_be_stopped_and_not_deleted():
    row = run_row({"id": "abc", "state": "solving", "created": 0.0, "verdict": None, "value": None}, NOW)
    assert (row.title, row.outcome, row.value) == ("Untitled problem", "solving", "—")
    assert (row.delete, row.stop) == ("", "/runs/abc/stop")


@pytest.mark.parametrize("state", ["", "failed"])
def test_an_empty_list_says_so_and_leads_on(state):
    html = render(runs_page([], now=NOW, state=state))
    assert ("No run is like that." in html) == bool(state)
    assert "<table" not in html


def test_pages_of_the_list_keep_the_filter():
    page = runs_page([FINISHED], now=NOW, state="finished", after="c1", next_cursor="c2")
    assert (page.older, page.newest) == ("/runs?state=finished&after=c2", "/runs?state=finished")
    assert [choice.label for choice in page.choices if choice.chosen] == ["finished"]


def test_each_filter_keeps_the_others():
    page = runs_page([FINISHED], now=NOW, state="finished", verdict="local minimum", text="a&b", next_cursor="c2")
    assert page.older == "/runs?state=finished&verdict=local+minimum&q=a%26b&after=c2"
    assert {choice.address for choice in page.choices if choice.label in ("all", "failed")} == {
        "/runs?verdict=local+minimum&q=a%26b",
        "/runs?state=failed&verdict=local+minimum&q=a%26b",
    }
    html = render(page)
    assert 'name="q" value="a&amp;b"' in html
    assert '<input type="hidden" name="state" value="finished">' in html
    assert "<option selected>local minimum</option>" in html
    assert html.count("selected") == 1


def test_titles_are_escaped():
    assert "<b>" not in render(runs_page([{**FINISHED, "title": "<b>"}], now=NOW))


def test_home_shows_each_sample_with_its_picture_and_a_solve_button():
    samples = [
        Sample("hose", "A hose", "It hangs.", Sketch(((0.0, 0.0), (1.0, 1.0)))),
        Sample("fin", "A fin", "It cools."),
    ]
    page = home_page(samples, recent=[], example='{"format": 1}', base_url="http://localhost:8000/", now=NOW)
    html = render(page)
    assert html.count('class="thumb"') == 1
    assert 'href="/compose?sample=hose"' in html
    assert 'aria-label="Solve now: A fin"' in html
    assert "Nothing has been solved here yet." in html
    assert "http://localhost:8000/api/v1/runs" in page.curl
