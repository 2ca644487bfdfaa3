"""A draft: what was posted, shown again in full whatever is wrong with it."""

import json

import pytest

from web.form.draft import draft_from_post, draft_from_text, empty_draft
from web.form.filling import MOST_FIELDS


def test_the_form_becomes_text_and_text_a_form():
    posted = {"view": "form", "do": "json", "title": "Hose", "unknowns.0.name": "y", "arcs": "ignored"}
    text = draft_from_post(posted)
    assert text.view == "json"
    assert json.loads(text.text) == {"format": 1, "title": "Hose", "unknowns": {"y": {}}}
    form = draft_from_post({"view": "json", "do": "form", "json": text.text})
    assert (form.view, form.fields["title"]) == ("form", "Hose")


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("{", "The text is no JSON: Expecting property name enclosed in double quotes in line 1, column 2."),
        ("[]", "The text is JSON, but no object in braces."),
        ('{"a": 1, "a": 2}', "The text is no JSON: the name 'a' is given twice."),
        ('{"a": NaN}', "The text is no JSON: NaN is no number of JSON."),
        ("[" * 100_000, "The text is nested too deeply."),
    ],
)
def test_unreadable_text_stays_in_its_text_area(text, sentence):
    draft = draft_from_post({"view": "json", "do": "form", "json": text})
    assert (draft.view, draft.text) == ("json", text)
    assert [item.message for item in draft.complaints] == [sentence]


def test_a_form_that_would_lose_a_row_is_not_turned_into_text():
    draft = draft_from_post({"view": "form", "do": "json", "constants.0.name": "", "constants.0.value": "3 m"})
    assert draft.view == "form"
    assert draft.fields["constants.0.value"] == "3 m"
    assert draft.complaints


def test_a_document_with_too_many_rows_is_edited_as_text():
    text = json.dumps({"format": 1, "endpoints": [f"y({n}) = 0" for n in range(MOST_FIELDS + 1)]})
    assert draft_from_text(text).view == "json"
    assert draft_from_post({"view": "json", "do": "form", "json": text}).complaints[0].code == "too-long"


def test_only_the_solve_button_solves():
    assert draft_from_post({"view": "form", "do": "solve"}).solve
    assert draft_from_post({"view": "json", "do": "solve", "json": "{}"}).solve
    assert not draft_from_post({"view": "form", "do": "add unknowns"}).solve
    assert not draft_from_post({}).solve


def test_line_ends_of_browsers_do_not_enter_the_document():
    draft = draft_from_post({"view": "form", "do": "check", "notes": "one\r\ntwo"})
    assert json.loads(draft.text)["notes"] == "one\ntwo"


def test_the_empty_form_asks_for_a_minimum_from_zero():
    assert json.loads(empty_draft().text) == {"format": 1, "independent": {"from": 0}}
