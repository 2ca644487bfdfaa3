"""The reference page says everything that the interface and the formulas have, and nothing else."""

from solvers.formula.nodes import FUNCTIONS
from web.form.language import language
from web.pages.reference import reference_page
from web.render import render
from web.wording import with_code

DESCRIPTION = {
    "info": {"title": "t", "version": "9.9", "description": "All of it."},
    "paths": {
        "/api/v1/things/{id}": {
            "get": {
                "operationId": "read_thing", "summary": "Read a thing",
                "description": "With `If-None-Match`.\n\nTwice.",
                "parameters": [{"name": "id", "in": "path", "required": True, "schema": {"type": "string"}}],
                "responses": {"404": {"description": "Nothing"}, "200": {"description": "A <thing>"}},
            }
        }
    },
    "components": {
        "schemas": {
            "Thing": {
                "required": ["size"],
                "properties": {"size": {"anyOf": [{"type": "number"}, {"type": "null"}], "description": "How `big`"}},
            }
        }
    },
}  # fmt: skip


def test_an_operation_is_shown_with_its_answers_in_order():
    (group,) = reference_page(DESCRIPTION).groups
    (operation,) = group.operations
    assert (group.title, operation.method, operation.paragraphs) == (
        "Other",
        "GET",
        ("With `If-None-Match`.", "Twice."),
    )
    assert [answer.status for answer in operation.answers] == ["200", "404"]


def test_the_page_escapes_descriptions_and_sets_code():
    html = render(reference_page(DESCRIPTION))
    assert "A &lt;thing&gt;" in html
    assert "<code>If-None-Match</code>" in html
    assert "number or null" in html


def test_every_function_of_the_language_is_shown_and_every_example_understood():
    examples = language()
    assert [item.written for item in examples if not item.mathml] == []
    written = " ".join(item.written for item in examples)
    assert [name for name in FUNCTIONS if f"{name}(" not in written] == []


def test_code_is_set_and_everything_else_escaped():
    assert with_code("a `<b>` & `c") == "a <code>&lt;b&gt;</code> &amp; `c"
    assert with_code("") == ""
