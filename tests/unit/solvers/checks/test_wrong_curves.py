"""Every check is shown to fail: at least two deliberately wrong curves for each, and right ones beside them.

A check that cannot fail proves nothing.  Those that only ever prove (convexity, lower bound) are shown to be silent on
what is not so.  All of a curve's checks are made, as for a result, so that nothing here depends on how one is called.
"""

from collections import Counter
from dataclasses import replace

import numpy as np
import pytest

from solvers import checks
from solvers.solution import Status

RISE = {
    "independent": {"name": "x", "from": 0, "to": 1},
    "unknowns": {"y": {}},
    "functional": {"seek": "minimum", "integrand": "y'^2 + y^2"},
    "endpoints": ["y(0) = 0", "y(1) = 1"],
}
"""y = sinh(x)/sinh(1)."""
CONTROLLED = {
    "independent": {"name": "t", "from": 0, "to": 1},
    "unknowns": {"y": {"within": [-2, 2]}, "u": {"within": [-9, 9]}},
    "dynamics": ["y' = u - y"],
    "functional": {"seek": "minimum", "integrand": "u^2"},
    "endpoints": ["y(0) = 0", "y(1) = 1", "y(0.5) >= 0.1"],
    "constraints": ["y + u <= 8", "integral(y) <= 2"],
}
FREE = RISE | {"endpoints": ["y(0) = 1"], "functional": {"seek": "minimum", "integrand": "y'^2", "endpoint": "y(1)"}}
"""y = 1 - x/2, where 2 y'(1) + 1 = 0."""
LONG = RISE | {"endpoints": ["y(0) = 0", "y(1) = 0"]}


def of(document, **members):
    return document | members


def integrand(document, text, seek="minimum"):
    return of(document, functional={"seek": seek, "integrand": text})


def line(x):
    return 1.0 * x


def ones(x):
    return np.ones_like(x)


def nothing(x):
    return np.zeros_like(x)


SOLVED = "solved"
"""Stands for the curve that the solver finds; else states and controls are given as functions."""


def same(path):
    return path


def shifted(share, **which):
    """The path with its multipliers of one sort changed by a share of the largest."""

    def change(path):
        (name,) = which
        values = getattr(path, name)
        return replace(path, **{name: values + share * np.abs(values).max()})

    return change


def tilted(path):
    return replace(path, costates=path.costates * (1 + 0.1 * path.points[:, None]))


def worth(share):
    return lambda path: replace(path, value=share * path.value)


