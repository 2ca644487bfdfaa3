"""A document shown as a form and read back is the same document: switching the view loses nothing."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service import samples
from web.form.filling import form_from_document, kept_back
from web.form.pretty import pretty
from web.form.reading import document_from_form, read_form
from web.form.sections import SECTIONS

numbers = st.one_of(st.integers(-(10**9), 10**9), st.floats(allow_nan=False, allow_infinity=False))
texts = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)
anything = st.recursive(
    st.one_of(st.none(), st.booleans(), numbers, texts),
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(texts, inner, max_size=3)),
    max_leaves=8,
)
members = st.dictionaries(st.sampled_from([section.name for section in SECTIONS]) | texts, anything, max_size=6)


@pytest.mark.parametrize("name", samples.names())
def test_every_sample_survives_the_form(name):
    document = samples.load(name)
    assert document_from_form(form_from_document(document)) == document


@pytest.mark.parametrize(
    "document",
    [
        pytest.param({"format": 1, "region": [{"name": "burn"}]}, id="a member without fields"),
        pytest.param({"format": 1, "arcs": [{"name": "burn"}, {}]}, id="an empty arc"),
        pytest.param({"format": 1, "arcs": [{"name": "a", "dynamics": ["x' = u", 5]}]}, id="a number among formulas"),
        pytest.param({"format": 1, "arcs": [{"name": "a", "dynamics": ["x' =\nu"]}]}, id="a formula of two lines"),
        pytest.param({"format": 1, "arcs": [{"name": "a", "where": {"b = c": "d"}}]}, id="a name with a sign"),
        pytest.param({"format": 1, "arcs": [{"name": "a", "where": {"b": ""}}]}, id="a name for nothing"),
        pytest.param({"format": 1, "arcs": [{"name": "a", "where": {" b": "1"}}]}, id="a name with a blank"),
        pytest.param({"format": 2}, id="another format"),
        pytest.param({"format": 1, "unknowns": {"y": {"unit": "m", "colour": "red"}}}, id="a strange part of a row"),
        pytest.param({"format": 1, "unknowns": {"y": {"within": [None, 2]}}}, id="half a range"),
        pytest.param({"format": 1, "unknowns": {"y": {"within": [1, 2, 3]}}}, id="a range of three"),
        pytest.param({"format": 1, "unknowns": {"y": {}}}, id="a bare unknown"),
        pytest.param({"format": 1, "unknowns": ["y"]}, id="a list where names belong"),
        pytest.param({"format": 1, "dynamics": ["x' = u", 5]}, id="a number where a formula belongs"),
        pytest.param({"format": 1, "guess": {"y": [[0, 1], [2, 3]], "T": 2.5}}, id="points and numbers"),
        pytest.param(
            {"format": 1, "observations": [{"of": "y", "points": [[0, 1.5], [2, 3, 0.1]]}]}, id="points in lines"
        ),
        pytest.param(
            {"format": 1, "observations": [{"of": "y", "arc": "burn 2", "points": [[0, 1.5]]}]}, id="points of an arc"
        ),
        pytest.param({"format": 1, "observations": [{"of": "y", "points": [[0, "1"]]}]}, id="a text in a point"),
        pytest.param({"format": 1, "observations": [{"of": "y", "points": [[], 3]}]}, id="points that are none"),
        pytest.param({"format": 1, "observations": [{"of": "y", "colour": "red", "sigma": 2.0}]}, id="a strange part"),
        pytest.param({"format": 1, "observations": [{}]}, id="an empty list of observations"),
        pytest.param({"format": 1, "observations": {"of": "y"}}, id="an object where a list belongs"),
        pytest.param({"format": 1, "functional": {"seek": "least"}}, id="a strange choice"),
        pytest.param({"format": 1, "title": 7, "notes": None}, id="no texts"),
        pytest.param({"format": 1, "constants": {"a/b~c": "3 m"}}, id="a name that pointers escape"),
    ],
)
def test_what_the_form_cannot_show_is_carried_along(document):
    assert document_from_form(form_from_document(document)) == document


@given(members)
def test_any_object_survives_up_to_empty_parts_and_outer_blanks(document):
    """Fields are trimmed and empty ones left out, and a number may be written as text: nothing else may change."""
    once = document_from_form(form_from_document(document))
    assert document_from_form(form_from_document(once)) == once
    assert set(once) >= {name for name, content in document.items() if name and content not in ("", [], {}, None)} - {
        name for name in ("title", "notes") if not str(document.get(name)).strip()
    } - {name for name, content in document.items() if _blank(name, content)}


def _blank(name, content):
    """A record that holds nothing but the first choice is as good as none."""
    return name == "functional" and content == {"seek": "minimum"}


def test_arcs_are_rows_with_one_formula_to_a_line():
    arcs = [
        {
            "name": "burn",
            "from": 0,
            "to": "t1",
            "where": {"F": "3*u", "D": "v^2"},
            "dynamics": ["v' = F - D", "m' = -u"],
        },
        {"name": "coast", "from": "t1", "to": 9.5, "integrand": "v", "constraints": ["0 <= v", "integral(v) = 1"]},
    ]
    fields = form_from_document({"format": 1, "arcs": arcs})
    assert fields["arcs.0.where"] == "F = 3*u\nD = v^2"
    assert fields["arcs.0.dynamics"] == "v' = F - D\nm' = -u"
    reading = read_form(fields)
    assert reading.document == {"format": 1, "arcs": arcs}
    assert reading.places["/arcs/1/constraints"] == "arcs.1.constraints"
    assert kept_back(fields) == ()


@pytest.mark.parametrize(
    ("lines", "code"),
    [("F = 3\n3*u", "no-name"), ("= 3", "no-name"), ("F =", "no-name"), ("F = 3\nF = 4", "name-twice")],
)
def test_a_line_that_gives_no_name_to_a_formula_is_a_complaint(lines, code):
    reading = read_form({"arcs.0.name": "burn", "arcs.0.where": lines})
    assert [(item.field, item.code) for item in reading.complaints] == [("arcs.0.where", code)]


def test_members_without_fields_are_named():
    fields = form_from_document({"format": 1, "arcs": [], "unknowns": ["y"]})
    assert kept_back(fields) == ("arcs", "unknowns")


def test_every_part_of_a_row_is_found_by_its_pointer():
    fields = {
        "unknowns.0.name": "", "unknowns.1.name": "q", "unknowns.1.lower": "-1", "unknowns.1.about": "angle",
        "endpoints.0.formula": " ", "endpoints.3.formula": "q(0) = 0", "endpoints.4.formula": "q(1) = 1",
    }  # fmt: skip
    reading = read_form(fields)
    assert reading.document["endpoints"] == ["q(0) = 0", "q(1) = 1"]
    assert reading.places["/endpoints/1"] == "endpoints.4.formula"
    assert reading.places["/unknowns/q/within/0"] == "unknowns.1.lower"
    assert reading.places["/unknowns/q/within"] == "unknowns.1.lower"
    assert reading.places["/unknowns/q"] == "unknowns.1.name"
    assert reading.complaints == ()


def test_a_row_without_a_name_and_a_name_given_twice_are_complaints():
    fields = {
        "constants.0.name": "g", "constants.0.value": "1", "constants.1.name": "g", "constants.1.value": "2",
        "constants.2.name": "", "constants.2.value": "3",
    }  # fmt: skip
    reading = read_form(fields)
    assert reading.document["constants"] == {"g": 1}
    assert [(item.field, item.code) for item in reading.complaints] == [
        ("constants.1.name", "name-twice"),
        ("constants.2.name", "no-name"),
    ]


@pytest.mark.parametrize(
    ("text", "value"),
    [("3", 3), ("-1.5e-3", -0.0015), (".5", 0.5), ("1e999", "1e999"), ("T", "T"), ("3 m", "3 m"), ("0x10", "0x10"),
     ("١", "١"), ("1_000", "1_000"), ("[1, NaN]", "[1, NaN]"), ("[" * 100_000, "[" * 100_000)],
)  # fmt: skip
def test_text_is_a_number_only_where_json_would_agree(text, value):
    found = document_from_form({"independent.name": "t", "independent.to": text})["independent"]["to"]
    assert (found, type(found)) == (value, type(value))


@given(anything)
def test_pretty_text_is_the_same_document(value):
    assert json.loads(pretty(value)) == value


@pytest.mark.parametrize(
    "text",
    ["0.5 1.21\n1 2.5 0.1", "0.5\t1.21\n1\t2.5\t0.1\n", "0.5, 1.21\n\n1;2.5;0.1", "[[0.5, 1.21], [1, 2.5, 0.1]]"],
)
def test_points_can_be_pasted_from_a_table(text):
    fields = {"observations.0.of": "y", "observations.0.points": text}
    assert document_from_form(fields)["observations"] == [{"of": "y", "points": [[0.5, 1.21], [1, 2.5, 0.1]]}]


def test_points_that_are_no_numbers_stay_text_and_are_found_by_their_pointer():
    reading = read_form({"observations.1.of": "y", "observations.1.points": "0.5 high"})
    assert reading.document["observations"] == [{"of": "y", "points": "0.5 high"}]
    assert reading.places["/observations/0/points"] == "observations.1.points"
