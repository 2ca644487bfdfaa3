"""No page hinders anybody, on light or dark paper, empty or full, right or wrong."""

import json

import pytest

PATHS = ("/", "/compose", "/compose?sample=crucible", "/compose?sample=fin&view=json", "/runs", "/reference",
         "/problems", "/problems/units")  # fmt: skip
SCHEMES = ("light", "dark")


@pytest.mark.parametrize("path", PATHS)
def test_a_page_is_clean_on_both_papers(open_page, audit, path):
    page = open_page(path)
    for scheme in SCHEMES:
        page.emulate_media(color_scheme=scheme)
        assert audit(page) == []


def test_a_page_that_is_not_there_is_clean(open_page, audit):
    assert audit(open_page("/nowhere", expected=["status of 404"])) == []


def test_a_composer_full_of_complaints_is_clean(open_page, audit):
    page = open_page("/compose?sample=crucible")
    page.locator('[id="endpoints.0.formula"]').fill("x(0) = = 0")
    page.locator('[id="dynamics.0.formula"]').fill("x'' = sin(")
    page.locator(".wrong").nth(1).wait_for()
    for scheme in SCHEMES:
        page.emulate_media(color_scheme=scheme)
        assert audit(page) == []


def test_a_list_with_runs_is_clean(open_page, audit):
    page = open_page("/")
    page.get_by_role("button", name="Solve now: Film of least area").click()
    page.get_by_role(
        "heading", name="The curve", exact=True
    ).wait_for()  # until then the page of a run goes on by itself
    page.goto("/runs")
    page.get_by_role("link", name="Film of least area").first.wait_for()
    for scheme in SCHEMES:
        page.emulate_media(color_scheme=scheme)
        assert audit(page) == []


def test_the_audit_finds_what_is_wrong(open_page, audit):
    """A check that cannot fail is none."""
    page = open_page("/problems/units")
    page.evaluate(
        "document.querySelector('main').insertAdjacentHTML('beforeend', '<input><img src=\"/static/mark.svg\">')"
    )
    assert {line.partition(":")[0] for line in audit(page)} >= {"label", "image-alt"}


def test_a_hostile_title_is_only_text(open_page):
    page = open_page("/compose?view=json")
    hostile = '"><img src=x onerror=alert(1)><script>alert(1)</script>'
    page.get_by_role("button", name="As JSON").click()
    page.locator("#json").fill(json.dumps({"format": 1, "title": hostile, "unknowns": {hostile: {}}}))
    page.locator("#summary li").first.wait_for()
    page.get_by_role("button", name="As a form").click()
    page.locator("#title").wait_for()
    assert page.locator("#title").input_value() == hostile
    assert page.locator("main img, main script").count() == 0
