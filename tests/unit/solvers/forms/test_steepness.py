"""The slope at which an integrand turns from level to steep."""

import pytest

from solvers.forms.steepness import steep_slopes
from solvers.starts.guess import first_guess
from solvers.transcription.layout import layout
from solvers.transcription.mesh import uniform
from solvers.transcription.scaling import find_scales
from tests.unit.solvers.problems import compiled, shape

MESH = uniform(1, 8, 4)


def steep(**members):
    problem = compiled(shape(**{"endpoints": ["y(0) = 1", "y(3) = 2"]} | members))
    where = layout(problem, MESH)
    z = first_guess(problem, MESH, where).z
    return steep_slopes(problem, where, z, find_scales(problem, where, z).controls)


@pytest.mark.parametrize("c", [1e-6, 0.3, 1.0, 2e5])
@pytest.mark.parametrize("integrand", ["sqrt(1 + (y'/c)^2)", "y*sqrt(c^2 + y'^2)", "sqrt((1 + (y'/c)^2)/y)*exp(-x)"])
def test_it_is_where_both_terms_are_alike(integrand, c):
    assert steep(functional={"integrand": integrand}, constants={"c": c})["y"] == pytest.approx(c, rel=0.02)


def test_each_unknown_has_its_own():
    found = steep(
        functional={"integrand": "sqrt(1 + y'^2 + 1e-8*z'^2)"},
        unknowns={"y": {}, "z": {}},
        endpoints=["y(0) = 1", "y(3) = 2", "z(0) = 1e3", "z(3) = 2e3"],
    )
    assert found == pytest.approx({"y": 1.0, "z": 1e4}, rel=0.02)


def test_an_integral_tells_it_where_the_integrand_does_not():
    length = {"functional": {"integrand": "y"}, "constraints": ["integral(sqrt(1 + (y'/50)^2)) = 4"]}
    assert steep(**length)["y"] == pytest.approx(50, rel=0.02)


@pytest.mark.parametrize("integrand", ["y'^2", "abs(y')", "y"])
def test_other_growth_tells_none(integrand):
    assert steep(functional={"integrand": integrand}, constraints=["y' <= 5"]) == {}
