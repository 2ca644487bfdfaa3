"""Problems made from a curve that is chosen first: ours has to come back to it from the default guess.

With the forcing g = q y - y'' of a curve y, the integrand y'^2 + q y^2 - 2 g y is convex (q >= 0) and has that curve as
its only extremal between its own ends: (y'^2 + q y^2 - 2 g y) differs from (y - y*)'^2 + q (y - y*)^2 by a constant and
what the ends fix.
"""

import json

import numpy as np
import pytest
from numpy.polynomial import Polynomial

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve


def stated(integrand, y0, y1):
    document = {
        "format": 1,
        "independent": {"name": "x", "from": 0, "to": 1},
        "unknowns": {"y": {}},
        "functional": {"seek": "minimum", "integrand": integrand},
        "endpoints": [f"y(0) = {y0!r}", f"y(1) = {y1!r}"],
    }
    return assemble(read(json.dumps(document).encode()))


def written(polynomial):
    return " + ".join(f"({float(c)!r})*x^{k}" for k, c in enumerate(polynomial.coef))


@pytest.mark.parametrize("seed", range(6))
def test_a_chosen_curve_is_found_again(seed):
    """A polynomial of degree 4 and a sine; the value by Gauss quadrature that is exact to rounding."""
    numbers = np.random.default_rng(seed)
    p, a, w = Polynomial(numbers.normal(size=5)), *numbers.uniform(0.5, 3, 2)
    q = float(numbers.uniform(0, 20))
    wave = f"({float(a)!r})*sin({float(w)!r}*x)"

    def curve(x):
        return p(x) + a * np.sin(w * x)

    def forcing(x):
        return q * p(x) - p.deriv(2)(x) + (q + w**2) * a * np.sin(w * x)

    g = f"{written(q * p - p.deriv(2))} + ({q + float(w) ** 2!r})*{wave}"
    found = solve(stated(f"y'^2 + {q!r}*y^2 - 2*y*({g})", float(curve(0.0)), float(curve(1.0))))
    nodes, weights = np.polynomial.legendre.leggauss(30)
    x, weights = (nodes + 1) / 2, weights / 2
    slope = p.deriv()(x) + a * w * np.cos(w * x)
    value = float(weights @ (slope**2 + q * curve(x) ** 2 - 2 * curve(x) * forcing(x)))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value - value) <= found.value_error
    assert found.value_error <= 1e-5 * max(abs(value), 1)
    at = np.linspace(0, 1, 50)
    size = np.abs(curve(at)).max()
    assert np.abs(found.curve.evaluate("y", at) - curve(at)).max() <= max(found.curve_error, 1e-9) * size


@pytest.mark.parametrize("seed", range(4))
def test_least_time_from_rest_to_rest(seed):
    """Full thrust a, then full brake b: T = sqrt(2 d (1/a + 1/b)), the switch at the share b/(a + b) of it."""
    d, a, b = (float(v) for v in np.random.default_rng(seed).uniform(0.5, 5, 3))
    document = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": "T"},
        "parameters": {"T": {"within": [0.01, 100]}},
        "unknowns": {"x": {}, "u": {"within": [-b, a]}},
        "dynamics": ["x'' = u"],
        "functional": {"seek": "minimum", "endpoint": "T"},
        "endpoints": ["x(0) = 0", "x'(0) = 0", f"x(T) = {d!r}", "x'(T) = 0"],
    }
    found = solve(assemble(read(json.dumps(document).encode())))
    exact = np.sqrt(2 * d * (1 / a + 1 / b))
    assert abs(found.value - exact) <= found.value_error < 1e-6
    assert np.abs(found.curve.breaks - exact * b / (a + b)).min() < 1e-8
    assert found.verdict is Verdict.LOCAL_MINIMUM
