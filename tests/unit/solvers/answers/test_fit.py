"""Fits to observations: certified and textbook values, by least squares of other sources."""

import numpy as np
import pytest
from scipy.interpolate import make_smoothing_spline
from scipy.optimize import curve_fit, least_squares

from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.service.assemble.stating import stated

MISRA = [[77.6, 10.07], [114.9, 14.73], [141.1, 17.94], [190.8, 23.93], [239.9, 29.61], [289.0, 35.18], [332.8, 40.02],
         [378.4, 44.82], [434.8, 50.76], [477.3, 55.05], [536.8, 61.01], [593.1, 66.40], [689.1, 75.47],
         [760.0, 81.78]]  # fmt: skip
"""Dental research: y = b1 (1 - exp(-b2 x)).  NIST Statistical Reference Datasets, Misra1a (from memory)."""

RANDOM = np.random.default_rng(7)


def fitted(observations, **members):
    """The solution of a problem of observations only."""
    whole = {"dynamics": None, "functional": None, "endpoints": []} | members
    return solve(stated(**whole, observations=observations))


def sigmas(solution):
    return dict(zip(solution.fit.names, np.sqrt(np.diag(solution.fit.covariance)), strict=True))


def line(points, **options):
    return fitted(
        [{"of": "y", "points": points} | options],
        independent={"name": "x", "from": 0, "to": 5},
        unknowns={"y": {}},
        parameters={"a": {}, "b": {}},
        dynamics=["y' = b"],
        endpoints=["y(0) = a"],
    )


def test_saturating_growth_has_the_certified_figures():
    solution = fitted(
        [{"of": "y", "points": MISRA}],
        independent={"name": "x", "from": 0, "to": 760},
        unknowns={"y": {}},
        parameters={"b1": {"within": [1, 10000]}, "b2": {"within": [1e-6, 1]}},
        dynamics=["y' = b2*(b1 - y)"],
        endpoints=["y(0) = 0"],
    )
    assert solution.verdict is Verdict.LOCAL_MINIMUM
    assert solution.value == pytest.approx(1.2455138894e-1, rel=1e-8)
    assert solution.parameters == pytest.approx({"b1": 2.3894212918e2, "b2": 5.5015643181e-4}, rel=1e-7)
    assert sigmas(solution) == pytest.approx({"b1": 2.7070075241, "b2": 7.2668688436e-6}, rel=1e-6)
    assert solution.fit.spread == pytest.approx(1.0187876330e-1, rel=1e-8)
    assert solution.fit.freedom == pytest.approx(12)


def test_a_straight_line_has_the_covariances_of_the_textbook():
    """b = Sxy/Sxx, a = mean(y) - b mean(x); var b = s^2/Sxx, var a = s^2 (1/n + mean(x)^2/Sxx), s^2 = squares/(n - 2).

    Draper, Smith (1998), Applied Regression Analysis, section 1.4 (from memory).
    """
    x, y = np.array([0.0, 0.7, 1.9, 3.2, 3.2, 5.0]), np.array([1.1, 1.4, 2.6, 3.1, 3.4, 4.6])  # one place twice
    solution = line(np.column_stack([x, y]).tolist())
    spread = ((x - x.mean()) ** 2).sum()
    b = ((x - x.mean()) * (y - y.mean())).sum() / spread
    a = y.mean() - b * x.mean()
    squares = ((y - a - b * x) ** 2).sum()
    s2 = squares / 4
    assert solution.verdict is Verdict.GLOBAL_MINIMUM
    assert solution.value == pytest.approx(squares, rel=1e-9)
    assert solution.parameters == pytest.approx({"a": a, "b": b}, rel=1e-8)
    textbook = s2 * np.array([[1 / 6 + x.mean() ** 2 / spread, -x.mean() / spread], [-x.mean() / spread, 1 / spread]])
    np.testing.assert_allclose(solution.fit.covariance, textbook, rtol=1e-8)
    (told,) = solution.fit.observations
    np.testing.assert_allclose(told.places, x)
    np.testing.assert_allclose(told.observed - told.fitted, y - a - b * x, atol=1e-9)
    np.testing.assert_allclose(told.fitted_sigma, np.sqrt(s2 * (1 / 6 + (x - x.mean()) ** 2 / spread)), rtol=1e-8)
    np.testing.assert_allclose(told.normalised, (y - a - b * x) / np.sqrt(s2), atol=1e-8)


