"""Natural sizes of unknowns of which the data say nothing."""

import numpy as np
import pytest

from solvers.solution import Verdict
from solvers.solve import solve
from solvers.starts.guess import guesses
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from solvers.transcription.natural import at_natural_sizes, natural_sizes
from tests.unit.solvers.problems import compiled, shape

MESH = uniform(1, 8, 4)
LEVEL = ["y(0) = 0", "y(3) = 0"]


def looked_at(**members):
    problem = compiled(shape(**{"endpoints": LEVEL} | members))
    where = layout(problem, MESH)
    return problem, where, next(guess.z for guess in guesses(problem, MESH, where) if not guess.bend.size)


def sizes(**members):
    problem, where, z = looked_at(**members)
    return natural_sizes(problem, MESH, where, z)


@pytest.mark.parametrize("steep", [1e-9, 1e-3, 1.0, 1e4, 1e8])
@pytest.mark.parametrize(
    "integrand",
    [
        "sqrt(1 + (y'/c)^2)",
        "y'^2 - 2*c*y",
        "(y'/c)^2 + exp(y/c)",
        "y'^4/c^2 + y'^2 + y^2",
        "y'^2 + y^2/sqrt(c^2 - y^2)",
    ],
)
def test_a_size_is_where_one_term_takes_over_from_another(integrand, steep):
    """All of these are the same problem in y/c."""
    found = sizes(functional={"integrand": integrand}, constants={"c": steep})
    assert 1e-2 < found["y"] / steep < 1e2


@pytest.mark.parametrize("length", [1e-6, 1.0, 1e6])
def test_a_limit_tells_the_size(length):
    problem = {"functional": {"integrand": "y'^2"}, "constraints": [f"integral(y^2) = {length**2!r}"]}
    assert 1e-2 < sizes(**problem)["y"] / length < 1e2


def test_a_pure_power_tells_no_size():
    assert sizes(functional={"integrand": "y'^2"}) == {}


def test_what_the_data_tell_is_not_asked():
    assert sizes(functional={"integrand": "y'^2 - 2*y"}, endpoints=["y(0) = 0", "y(3) = 7"]) == {}
    assert sizes(functional={"integrand": "y'^2 - 2*y"}, unknowns={"y": {"within": [-2, 2]}}) == {}


def test_what_is_given_at_an_end_stays():
    problem, where, z = looked_at(functional={"integrand": "y'^2 - 2e6*y"})
    bent = at_natural_sizes(problem, MESH, where, z)
    assert np.abs(bent[where.nodes[[0, -1]]]).max() == 0
    assert np.abs(bent[where.nodes]).max() > 1e5


@pytest.mark.parametrize("load", [1e-9, 1e-3, 1e3, 1e9])
def test_a_string_under_any_load_is_solved(load):
    """y'' = -load: the value is -load^2 L^3/12."""
    found = solve(shape(functional={"integrand": f"y'^2 - 2*{load!r}*y"}, endpoints=LEVEL))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value + load**2 * 27 / 12) <= found.value_error <= 1e-6 * load**2


@pytest.mark.parametrize("load", [1e-12, 1e-3, 1e9])
def test_a_beam_under_any_load_at_its_end_is_solved(load):
    """The integrand is one power and the endpoint term another: y = load (3 L x^2 - x^3)/6, value -load^2 L^3/6."""
    functional = {"integrand": "y''^2/2", "endpoint": f"-{load!r}*y(3)"}
    clamped = ["y(0) = 0", "y'(0) = 0"]
    assert 1e-2 < sizes(functional=functional, endpoints=clamped)["y"] / (9 * load) < 1e2
    found = solve(shape(functional=functional, endpoints=clamped))
    assert found.verdict is Verdict.GLOBAL_MINIMUM
    assert abs(found.value + load**2 * 27 / 6) <= found.value_error <= 1e-6 * load**2 * 27 / 6
