"""Slopes that grow without bound: the value is found, and its stated error holds on every mesh.

Integral of x^a y'^2 from y(0) = 0 to y(1) = 1: x^a y' is constant by Euler's equation, so that y = x^(1-a), and the
value is 1 - a.  The slope is infinite at 0, and the share of the functional up to x is x^(1-a): of a = 0.9 a tenth lies
before x = 1e-10.
"""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.search.refinement import estimate
from solvers.search.unresolved import unresolved
from solvers.transcription.mesh import uniform
from tests.unit.solvers.problems import path_along, shape


def weighted(integrand, first=0, last=1):
    return shape(
        independent={"name": "x", "from": first, "to": last},
        functional={"integrand": integrand},
        endpoints=[f"y({first}) = 0", f"y({last}) = 1"],
    )


@pytest.mark.parametrize("a", [0.2, 0.5, 0.6, 2 / 3, 0.75, 0.8])
def test_an_integrable_singular_end_is_resolved(a):
    pursuit = pursue(weighted(f"x^{a!r}*y'^2"), None, in_seconds(30))
    assert pursuit.end is End.CONVERGED
    assert abs(pursuit.paths[-1].value - (1 - a)) <= pursuit.value_error <= 1e-6 * (1 - a)
    assert len(pursuit.steps) <= 14


@pytest.mark.parametrize("a", [0.2, 0.5, 2 / 3, 0.8, 0.9])
def test_the_stated_error_holds_on_every_mesh(a):
    for meshes in range(2, 10):
        pursuit = pursue(weighted(f"x^{a!r}*y'^2"), None, in_seconds(30), meshes=meshes)
        assert abs(pursuit.paths[-1].value - (1 - a)) <= pursuit.value_error


@pytest.mark.parametrize("a", [0.6, 2 / 3, 0.8])
@pytest.mark.parametrize("integrand, first, last", [("(1 - x)^{}*y'^2", 0, 1), ("(x - 3)^{}*y'^2", 3, 4)])
def test_so_it_does_where_numbers_do_not_tell_breaks_apart(a, integrand, first, last):
    """Beside 1, or 3, no breaks lie nearer to each other than 1e-16: the mesh stays too coarse, and says so."""
    pursuit = pursue(weighted(integrand.format(repr(a)), first, last), None, in_seconds(30))
    assert abs(pursuit.paths[-1].value - (1 - a)) <= pursuit.value_error
    assert (pursuit.end is End.FINEST) is (pursuit.value_error > 1e-6 * (1 - a))


def test_the_finest_mesh_is_the_end():
    pursuit = pursue(weighted("x^0.9*y'^2"), None, in_seconds(30))
    assert pursuit.end is End.FINEST
    assert 1e-7 < pursuit.paths[-1].value - 0.1 <= pursuit.value_error < 1e-4


def test_one_mesh_tells_what_it_leaves_open():
    """What its value lacks, within a factor; nothing where a curve is smooth."""
    smooth = path_along(uniform(1, 4, 5), np.exp, np.exp)
    assert unresolved(smooth, estimate(smooth)) == 0.0
    graded = pursue(weighted("x^0.8*y'^2"), None, in_seconds(30), meshes=5)
    told = unresolved(graded.paths[-1], graded.estimates[-1])
    missing = graded.paths[-1].value - 0.2
    assert 1 < told / missing < 4
