"""The door for documents: what is read, what it keeps, and how its fingerprint behaves."""

import json

import pytest

from service.complaints import Refused, pointer
from service.spec import LARGEST_BODY, read
from service.spec.schema import EXAMPLES

SMALL = {
    "format": 1,
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y'^2"},
}


def _read(document):
    return read(json.dumps(document).encode())


def test_only_format_independent_unknowns_and_functional_are_needed():
    document = _read(SMALL)
    assert document.endpoints == ()
    assert document.solve.tolerance == 1e-6
    assert document.solve.time_limit == 60
    assert document.unknowns["y"].within == (None, None)


def test_the_document_is_kept_as_it_was_sent():
    sent = {**SMALL, "title": "größer", "solve": {"starts": 3}}
    assert _read(sent).source == sent


def test_whole_numbers_and_fractions_are_both_numbers():
    document = _read({**SMALL, "constants": {"n": 3, "r": 0.5, "g": "9.81 m/s^2"}})
    assert document.constants == {"n": 3.0, "r": 0.5, "g": "9.81 m/s^2"}


def test_a_document_does_not_change():
    document = _read(SMALL)
    with pytest.raises(ValueError, match="frozen"):
        document.title = "other"


def test_the_hash_is_blind_to_spacing_and_order():
    spaced = json.dumps(dict(reversed(SMALL.items())), indent=4).encode()
    assert read(spaced).canonical_hash() == _read(SMALL).canonical_hash()
    assert _read(SMALL).canonical_hash().startswith("sha256:")


@pytest.mark.parametrize("change", [{"title": "a"}, {"independent": {"name": "x", "from": 0, "to": 2}}])
def test_the_hash_tells_documents_apart(change):
    assert _read({**SMALL, **change}).canonical_hash() != _read(SMALL).canonical_hash()


def test_a_byte_order_mark_does_no_harm():
    assert read(b"\xef\xbb\xbf" + json.dumps(SMALL).encode()).source == SMALL


def test_the_largest_body_is_read_and_one_byte_more_is_not():
    text = json.dumps(SMALL)
    read(text.ljust(LARGEST_BODY).encode())
    with pytest.raises(Refused, match="bytes"):
        read(text.ljust(LARGEST_BODY + 1).encode())


def test_all_findings_of_a_stage_come_in_one_answer():
    with pytest.raises(Refused) as refusal:
        _read({**SMALL, "titel": "a", "solve": {"starts": "many"}, "endpoints": ["y(0) = 0", 3]})
    assert {one.pointer for one in refusal.value.complaints} == {"/titel", "/solve/starts", "/endpoints/1"}


def test_the_place_of_a_syntax_error_is_counted_in_characters():
    with pytest.raises(Refused) as refusal:
        read('{"title": "Länge",\n "notes": "Größe" x}'.encode())
    (complaint,) = refusal.value.complaints
    assert complaint.span == (37, 38)
    assert "line 2" in complaint.message


def test_pointers_escape_as_rfc_6901_says():
    # RFC 6901, section 5: "/a~1b" is the member "a/b", "/m~0n" the member "m~n", "/" the member "".
    assert [pointer("a/b"), pointer("m~n"), pointer(""), pointer(), pointer("foo", 0)] == [
        "/a~1b",
        "/m~0n",
        "/",
        "",
        "/foo/0",
    ]


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example["title"])
def test_the_examples_of_the_schema_are_read(example):
    assert _read(example).title == example["title"]
