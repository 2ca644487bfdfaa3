"""Fits to observations of several arcs: the same numbers as closed-form models and another least-squares program."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.optimize import curve_fit

from solvers.forms.beside import side_by_side
from solvers.solution import Verdict
from solvers.solve import solve
from tests.unit.service.assemble.stating import stated

RANDOM = np.random.default_rng(11)


def joined_lines(x, a, b, c, d):
    """a + b x up to d, from there with the slope c."""
    return a + b * np.minimum(x, d) + c * np.maximum(x - d, 0.0)


def noisy(model, places, spread):
    return (model + spread * RANDOM.standard_normal(len(places))).tolist()


PLACES = np.array([0.2, 0.9, 1.4, 1.9, 2.6, 3.1, 3.7, 4.4, 4.9])
HEIGHTS = noisy(joined_lines(PLACES, 1.0, 0.8, -0.4, 2.2), PLACES, 0.02)


def lines(lists, **members):
    return solve(stated(**{
        "independent": {"name": "x", "from": 0, "to": 5},
        "unknowns": {"y": {}},
        "parameters": {"a": {}, "b": {}, "c": {}, "d": {"within": [2, 2.5]}},
        "dynamics": None,
        "functional": None,
        "endpoints": ["y(0) = a"],
        "arcs": [{"name": "rise", "from": 0, "to": "d", "dynamics": ["y' = b"]},
                 {"name": "fall", "from": "d", "to": 5, "dynamics": ["y' = c"]}],
        "observations": lists,
    } | members))  # fmt: skip


def points(of=slice(None)):
    return [list(pair) for pair in zip(PLACES[of].tolist(), np.array(HEIGHTS)[of].tolist(), strict=True)]


def sigmas(solution):
    return np.sqrt(np.diag(solution.fit.covariance))


def test_joined_lines_with_a_free_junction_are_those_of_another_program():
    """Regression in two phases: Hudson (1966), J. Amer. Statist. Assoc. 61 (from memory)."""
    found = lines([{"of": "y", "points": points()}])
    best, covariance = curve_fit(joined_lines, PLACES, HEIGHTS, [1.0, 0.8, -0.4, 2.2])
    assert found.verdict is Verdict.LOCAL_MINIMUM
    assert [found.parameters[name] for name in "abcd"] == pytest.approx(best, rel=1e-6)
    assert found.fit.names == ("a", "b", "c", "d")
    assert found.fit.covariance == pytest.approx(covariance, rel=1e-4, abs=1e-9)
    assert found.fit.freedom == pytest.approx(len(PLACES) - 4)
    (told,) = found.fit.observations
    assert told.places.tolist() == PLACES.tolist()
    assert told.observed.tolist() == HEIGHTS
    assert told.fitted == pytest.approx(joined_lines(PLACES, *best), abs=1e-7)


def test_lists_of_several_arcs_and_any_order_of_points_are_the_same_fit():
    whole = lines([{"of": "y", "points": points()}])
    shuffled = RANDOM.permutation(len(PLACES))
    early = [k for k in shuffled if PLACES[k] < 2]
    late = [k for k in shuffled if PLACES[k] > 2]
    parted = lines(
        [{"of": "y", "arc": "fall", "points": points(late)}, {"of": "y", "arc": "rise", "points": points(early)}]
    )
    assert parted.value == pytest.approx(whole.value, rel=1e-8)
    assert parted.fit.covariance == pytest.approx(whole.fit.covariance, rel=1e-6)
    for told, chosen in zip(parted.fit.observations, (late, early), strict=True):
        assert told.places.tolist() == PLACES[chosen].tolist()
        assert told.observed.tolist() == np.array(HEIGHTS)[chosen].tolist()
        assert told.fitted == pytest.approx(whole.fit.observations[0].fitted[chosen], abs=1e-7)
        assert told.fitted_sigma == pytest.approx(whole.fit.observations[0].fitted_sigma[chosen], rel=1e-5)
    assert [told.pointer for told in parted.fit.observations] == ["/observations/0/of", "/observations/1/of"]


def test_an_arc_that_is_named_says_on_which_side_of_a_free_junction_its_points_are():
    wide = {"parameters": {"a": {}, "b": {}, "c": {}, "d": {"within": [0, 5]}}}
    early, late = points(slice(0, 4)), points(slice(4, None))
    found = lines([{"of": "y", "arc": "rise", "points": early}, {"of": "y", "arc": "fall", "points": late}], **wide)
    assert found.parameters["d"] == pytest.approx(lines([{"of": "y", "points": points()}]).parameters["d"], rel=1e-6)


def test_a_value_that_jumps_is_observed_on_both_sides():
    """Two means: what is before the step and what is after it, each with the variance of a mean."""
    before, after = [1.1, 0.9, 1.06], [2.0, 2.2, 1.95, 2.05]
    points = {"low": [[0.1, 0.3, 0.5], before], "high": [[0.5, 0.6, 0.8, 1], after]}
    found = solve(stated(
        unknowns={"y": {}}, dynamics=["y' = 0"], functional=None, parameters={"j": {}},
        endpoints=["y(0.5+) = y(0.5-) + j"],
        arcs=[{"name": "low", "from": 0, "to": 0.5}, {"name": "high", "from": 0.5, "to": 1}],
        observations=[{"of": "y", "arc": arc, "sigma": 0.1, "points": list(zip(*rows, strict=True))}
                      for arc, rows in points.items()],
    ))  # fmt: skip
    assert found.parameters["j"] == pytest.approx(np.mean(after) - np.mean(before), rel=1e-7)
    assert sigmas(found) == pytest.approx([0.1 * np.sqrt(1 / 3 + 1 / 4)], rel=1e-6)
    low, high = found.fit.observations
    assert low.fitted == pytest.approx(np.full(3, np.mean(before)), abs=1e-7)
    assert high.fitted == pytest.approx(np.full(4, np.mean(after)), abs=1e-7)
    assert low.places.tolist() == [0.1, 0.3, 0.5]


def test_formulas_and_abbreviations_of_an_arc_can_be_observed():
    """What each arc calls z: 2 y on the first, y + t on the second; y = k t."""
    found = solve(stated(
        unknowns={"y": {}}, dynamics=["y' = k"], functional=None, parameters={"k": {}}, endpoints=["y(0) = 0"],
        arcs=[{"name": "one", "from": 0, "to": 0.5, "where": {"z": "2*y"}},
              {"name": "two", "from": 0.5, "to": 1, "where": {"z": "y + t", "w": "y*t"}}],
        observations=[{"of": "z", "points": [[0.25, 0.5 * 3], [0.75, 0.75 * 4]]},
                      {"of": "w", "arc": "two", "points": [[0.5, 0.75], [1, 3]]}],
    ))  # fmt: skip
    assert found.parameters["k"] == pytest.approx(3, rel=1e-7)
    assert found.value == pytest.approx(0, abs=1e-10)


def test_free_curves_between_data_are_smoothed_across_a_junction_as_without_it():
    members = {
        "unknowns": {"y": {}}, "dynamics": None, "endpoints": [],
        "functional": {"seek": "minimum", "integrand": "0.01*y''^2"},
        "observations": [{"of": "y", "points": [[0.1, 1], [0.3, 1.4], [0.6, 0.9], [0.8, 0.2], [0.95, 0.4]]}],
    }  # fmt: skip
    arcs = [{"name": "one", "from": 0, "to": 0.5}, {"name": "two", "from": 0.5, "to": 1}]
    whole, cut = solve(stated(**members)), solve(stated(**members, arcs=arcs))
    assert cut.value == pytest.approx(whole.value, rel=1e-7)
    assert cut.fit.freedom == pytest.approx(whole.fit.freedom, rel=1e-5)
    (one,), (other,) = whole.fit.observations, cut.fit.observations
    assert other.fitted == pytest.approx(one.fitted, abs=1e-6)
    assert other.fitted_sigma == pytest.approx(one.fitted_sigma, rel=1e-4)


def test_the_guess_goes_through_the_data():
    problem = stated(
        unknowns={"y": {}}, dynamics=["y' = k"], functional=None, parameters={"k": {}}, endpoints=[],
        arcs=[{"name": "one", "from": 0, "to": 0.5}, {"name": "two", "from": 0.5, "to": 1}],
        observations=[{"of": "y", "points": [[0.25, 1], [0.75, 5]]}],
    )  # fmt: skip
    from solvers.forms.arc_guess import with_sketches

    sketched = with_sketches(side_by_side(problem))
    ends = [unknown.guess[-1][1] for unknown in sketched.unknowns if unknown.guess and unknown.order == 1]
    assert ends == pytest.approx([1, 3, 5, 5])
    assert all(first <= last for first, last in pairwise(ends))
