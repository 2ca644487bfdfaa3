"""Complaints of the text view lead to their place in the text."""

import pytest

from web.form.text_place import line_of, place_of

TEXT = '{\n  "a/b": {"c": [1, "x + + 2", {}]},\n  "d": "q\\"q",\n  "e": -1.5e3\n}'


@pytest.mark.parametrize(
    ("pointer", "span", "shown"),
    [
        pytest.param("", None, TEXT, id="the whole document"),
        pytest.param("/a~1b/c", None, '[1, "x + + 2", {}]', id="a list"),
        pytest.param("/a~1b/c/1", None, '"x + + 2"', id="an item"),
        pytest.param("/a~1b/c/1", [4, 5], "+", id="a span in a string"),
        pytest.param("/a~1b/c/1", [7, 7], '"', id="a span of no width marks what follows"),
        pytest.param("/d", [1, 2], '"q\\"q"', id="in a string with escapes the whole of it"),
        pytest.param("/e", None, "-1.5e3", id="a number"),
        pytest.param("/e/x", [0, 1], "-1.5e3", id="nowhere: the nearest part around it"),
        pytest.param("/missing", None, TEXT, id="a missing member: the object"),
        pytest.param("/a~1b/c/7", None, '[1, "x + + 2", {}]', id="a missing item: the list"),
    ],
)
def test_a_pointer_finds_its_part_of_the_text(pointer, span, shown):
    start, end = place_of(TEXT, pointer, span)
    assert TEXT[start:end] == shown


@pytest.mark.parametrize("text", ["", "{", '{"a" 1}', "[" * 100_000, "nonsense", '{"a": 1, }'])
def test_text_that_cannot_be_read_has_no_places(text):
    assert place_of(text, "/b") is None


def test_lines_are_counted_from_one():
    assert [line_of(TEXT, TEXT.index(part)) for part in ("{", '"c"', '"e"')] == [1, 2, 4]
