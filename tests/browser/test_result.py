"""A run and its result in a real browser: with script and without, light and dark, on a phone and on paper."""

from __future__ import annotations

import csv
import json
import re
import urllib.request

import pytest

HOSE = {
    "format": 1,
    "title": "Hose of 4.2 m between two hooks",
    "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
    "unknowns": {"y": {"unit": "m", "about": "height of the hose"}},
    "functional": {"seek": "minimum", "integrand": "y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 2", "y(3) = 2.4"],
    "constraints": ["integral(sqrt(1 + y'^2)) = 4.2"],
}
HARD = {
    "format": 1,
    "title": "A curve that takes a while",
    "independent": {"name": "t", "from": 0, "to": 200},
    "unknowns": {"q": {}, "u": {"within": [-0.2, 0.2]}},
    "dynamics": ["q'' = u - sin(q)/(1 + q^2) + 0.3*cos(7*t)"],
    "functional": {"seek": "minimum", "integrand": "u^2 + (q - 2)^2"},
    "endpoints": ["q(0) = 0", "q'(0) = 0", "q(200) = 2"],
    "solve": {"tolerance": 1e-10, "time_limit": 60},
}
HARVEST = {
    "format": 1,
    "title": "Harvest of a fish stock",
    "independent": {"name": "t", "from": 0, "to": 10},
    "unknowns": {"x": {}, "u": {"within": [0, 1]}},
    "dynamics": ["x' = x*(1 - x) - u"],
    "functional": {"seek": "maximum", "integrand": "u"},
    "endpoints": ["x(0) = 0.1", "x(10) = 0.5"],
}
"""No catch until the logistic growth has reached 1/2, at t = ln 9; from there on the catch is singular."""
TIMEOUT = 60_000


def post(server, problem, prefer):
    """Send a problem as lab software does; the run as the interface shows it."""
    request = urllib.request.Request(
        f"{server}/api/v1/runs",
        json.dumps(problem).encode(),
        {"Content-Type": "application/json", "Prefer": prefer},
    )
    with urllib.request.urlopen(request, timeout=90) as answer:
        return json.load(answer)


@pytest.fixture(scope="module")
def hose(server):
    """The address of the page of a finished run."""
    run = post(server, HOSE, "wait=60")
    return run["links"]["page"] if "links" in run else f"/runs/{run['id']}"


def all_alive(page):
    """Scroll down until every figure is drawn by the plotting script."""
    for figure in page.locator("figure[data-plotly]").all():
        figure.scroll_into_view_if_needed()
        figure.locator(".plot-living .main-svg").first.wait_for(timeout=TIMEOUT)


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_figures_come_to_life_without_a_complaint(open_page, hose, scheme):
    page = open_page(hose, color_scheme=scheme)
    all_alive(page)
    line = page.locator(".plot-living .scatterlayer path.js-line").first
    expected = page.evaluate("getComputedStyle(document.documentElement).getPropertyValue('--line-1')")
    assert line.evaluate("element => getComputedStyle(element).stroke") == expected


def test_plots_follow_the_paper_that_the_reader_chooses(open_page, hose):
    page = open_page(hose, color_scheme="light")
    all_alive(page)
    line = page.locator(".plot-living .scatterlayer path.js-line").first
    before = line.evaluate("element => getComputedStyle(element).stroke")
    page.locator("#scheme").select_option("dark")
    script = "before => getComputedStyle(document.querySelector('.plot-living path.js-line')).stroke !== before"
    page.wait_for_function(script, arg=before)


def test_the_plotting_script_is_only_loaded_when_a_figure_comes_near(open_page, hose):
    page = open_page(hose, width=360, height=300)
    page.wait_for_timeout(500)
    assert page.evaluate("typeof Plotly") == "undefined"
    assert page.locator(".plot-still").first.is_visible()
    all_alive(page)


def test_without_script_everything_is_there(open_page, hose):
    page = open_page(hose, java_script_enabled=False)
    assert page.locator("h1").inner_text() == HOSE["title"]
    assert page.locator(".plot-still").count() == page.locator("figure").count() >= 3
    page.locator("#step").fill("0.5")
    page.locator("#derivatives").select_option("1")
    page.get_by_role("button", name="Show").click()
    cells = page.locator("#table ~ .entry-body tbody tr, [aria-labelledby=table] tbody tr").all_inner_texts()
    assert cells[0].split("\t")[:2] == ["0", "2"] and cells[-1].split("\t")[:2] == ["3", "2.4"]


