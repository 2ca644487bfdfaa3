"""The reading with its necessary conditions, as a worker makes it."""

import json

import pytest

from service.complaints import Refused
from service.understanding import understand

BEAM = json.dumps(
    {
        "format": 1,
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {}},
        "functional": {"seek": "minimum", "integrand": "y''^2 - y"},
        "endpoints": ["y(0) = 0", "y'(0) = 0"],
    }
).encode()


def ask(body, seconds):
    _, text = understand({"seconds": seconds}, body, lambda event: None, lambda: False)
    return json.loads(text)


def test_the_conditions_come_with_the_reading():
    reading = ask(BEAM, 10)
    assert reading["unknowns"][0]["order"] == 2
    kinds = [condition["kind"] for condition in reading["necessary"]]
    assert kinds.count("Euler-Lagrange") == 1
    assert kinds.count("natural boundary") == 2, "at x = 1 neither y nor y' is fixed"


def test_what_takes_too_long_is_left_out_with_a_note():
    reading = ask(BEAM, -1)
    assert reading["necessary"] == []
    assert any("takes too long" in note for note in reading["notes"])


def test_an_invalid_document_is_refused():
    with pytest.raises(Refused):
        ask(b"{}", 10)
