"""Composing a problem in a real browser, from the first look to the run, with script and without."""

import json
import re

import pytest

LINE = {
    "independent.name": "x", "independent.unit": "m", "independent.to": "2", "unknowns.0.name": "y",
    "unknowns.0.unit": "m", "functional.integrand": "sqrt(1 + y'^2)", "endpoints.0.formula": "y(0) = 0",
}  # fmt: skip
"""The shortest way between two points, its last condition still missing."""

TIMEOUT = 10_000


def field(page, name):
    return page.locator(f'[id="{name}"]')


def fill(page, fields):
    for name, text in fields.items():
        field(page, name).fill(text)


def status(page, text):
    page.locator("#status", has_text=text).wait_for(timeout=TIMEOUT)


def test_a_stranger_states_a_problem_and_sees_it_understood_and_solved(open_page):
    page = open_page("/compose")
    fill(page, LINE)
    status(page, "Complete: ready to solve")
    page.get_by_role("button", name="Add a relation").first.click()
    second = field(page, "endpoints.1.formula")
    second.wait_for()
    page.locator('[id="endpoints.1.formula"]:focus').wait_for(timeout=TIMEOUT)
    page.keyboard.type("y(2) = 1")
    field(page, "endpoints.1.formula.said").locator("math").wait_for(timeout=TIMEOUT)
    status(page, "Complete: ready to solve")
    assert "y" in page.locator("#reading").inner_text()
    page.keyboard.press("Control+Enter")
    page.wait_for_url("**/runs/*", timeout=TIMEOUT)
    # The straight line: sqrt(5) = 2.2360679...
    page.get_by_text(re.compile(r"2\.2360")).first.wait_for(timeout=60_000)


def test_a_table_is_pasted_and_drawn_at_once(open_page):
    page = open_page("/compose")
    fill(page, LINE | {"functional.integrand": "n(y)*sqrt(1 + y'^2)"})
    page.locator("summary", has_text="Measured tables").click()
    fill(page, {"tables.0.name": "n", "tables.0.of": "y in m", "tables.0.points": "0\t1\n1\t1.2\n2\t1.6"})
    status(page, "Complete: ready to solve")
    page.locator("#reading svg.plot-still").wait_for(timeout=TIMEOUT)
    assert "n(y): 3 points" in page.locator("#reading").inner_text()


def test_what_is_wrong_is_said_at_the_field_and_in_the_formula(open_page):
    page = open_page("/compose")
    fill(page, LINE | {"endpoints.0.formula": "y(0) = = 0"})
    said = field(page, "endpoints.0.formula.said")
    said.locator("mark").wait_for(timeout=TIMEOUT)
    assert said.locator("mark").inner_text() == "="
    assert field(page, "endpoints.0.formula").get_attribute("aria-invalid") == "true"
    page.locator("#summary a").first.click()
    assert page.evaluate("document.activeElement.id") == "endpoints.0.formula"
    field(page, "endpoints.0.formula").fill("y(0) = 0")
    status(page, "Complete: ready to solve")
    assert field(page, "endpoints.0.formula").get_attribute("aria-invalid") is None


def test_form_and_json_show_the_same_document(open_page):
    page = open_page("/compose")
    fill(page, LINE)
    page.get_by_role("button", name="As JSON").click()
    text = field(page, "json")
    text.wait_for()
    document = json.loads(text.input_value())
    assert document["endpoints"] == ["y(0) = 0"]
    document["title"], document["endpoints"] = "A line", ["y(2) = 1", "y(0) = 0"]
    text.fill(json.dumps(document))
    status(page, "Complete: ready to solve")
    page.get_by_role("button", name="As a form").click()
    field(page, "endpoints.1.formula").wait_for()
    assert field(page, "title").input_value() == "A line"
    assert field(page, "endpoints.0.formula").input_value() == "y(2) = 1"


def test_a_complaint_leads_to_its_characters_in_the_text(open_page):
    page = open_page("/compose?sample=hose&view=json")
    text = field(page, "json")
    text.fill(text.input_value().replace("y(3) = 2.4", "y(3) = = 2.4"))
    page.locator("#summary a").click(timeout=TIMEOUT)
    selected = page.evaluate("((t) => t.value.slice(t.selectionStart - 7, t.selectionEnd))(document.activeElement)")
    assert selected == "y(3) = ="


def test_rows_move_with_the_keyboard(open_page):
    page = open_page("/compose?sample=hose")
    field(page, "endpoints.1.formula").focus()
    before = [field(page, f"endpoints.{n}.formula").input_value() for n in (0, 1)]
    page.keyboard.press("Alt+ArrowUp")
    page.locator('[id="endpoints.0.formula"]:focus').wait_for(timeout=TIMEOUT)
    assert [field(page, f"endpoints.{n}.formula").input_value() for n in (0, 1)] == before[::-1]


def test_the_snippets_follow_what_is_typed(open_page):
    page = open_page("/compose")
    field(page, "title").fill("Ein Titel mit 'Zeichen'")
    page.locator("#snippet-curl", has_text="Ein Titel").wait_for(state="attached", timeout=TIMEOUT)
    assert '"title": "Ein Titel' in field(page, "snippet-python").text_content()


