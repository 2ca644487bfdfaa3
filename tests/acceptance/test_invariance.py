"""Declared units and the size of things do not matter, and two processes agree to the last bit.

Every document is solved in its own form and in an equivalent one; value, verdict and curve have to agree.  Other ways
to say the same are tried on the whole catalogue in `test_restated`.
"""

import json
import re
from functools import lru_cache

import numpy as np
import pytest

from service.assemble import assemble
from service.spec import read
from solvers.solve import solve
from tests.acceptance.solving import PROCESSES

WITH_UNITS = {
    "rest": {
        "format": 1,
        "independent": {"name": "t", "unit": "s", "from": 0, "to": 2},
        "unknowns": {"x": {"unit": "m"}},
        "functional": {"seek": "minimum", "integrand": "x''^2"},
        "endpoints": ["x(0) = 0", "x'(0) = 0.5", "x(2) = 3", "x'(2) = 0"],
    },
    "nonlinear": {
        "format": 1,
        "independent": {"name": "t", "unit": "s", "from": 0, "to": 2},
        "constants": {"k": "2 1/s^2", "l": "1.5 m"},
        "unknowns": {"x": {"unit": "m"}},
        "functional": {"seek": "minimum", "integrand": "x'^2 + k*x^4/l^2"},
        "endpoints": ["x(0) = 1", "x(2) = 3"],
    },
    "haste": {
        "format": 1,
        "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
        "parameters": {"T": {"unit": "s", "within": [0.5, 60]}},
        "unknowns": {"x": {"unit": "m"}, "u": {"unit": "m/s^2", "within": [-2, 1]}},
        "dynamics": ["x'' = u"],
        "functional": {"seek": "minimum", "endpoint": "T"},
        "endpoints": ["x(0) = 0", "x'(0) = 0", "x(T) = 3", "x'(T) = 0"],
    },
    "line": {
        "format": 1,
        "independent": {"name": "t", "unit": "s", "from": 0, "to": 3},
        "constants": {"c": "2 m/s"},
        "unknowns": {"x": {"unit": "m", "within": [0.5, None]}},
        "functional": {"seek": "minimum", "integrand": "x*sqrt(1 + (x'/c)^2)"},
        "endpoints": ["x(0) = 2", "x(3) = 1.5"],
    },
}
LENGTHS = {"m": 1.0, "um": 1e6, "Mm": 1e-6, "mm": 1e3, "km": 1e-3}
TIMES = {"s": 1.0, "us": 1e6, "Ms": 1e-6, "ms": 1e3}


def _restated(document, length, time):
    """The document in other units, its numbers with them."""
    many, often = LENGTHS[length], TIMES[time]

    def unit(text):
        return re.sub(r"\bs\b", time, re.sub(r"\bm\b", length, text))

    def factor(text):
        power = {"m": 1.0, "s": 0.0, "m/s^2": 1.0}[text]
        return many**power * (often ** {"m": 0, "s": 1, "m/s^2": -2}[text])

    def bounds(part):
        limits = [None if v is None else v * factor(part["unit"]) for v in part["within"]]
        return part | {"unit": unit(part["unit"]), "within": limits}

    changed = json.loads(json.dumps(document))
    changed["independent"] |= {"unit": time} | {
        end: value * often for end in ("from", "to") if isinstance(value := document["independent"][end], int | float)
    }
    for member in ("parameters", "unknowns"):
        for name, part in document.get(member, {}).items():
            changed[member][name] = bounds(part) if "within" in part else part | {"unit": unit(part["unit"])}
    for k, relation in enumerate(document["endpoints"]):
        left, right = relation.split(" = ")
        name, place = left[:-1].split("(")
        at = place if place == "T" else repr(float(place) * often)
        changed["endpoints"][k] = f"{name}({at}) = {float(right) * many / often ** name.count(chr(39))!r}"
    return changed


@lru_cache
def _solved(text):
    problem = assemble(read(text.encode()))
    return problem, solve(problem)


def _compared(text, other):
    """Both in SI: value, verdict, curve."""
    (_, a), (_, b) = _solved(text), _solved(other)
    assert a.verdict is b.verdict
    assert b.value == pytest.approx(a.value, rel=1e-6)
    shares = np.array([0.1, 0.35, 0.62, 0.9])
    at, there = (s.curve.breaks[0] + shares * np.ptp(s.curve.breaks) for s in (a, b))
    size = np.abs(a.curve.evaluate("x", at)).max()
    np.testing.assert_allclose(b.curve.evaluate("x", there), a.curve.evaluate("x", at), atol=1e-4 * size)


@pytest.mark.parametrize(
    "length, time", [("um", "s"), ("Mm", "s"), ("m", "us"), ("m", "Ms"), ("mm", "ms"), ("km", "us")]
)
@pytest.mark.parametrize("name", WITH_UNITS)
def test_declared_units_do_not_matter(name, length, time):
    document = WITH_UNITS[name]
    _compared(json.dumps(document), json.dumps(_restated(document, length, time)))


SIZES = [1e-6, 1e-3, 1e3, 1e6]


@pytest.mark.parametrize("factor", SIZES)
@pytest.mark.parametrize("name", WITH_UNITS)
def test_the_size_of_things_does_not_matter(name, factor):
    """The same numbers in units a million times as large or as small: now the problem in SI is another size."""
    document = json.loads(json.dumps(WITH_UNITS[name]))
    unit = {1e-6: "um", 1e-3: "mm", 1e3: "km", 1e6: "Mm"}[factor]
    changed = json.loads(re.sub(r"\bm\b", unit, json.dumps(document)))
    (one, a), (other, b) = _solved(json.dumps(document)), _solved(json.dumps(changed))
    assert a.verdict is b.verdict
    assert b.value / other.value_unit.factor == pytest.approx(a.value / one.value_unit.factor, rel=1e-6)
    at = a.curve.breaks[0] + np.array([0.1, 0.35, 0.62, 0.9]) * np.ptp(a.curve.breaks)
    size = np.abs(a.curve.evaluate("x", at)).max()
    np.testing.assert_allclose(b.curve.evaluate("x", at) / factor, a.curve.evaluate("x", at), atol=1e-4 * size)


def _told(sender, text):
    _, found = _solved(text)
    functions = {name: [c.tolist() for c in pieces] for name, pieces in found.curve.functions.items()}
    prices = [(price.label, price.price) for price in found.prices]
    figures = [(check.name, check.status.value, check.figure) for check in found.checks]
    sender.send(repr((found.value, found.value_error, found.curve.breaks.tolist(), functions, prices, figures)))


@pytest.mark.parametrize("name", WITH_UNITS)
def test_two_processes_find_the_same_to_the_last_bit(name):
    told = []
    for _ in range(2):
        receiver, sender = PROCESSES.Pipe(duplex=False)
        child = PROCESSES.Process(target=_told, args=(sender, json.dumps(WITH_UNITS[name])), daemon=True)
        child.start()
        sender.close()
        assert receiver.poll(120), "no end"
        told.append(receiver.recv())
        child.join()
    assert told[0] == told[1]