def test_the_files_hold_the_chosen_table(open_page, hose):
    page = open_page(hose + "?rows=31")
    with page.expect_download() as waiting:
        page.get_by_role("link", name="CSV", exact=True).click()
    with open(waiting.value.path(), encoding="utf-8", newline="") as file:  # noqa: PTH123
        heading, *rows = csv.reader(file)
    assert heading == ["x [m]", "y [m]"] and len(rows) == 31
    assert float(rows[0][1]) == pytest.approx(2, abs=1e-9) and float(rows[-1][0]) == 3


@pytest.mark.parametrize("width", [360, 1400])
def test_nothing_is_wider_than_the_window(open_page, hose, width):
    page = open_page(hose, width=width)
    all_alive(page)
    assert page.evaluate("document.documentElement.scrollWidth <= document.documentElement.clientWidth")


def test_on_paper_the_still_pictures_are_printed_and_no_controls(open_page, hose):
    page = open_page(hose)
    all_alive(page)
    page.emulate_media(media="print")
    assert page.locator(".plot-still").first.is_visible() and not page.locator(".plot-living").first.is_visible()
    assert not page.get_by_role("button", name="Show").is_visible()
    assert page.locator(".caution").first.is_visible()


def test_every_control_is_reached_by_keyboard_and_large_enough(open_page, hose):
    page = open_page(hose)
    wanted = page.locator("main a[href]:visible, main button:visible, main summary:visible, main input:visible")
    for control in wanted.all():
        box = control.bounding_box()
        inline = control.evaluate("element => getComputedStyle(element).display === 'inline'")
        assert inline or (box["height"] >= 24 and box["width"] >= 24), control.inner_text()
    seen = set()
    for _ in range(200):
        page.keyboard.press("Tab")
        seen.add(page.evaluate("document.activeElement.outerHTML.slice(0, 60)"))
    for name in ("Edit and solve again", "Table and files", "CSV"):
        target = page.get_by_role("link", name=name, exact=True).first
        assert target.evaluate("element => element.outerHTML.slice(0, 60)") in seen


def test_a_run_shows_how_it_converges_and_ends_with_its_result(open_page, server):
    run = post(server, HARD, "respond-async")
    page = open_page(f"/runs/{run['id']}")
    section = page.locator("[data-live]")
    section.wait_for(timeout=TIMEOUT)
    page.locator("[data-live-iterations] .plot-line").first.wait_for(timeout=TIMEOUT, state="attached")
    page.locator("[data-live-iteration]", has_text=re.compile(r"\d")).wait_for(timeout=TIMEOUT)
    page.get_by_role("button", name="Stop this run").click()
    page.locator("#provenance").wait_for(timeout=TIMEOUT)
    assert page.locator("[data-live]").count() == 0


@pytest.mark.parametrize(("scheme", "width"), [("light", 1200), ("dark", 360)])
def test_a_singular_arc_is_shaded_told_and_handed_over(open_page, server, audit, scheme, width):
    page = open_page(post(server, HARVEST, "wait=60")["links"]["page"], color_scheme=scheme, width=width)
    all_alive(page)
    assert page.locator(".plot-living .shapelayer path").count() > 0
    assert "u runs singular" in page.locator("figure figcaption").first.inner_text()
    rows = page.get_by_role("region", name="From switch to switch").locator("tbody tr").all_inner_texts()
    (_, start, switch, course), (_, again, end, last) = [row.split("\t") for row in rows]
    assert (start, course, end, last) == ("0", "at its lower limit", "10", "singular")
    assert switch == again and switch.startswith("2.19722") and "±" in switch
    assert audit(page) == []
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    with page.expect_download() as waiting:
        page.get_by_role("link", name="All stretches as CSV").click()
    heading, *told = csv.reader(waiting.value.path().read_text().splitlines())
    assert heading[:3] == ["of", "arc", "course"] and [row[2] for row in told] == ["at its lower limit", "singular"]