def test_known_sigmas_weigh_and_are_not_rescaled():
    x, y, sigma = np.array([0.5, 1.5, 2.5, 4.0]), np.array([1.0, 2.3, 2.9, 4.4]), np.array([0.1, 0.2, 0.1, 0.4])
    solution = line(np.column_stack([x, y, sigma]).tolist())
    best, covariance = curve_fit(lambda x, a, b: a + b * x, x, y, sigma=sigma, absolute_sigma=True)
    assert list(solution.parameters.values()) == pytest.approx(best.tolist(), rel=1e-7)
    np.testing.assert_allclose(solution.fit.covariance, covariance, rtol=1e-6)
    assert solution.fit.weighted
    assert solution.value == pytest.approx((((y - best[0] - best[1] * x) / sigma) ** 2).sum(), rel=1e-7)
    alike = line(np.column_stack([x, y]).tolist(), sigma=0.2)
    assert alike.fit.observations[0].sigma.tolist() == [0.2] * 4


def growth(t, seen, **members):
    """Logistic growth seen through a gauge of unknown gain: c y with y' = r y (1 - y), y(0) = 0.1."""
    return fitted(
        [{"of": "c*y", "points": np.column_stack([t, seen]).tolist()}],
        independent={"name": "t", "from": 0, "to": 8},
        unknowns={"y": {}},
        parameters={"r": {"within": [0.1, 5]}, "c": {"within": [0.1, 10]}},
        dynamics=["y' = r*y*(1 - y)"],
        endpoints=["y(0) = 0.1"],
        **members,
    )


def test_a_formula_can_be_observed():
    t = np.linspace(0.2, 8, 25)
    seen = 3 / (1 + 9 * np.exp(-0.9 * t)) + 0.02 * RANDOM.standard_normal(25)
    solution = growth(t, seen, guess={"y": [[0, 0.1], [8, 1]], "c": 3})
    best, covariance = curve_fit(
        lambda t, r, c: c / (1 + 9 * np.exp(-r * t)), t, seen, p0=[1, 2], xtol=1e-13, ftol=1e-13
    )
    assert list(solution.parameters.values()) == pytest.approx(best.tolist(), rel=1e-6)
    assert list(sigmas(solution).values()) == pytest.approx(np.sqrt(np.diag(covariance)).tolist(), rel=1e-4)


def test_of_two_fits_another_start_finds_the_better_one():
    """Slow growth with much gain is a local minimum as well: SciPy's least squares stays there."""
    t = np.linspace(0.2, 8, 25)
    seen = 3 / (1 + 9 * np.exp(-0.9 * t))
    solution = growth(t, seen, solve={"starts": 6})
    assert solution.value == pytest.approx(0, abs=1e-9)
    assert solution.parameters == pytest.approx({"r": 0.9, "c": 3}, rel=1e-6)
    worse = solution.extremals[1].solution
    assert worse.verdict is Verdict.LOCAL_MINIMUM
    local = least_squares(lambda p: p[1] / (1 + 9 * np.exp(-p[0] * t)) - seen, list(worse.parameters.values()))
    assert worse.value == pytest.approx(2 * local.cost, rel=1e-6) and worse.value > 1


def test_a_free_curve_becomes_the_smoothing_spline():
    """sum (y - data)^2 + k integral(y''^2) is least for a natural cubic spline (Reinsch, 1967); SciPy has one too."""
    x = np.linspace(0, 4, 9)
    y = np.sin(x) + 0.1 * RANDOM.standard_normal(9)
    solution = fitted(
        [{"of": "y", "points": np.column_stack([x, y]).tolist()}],
        independent={"name": "x", "from": 0, "to": 4},
        unknowns={"y": {}},
        functional={"seek": "minimum", "integrand": "0.05*y''^2"},
    )
    spline = make_smoothing_spline(x, y, lam=0.05)
    np.testing.assert_allclose(
        solution.curve.evaluate("y", np.linspace(0, 4, 60)), spline(np.linspace(0, 4, 60)), atol=1e-7
    )
    smoother = np.column_stack([make_smoothing_spline(x, unit, lam=0.05)(x) for unit in np.eye(9)])
    assert solution.fit.freedom == pytest.approx(9 - np.trace(smoother), rel=1e-6)
    np.testing.assert_allclose(
        solution.fit.observations[0].fitted_sigma, solution.fit.spread * np.sqrt(np.diag(smoother)), rtol=1e-5
    )