CASES = [
    # check, document, curve, change of the path
    ("motion", CONTROLLED, ([line], [ones]), same),  # 1 is not 1 - x
    ("motion", CONTROLLED, ([nothing], [ones]), same),
    ("motion", of(CONTROLLED, dynamics=["u = y' + y*y"]), ([line], [ones]), same),
    ("limits", CONTROLLED, ([lambda x: 2.2 * np.sin(np.pi * x)], [nothing]), same),
    ("limits", CONTROLLED, ([line], [lambda x: 8 + 0 * x]), same),
    ("limits", of(CONTROLLED, constraints=["y*u <= 0.2"]), ([line], [ones]), same),
    ("conditions", CONTROLLED, ([lambda x: 1.1 * x], [ones]), same),
    ("conditions", CONTROLLED, ([lambda x: x**6], [ones]), same),  # misses the way point
    ("conditions", of(CONTROLLED, constraints=["integral(y) <= 0.3"]), ([line], [ones]), same),
    ("conditions", RISE, SOLVED, worth(1.01)),
    ("stationarity", RISE, ([line], [ones]), same),
    ("stationarity", RISE, SOLVED, shifted(0.1, costates=True)),
    ("stationarity", CONTROLLED, SOLVED, shifted(0.1, costates=True)),
    ("stationarity", RISE, SOLVED, tilted),
    ("free ends", FREE, ([ones], [nothing]), same),
    ("free ends", FREE, SOLVED, shifted(0.1, costates=True)),
    ("free ends", of(FREE, parameters={"p": {"within": [-9, 9]}}, endpoints=["y(0) = p"],
                     functional={"seek": "minimum", "integrand": "y'^2", "endpoint": "y(1) + p^2"}),
     SOLVED, lambda path: replace(path, parameters=path.parameters + 0.1)),
    ("first integral", RISE, ([lambda x: x**2], [lambda x: 2 * x]), same),
    ("first integral", RISE, SOLVED, tilted),
    ("first integral", integrand(RISE, "x*y'^2 + y'^2"), SOLVED, tilted),  # the momentum of y
    ("corners", RISE, ([lambda x: np.maximum(0, 2 * x - 1)], [lambda x: 2.0 * (x > 0.5)]), same),
    ("corners", RISE, ([lambda x: np.minimum(1, 2 * x)], [lambda x: 2.0 * (x < 0.5)]), same),
    ("Legendre", integrand(LONG, "-y'^2 + y^2"), ([nothing], [nothing]), same),
    ("Legendre", integrand(RISE, "(y'^2 - 1)^2"), ([lambda x: 0.1 * x], [lambda x: 0.1 + 0 * x]), same),
    ("Legendre", integrand(LONG, "y'^2", "maximum"), ([nothing], [nothing]), same),
    ("Weierstrass", integrand(RISE, "y'^3"), ([line], [ones]), same),
    ("Weierstrass", of(integrand(RISE, "(y'^2 - 1)^2"), endpoints=["y(0) = 0", "y(1) = 0.8"]), SOLVED, same),
    ("conjugate points", integrand(LONG, "y'^2 - 12*y^2"), ([nothing], [nothing]), same),
    ("conjugate points", integrand(LONG, "12*y^2 - y'^2", "maximum"), ([nothing], [nothing]), same),
    ("conjugate points", of(integrand(LONG, "y'^2 - 4*y^2"), endpoints=["y(0) = 0"]), ([nothing], [nothing]), same),
    ("conjugate points", of(integrand(LONG, "y'^2 - 45*y^2"), constraints=["integral(y) = 0"]),
     ([nothing], [nothing]), same),
    ("convexity", integrand(RISE, "y'^2 - y^2"), ([line], [ones]), same),
    ("convexity", of(RISE, constraints=["y^2 + y'^2 >= 0.5"]), ([line], [ones]), same),
    ("lower bound", integrand(RISE, "(y' - 1)^2"), ([lambda x: x**2], [lambda x: 2 * x]), same),
    ("lower bound", integrand(RISE, "-(y' - 1)^2", "maximum"), ([lambda x: x**2], [lambda x: 2 * x]), same),
    ("slope growth", integrand(RISE, "(y^3 - x)^2*y'^6"), SOLVED, same),  # Mania (1934): the infimum is not reached
    ("slope growth", integrand(RISE, "x^(1/2)*y'^2 - 0.01*y^2"), SOLVED, same),  # nearly y = sqrt(x)
    ("refinement", RISE, SOLVED, same),  # with errors that are too large, below
    ("refinement", FREE, SOLVED, same),
]  # fmt: skip

PROVING = ("convexity", "lower bound")
"""Checks that never fail: what they do not prove they leave open."""


def label(case):
    return case[0]


@pytest.mark.parametrize("case", CASES, ids=label)
def test_the_check_does_not_pass_a_wrong_curve(case, sketched, solved):
    name, document, curve, change = case
    path = solved(document) if curve is SOLVED else sketched(document, *curve, intervals=8)
    error = 0.1 * abs(path.value) if name == "refinement" else 1e-12
    made = {check.name: check for check in checks.run(change(path), value_error=error, curve_error=1e-9, budget=60)}
    wanted = Status.NOT_APPLICABLE if name in PROVING else Status.FAILED
    if name == "conjugate points" and made[name].status is Status.NOT_APPLICABLE:
        pytest.fail(made[name].sentence)
    assert made[name].status is wanted, made[name].sentence


@pytest.mark.parametrize("document", [RISE, FREE, CONTROLLED], ids=["rise", "free", "controlled"])
def test_nothing_fails_on_the_right_curves(document, solved):
    path = solved(document)
    made = checks.run(path, value_error=1e-9 * abs(path.value), curve_error=1e-9, budget=60)
    assert [check.name for check in made if check.status is Status.FAILED] == []


def test_every_check_has_wrong_curves():
    count = Counter(name for name, *_ in CASES)
    assert set(count) == set(checks.NAMES)
    assert min(count.values()) >= 2
    assert len(CASES) >= 25