def test_what_was_written_comes_back_after_leaving_the_page(open_page):
    page = open_page("/compose")
    fill(page, LINE)
    page.goto("/runs")
    page.goto("/compose")
    page.get_by_role("button", name="Bring back").click()
    page.locator('[id="unknowns.0.name"][value="y"]').wait_for(timeout=TIMEOUT)


def test_an_unreachable_service_loses_nothing(open_page):
    page = open_page("/compose", expected=["Failed to load resource"])
    page.route("**/compose", lambda route: route.abort() if route.request.method == "POST" else route.continue_())
    field(page, "title").fill("Kept")
    status(page, "does not answer")
    assert field(page, "title").input_value() == "Kept"


class TestWithoutScript:
    """Every button is a plain form post."""

    @pytest.fixture
    def page(self, open_page):
        # A refused problem is answered with status 422, which the console reports.
        return open_page("/compose", java_script_enabled=False, expected=["status of 422"])

    def test_rows_views_and_complaints_work(self, page):
        fill(page, LINE | {"endpoints.0.formula": "y(0) = = 0"})
        page.get_by_role("button", name="Add a relation").first.click()
        field(page, "endpoints.1.formula").fill("y(2) = 1")
        page.get_by_role("button", name="Solve").click()
        assert page.locator("mark").first.inner_text() == "="
        assert field(page, "endpoints.1.formula").input_value() == "y(2) = 1"
        page.get_by_role("button", name="As JSON").click()
        assert json.loads(field(page, "json").input_value())["endpoints"] == ["y(0) = = 0", "y(2) = 1"]

    def test_a_problem_is_solved(self, page):
        fill(page, LINE)
        page.get_by_role("button", name="Solve").click()
        assert re.search(r"/runs/\w+$", page.url)


SMALL_TARGETS = """() => [...document.querySelectorAll(
    "button, input:not([type=hidden]), select, textarea, summary, nav a, .button")]
    .filter((part) => part.checkVisibility() && !part.closest(".unseen") && !part.closest("p"))
    .map((part) => [part.outerHTML.slice(0, 90), part.getBoundingClientRect()])
    .filter(([, box]) => box.height < 24 || box.width < 24)
    .map(([html, box]) => `${html} ${box.width}x${box.height}`)"""
"""WCAG 2.2, success criterion 2.5.8: 24 by 24 px, save links within a sentence."""

PATHS = (
    "/", "/compose", "/compose?sample=crucible", "/compose?sample=fin&view=json", "/runs", "/reference", "/problems",
    "/problems/units",
)  # fmt: skip


@pytest.mark.parametrize("path", PATHS)
def test_no_page_is_wider_than_its_window_and_every_target_is_large_enough(open_page, path):
    page = open_page(path)
    for width in (360, 800, 1400):
        page.set_viewport_size({"width": width, "height": 900})
        assert page.evaluate("document.documentElement.scrollWidth") <= width
        assert page.evaluate(SMALL_TARGETS) == []


def test_every_field_has_a_label_and_every_id_is_unique(open_page):
    page = open_page("/compose?sample=crucible")
    nameless = page.evaluate(
        """() => [...document.querySelectorAll("input:not([type=hidden]), select, textarea")]
        .filter((part) => !part.labels.length).map((part) => part.outerHTML)"""
    )
    assert nameless == []
    twice = page.evaluate(
        """() => { const ids = [...document.querySelectorAll("[id]")].map((part) => part.id);
        return ids.filter((id, place) => ids.indexOf(id) !== place) }"""
    )
    assert twice == []
    dangling = page.evaluate(
        """() => [...document.querySelectorAll("[aria-describedby]")]
        .map((part) => part.getAttribute("aria-describedby")).filter((id) => !document.getElementById(id))"""
    )
    assert dangling == []


def test_the_choice_of_paper_is_kept(open_page):
    page = open_page("/", color_scheme="light")
    ground = "getComputedStyle(document.documentElement).backgroundColor"
    light = page.evaluate(ground)
    page.get_by_label("Paper").select_option("dark")
    dark = page.evaluate(ground)
    assert dark != light
    page.goto("/runs")
    assert page.evaluate(ground) == dark
    assert page.get_by_label("Paper").input_value() == "dark"


def test_a_sample_is_one_click_away(open_page):
    page = open_page("/")
    page.get_by_role("link", name="Hanging shape of a hose").click()
    status(page, "Complete: ready to solve")
    page.goto("/")
    page.get_by_role("button", name="Solve now: Hanging shape of a hose").click()
    page.wait_for_url("**/runs/*", timeout=TIMEOUT)
    page.get_by_text("local minimum").first.wait_for(timeout=TIMEOUT)  # until then the page may load itself anew
    page.goto("/runs")
    page.get_by_role("link", name="Hanging shape of a hose").first.wait_for()


def test_the_keyboard_reaches_the_content_first(open_page):
    page = open_page("/")
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.className") == "skip"
    page.keyboard.press("Enter")
    assert page.evaluate("document.activeElement.id") == "main"