def test_many_places_cost_little_more_than_few():
    """Each place is one break of the mesh, whatever their number."""
    t = np.linspace(0.01, 4.99, 150)
    solution = line(np.column_stack([t, 1 + 0.5 * t + 0.01 * RANDOM.standard_normal(150)]).tolist())
    assert solution.meshes[0].intervals == 151
    assert solution.fit.freedom == pytest.approx(148)


def test_what_the_data_do_not_determine_gets_no_sigma():
    """Only the product of two parameters shows."""
    solution = fitted(
        [{"of": "p*q*y", "points": [[0.25, 1.0], [0.5, 2.1], [1, 3.9]]}],
        unknowns={"y": {}},
        parameters={"p": {"within": [0.1, 100]}, "q": {"within": [0.1, 100]}},
        dynamics=["y' = 1"],
        endpoints=["y(0) = 0"],
    )
    assert solution.fit.covariance is None and solution.fit.freedom is None
    assert solution.fit.squares == pytest.approx(solution.value)


def test_a_model_that_fits_exactly():
    """The least sum of squares is zero: what is relative to it would be relative to nothing."""
    t = np.linspace(0, 5, 11)
    solution = fitted(
        [{"of": "y", "points": np.column_stack([t, 2 * np.exp(-0.7 * t)]).tolist()}],
        independent={"name": "t", "from": 0, "to": 8},
        unknowns={"y": {}},
        parameters={"k": {}, "a": {}},
        dynamics=["y' = -k*y"],
        endpoints=["y(0) = a"],
    )
    assert solution.verdict is Verdict.GLOBAL_MINIMUM  # no sum of squares is negative
    assert solution.parameters == pytest.approx({"k": 0.7, "a": 2.0}, rel=1e-9)
    assert solution.value == pytest.approx(0, abs=solution.value_error) and solution.value_error < 1e-10


def test_a_parameter_on_its_bound_does_not_vary():
    """The slope would be 1 and may only be 1/2: y = x/2 + a is left, with the variance of a mean."""
    x = np.array([1.0, 2.0, 3.0, 4.0])
    y = x + np.array([0.1, -0.1, -0.1, 0.1])
    solution = fitted(
        [{"of": "y", "points": np.column_stack([x, y]).tolist()}],
        independent={"name": "x", "from": 0, "to": 5},
        unknowns={"y": {}},
        parameters={"a": {}, "b": {"within": [0, 0.5]}},
        dynamics=["y' = b"],
        endpoints=["y(0) = a"],
    )
    assert solution.parameters["b"] == pytest.approx(0.5, abs=1e-7)
    assert solution.fit.freedom == 3
    assert sigmas(solution) == pytest.approx({"a": np.sqrt(solution.value / 3 / 4), "b": 0.0}, rel=1e-6)
    assert solution.fit.held == ("b",)
    assert any(note.startswith("b rests on its limit") for note in solution.notes)


def test_an_end_may_be_free_beyond_the_observations():
    """Rest to rest in least time, drawn to where it was seen: the places of observations stay where they are."""
    solution = fitted(
        [{"of": "x", "sigma": 0.5, "points": [[0.5, 0.1], [1.0, 0.6]]}],
        independent={"name": "t", "from": 0, "to": "T"},
        unknowns={"x": {}, "u": {"within": [-1, 1]}},
        parameters={"T": {"within": [1.2, 10]}},
        dynamics=["x'' = u"],
        functional={"seek": "minimum", "endpoint": "T"},
        endpoints=["x(0) = 0", "x'(0) = 0", "x(T) = 1", "x'(T) = 0"],
    )
    assert solution.parameters["T"] == pytest.approx(2, abs=0.05)
    assert solution.fit.observations[0].places.tolist() == [0.5, 1.0]
    misfits = (solution.curve.evaluate("x", np.array([0.5, 1.0])) - [0.1, 0.6]) / 0.5
    assert solution.value == pytest.approx(solution.parameters["T"] + (misfits**2).sum(), rel=1e-6)
