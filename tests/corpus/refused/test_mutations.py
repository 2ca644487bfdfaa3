"""Whatever happens to a sound document, it is read, or refused with complaints: never another exception."""

import copy
import json

from hypothesis import given, settings
from hypothesis import strategies as st

from service.assemble import assemble
from service.complaints import Refused
from service.spec import read
from solvers.problem import Problem
from tests.corpus.refused.entries import BASES

SEEDS = [
    *BASES.values(),
    {
        **BASES["motion"],
        "where": {"swing": "q'*l", "start": "x(0)", "reach": "2*D"},
        "guess": {"T": 4, "x": "3*t/T", "q": [[0, 0], [2, 5], [4, 0]]},
        "constraints": ["-1.5 <= x' <= 1.5", "swing <= 2", "integral(a^2) <= 100", "x(1) <= reach"],
        "solve": {"tolerance": 1e-6, "points": 500},
    },
]

WORDS = ["x", "y", "q", "T", "a", "u", "t", "pi", "0", "1", "2", "1e9", "x'", "y''", "x(0)", "y(3)", "x(T)", "x'(0)"]
SIGNS = ["+", "-", "*", "/", "^", "(", ")", "=", "<=", ">=", ",", "sqrt(", "integral(", "max(", "'", " "]
TEXT = st.lists(st.sampled_from(WORDS + SIGNS), max_size=12).map("".join) | st.text(max_size=20)
UNITS = st.sampled_from(["m", "s", "deg", "mm/s", "1/min", "kg*m/s^2", "%", "", "m^-2", "degC"])
LEAF = st.none() | st.booleans() | st.integers() | st.floats() | TEXT | UNITS
VALUE = st.recursive(LEAF, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(TEXT, inner, max_size=3))


def _paths(value, path=()):
    yield path
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for step, inner in items:
        yield from _paths(inner, (*path, step))


def _edited(document, path, value, action):
    """A copy of the document with one part replaced, removed or doubled."""
    document = copy.deepcopy(document)
    if not path:
        return value
    parent = document
    for step in path[:-1]:
        parent = parent[step]
    if action == "remove":
        del parent[path[-1]]
    elif action == "double" and isinstance(parent, list):
        parent.append(parent[path[-1]])
    else:
        parent[path[-1]] = value
    return document


@st.composite
def mutated(draw):
    """A sound document with up to three edits."""
    document = draw(st.sampled_from(SEEDS))
    for _ in range(draw(st.integers(1, 3))):
        path = draw(st.sampled_from(list(_paths(document))))
        document = _edited(document, path, draw(VALUE), draw(st.sampled_from(["replace", "remove", "double"])))
    return document


@st.composite
def reworded(draw):
    """A sound document with formulas changed in a few characters."""
    document = copy.deepcopy(draw(st.sampled_from(SEEDS)))
    texts = [path for path in _paths(document) if path and isinstance(_at(document, path), str)]
    for _ in range(draw(st.integers(1, 3))):
        path = draw(st.sampled_from(texts))
        text = _at(document, path)
        start = draw(st.integers(0, len(text)))
        end = draw(st.integers(start, min(len(text), start + 4)))
        document = _edited(document, path, text[:start] + draw(TEXT) + text[end:], "replace")
    return document


def _at(document, path):
    for step in path:
        document = document[step]
    return document


def _survives(body: bytes) -> None:
    try:
        problem = assemble(read(body))
    except Refused as refusal:
        assert refusal.complaints
        assert all(one.message and one.hint and one.code for one in refusal.complaints)
    else:
        assert isinstance(problem, Problem)


@settings(deadline=None, max_examples=200)
@given(mutated())
def test_any_edit_of_the_members_is_read_or_refused(document):
    _survives(json.dumps(document).encode())


@settings(deadline=None, max_examples=200)
@given(reworded())
def test_any_edit_of_the_formulas_is_read_or_refused(document):
    _survives(json.dumps(document).encode())


@settings(deadline=None, max_examples=200)
@given(st.sampled_from(SEEDS), st.integers(0), st.binary(max_size=4), st.integers(0, 6))
def test_any_damage_to_the_bytes_is_read_or_refused(document, place, inserted, removed):
    body = json.dumps(document).encode()
    place %= len(body)
    _survives(body[:place] + inserted + body[place + removed :])
