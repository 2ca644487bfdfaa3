"""The composer's page: every complaint stands at its field, with the characters marked."""

import json

from web.form.draft import draft_from_post, draft_from_text, empty_draft
from web.pages.compose import compose_page
from web.render import render

BASE = "http://127.0.0.1:8000"


def complaint(pointer, span=None):
    return {"pointer": pointer, "span": span, "code": "c", "message": "Something is wrong.", "hint": "try x"}


def field(page, name):
    return next(field for block in page.blocks for row in block.rows for field in row.fields if field.id == name)


def test_a_complaint_stands_at_its_field_with_the_span_marked():
    draft = draft_from_post({"view": "form", "endpoints.1.formula": "y(0) = = 2"})
    page = compose_page(draft, base_url=BASE, complaints=[complaint("/endpoints/0", [7, 8])])
    (shown,) = field(page, "endpoints.1.formula").complaints
    assert (shown.before, shown.marked, shown.after) == ("y(0) = ", "=", " 2")
    assert page.status == "One thing to put right"
    html = render(page)
    assert '<a href="#endpoints.1.formula">Something is wrong.</a>' in html
    assert "y(0) = <mark>=</mark> 2" in html


def test_a_complaint_about_a_missing_member_leads_to_where_it_belongs():
    page = compose_page(draft_from_post({"view": "form"}), base_url=BASE, complaints=[complaint("/functional/seek")])
    assert page.complaints[0].field == "functional.seek"


def of_points(text, at=""):
    """What is said in the form about points written like this; `at` is where the check found something."""
    draft = draft_from_post({"view": "form", "observations.0.of": "y", "observations.0.points": text})
    page = compose_page(draft, base_url=BASE, complaints=[complaint(f"/observations/0/points{at}")])
    (shown,) = field(page, "observations.0.points").complaints
    return shown.message


def test_points_that_are_no_numbers_are_told_by_their_line():
    """The field holds lines: that the document wants a list there is nobody's business."""
    assert of_points("0 1\n\n1 high\n2 3") == "Line 3: “high” is no number."


def test_a_point_with_too_many_numbers_is_told_by_its_line():
    assert of_points("0 1\n\n1 2 3 4", "/1") == "Line 3: Something is wrong."


def test_a_list_in_brackets_is_told_as_the_check_tells_it():
    assert of_points("[[0, 1], [1]]", "/1") == "Something is wrong."


def test_a_complaint_about_the_whole_document_is_listed_without_a_field():
    page = compose_page(draft_from_post({"view": "form"}), base_url=BASE, complaints=[complaint("")])
    assert [item.field for item in page.complaints] == [""]


def test_in_the_text_view_the_formula_of_the_pointer_is_marked():
    draft = draft_from_text(json.dumps({"where": {"k": "2x"}}), "json")
    page = compose_page(draft, base_url=BASE, complaints=[complaint("/where/k", [1, 2])])
    (shown,) = page.text_complaints
    assert (shown.field, shown.before, shown.marked, shown.line) == ("json", "2", "x", 1)
    assert draft.text[shown.start : shown.end] == "x"


def test_in_unreadable_text_the_place_is_marked_in_the_text():
    draft = draft_from_text('{"a": }', "json")
    page = compose_page(draft, base_url=BASE, complaints=[complaint("", [6, 7])])
    (shown,) = page.text_complaints
    assert (shown.before, shown.marked, shown.line, shown.start) == ('{"a": ', "}", 1, 6)


def test_hostile_text_is_escaped_wherever_it_is_shown():
    hostile = '"><script>alert(1)</script>'
    document = {
        "title": hostile, "unknowns": {hostile: {"unit": hostile}}, "endpoints": [hostile], hostile: hostile,
        "constants": {"c": hostile}, "notes": "</textarea>" + hostile,
    }  # fmt: skip
    for view in ("form", "json"):
        draft = draft_from_text(json.dumps(document), view)
        wrong = {**complaint("/endpoints/0", [2, 9]), "message": hostile, "hint": hostile}
        html = render(compose_page(draft, base_url=BASE, complaints=[wrong]))
        assert "<script>alert" not in html


def test_a_formula_is_shown_as_mathematics_whatever_else_is_missing():
    draft = draft_from_post({"view": "form", "constraints.0.formula": "x'' <= 2*x"})
    assert "<math" in field(compose_page(draft, base_url=BASE), "constraints.0.formula").mathml


def test_sections_that_are_empty_and_seldom_needed_are_folded():
    page = compose_page(empty_draft(), base_url=BASE)
    assert {block.name for block in page.blocks if block.open} == {
        "independent", "unknowns", "functional", "endpoints",
    }  # fmt: skip
    focused = compose_page(draft_from_post({"view": "form", "do": "add guess"}), base_url=BASE)
    assert next(block for block in focused.blocks if block.name == "guess").open


def test_a_complaint_about_a_line_shows_that_line():
    document = {"format": 1, "arcs": [{"name": "burn", "dynamics": ["x' = u", "v' = w"]}]}
    told = {"pointer": "/arcs/0/dynamics/1", "span": [5, 6], "code": "unknown-name", "message": "There is no “w”."}
    page = compose_page(draft_from_text(json.dumps(document)), base_url=BASE, complaints=[told])
    (shown,) = page.complaints
    assert (shown.field, shown.before, shown.marked, shown.after) == ("arcs.0.dynamics", "v' = ", "w", "")
    assert shown.where == "Arcs burn, dynamics"


def test_the_whole_document_survives_the_page():
    """What a browser would post of the page is the document that the page was made of."""
    document = {
        "format": 1, "title": 'A "title" & more', "notes": "first\nsecond", "independent": {"name": "x", "to": 1},
        "unknowns": {"y": {"within": [0, None], "odd": [1]}}, "endpoints": ["y(0) = 1"],
    }  # fmt: skip
    document["arcs"] = [{"name": "a", "from": 0, "dynamics": ["y' = 1", "y = 2"], "where": {"k": "<3"}, "odd": 1}, {}]
    html = render(compose_page(draft_from_text(json.dumps(document)), base_url=BASE))
    assert json.loads(draft_from_post(posted(html)).text) == document


def posted(html):
    """The fields of the form, as HTML says a browser reads them."""
    from html.parser import HTMLParser

    class Form(HTMLParser):
        def __init__(self):
            super().__init__()
            self.fields, self.open, self.select = {}, None, None

        def handle_starttag(self, tag, attrs):
            values = dict(attrs)
            if tag == "input" and "name" in values:
                self.fields[values["name"]] = values.get("value") or ""
            elif tag == "textarea":
                self.open = values["name"]
                self.fields[self.open] = ""
            elif tag == "select" and "name" in values:
                self.select = values["name"]

        def handle_data(self, data):
            if self.open:
                self.fields[self.open] += data
            elif self.select and data.strip():
                self.fields.setdefault(self.select, data.strip())

        def handle_endtag(self, tag):
            if tag == "textarea" and self.open:
                self.fields[self.open] = self.fields[self.open].removeprefix("\n")  # HTML drops the first line end
                self.open = None
            elif tag == "select":
                self.select = None

    parser = Form()
    parser.feed(html)
    return parser.fields
