"""Switches that coarse meshes show, against closed forms; what these do not show clearly is left to more effort."""

import numpy as np
import pytest

from solvers.deadline import in_seconds
from solvers.search.chatter import chatter
from solvers.search.early import sharpened_early
from solvers.search.pursuit import pursue
from solvers.search.record import End
from solvers.search.settling import worth_of_misses
from solvers.search.structure import present_switches
from tests.unit.solvers.problems import regulator, shape, stated
from tests.unit.solvers.search.test_chatter import FULLER, VALUE
from tests.unit.solvers.search.test_sharpen import CLOSED_FORMS


def sharpened(problem):
    """What comes of the first mesh, and the plain pursuit from which it came."""
    deadline = in_seconds(40)
    base = pursue(problem, None, deadline, meshes=1)
    return sharpened_early(base, None, deadline), base


@CLOSED_FORMS
def test_one_plain_mesh_is_enough_where_it_shows_the_switches(members, value, places, precision):
    """Of the speed limit it blurs the end of the cruise."""
    found, base = sharpened(stated(**members))
    assert len(base.paths) == 1
    assert found.end is End.CONVERGED
    assert found.paths[-1].value == pytest.approx(value, rel=1e-9, abs=1e-10)
    assert [switch.place for switch in present_switches(found.paths[-1])] == pytest.approx(places, abs=precision)
    assert abs(found.paths[-1].value - value) <= found.value_error


@pytest.mark.parametrize("problem", [regulator(), shape(endpoints=["y(0) = 0", "y(3) = 1"])], ids=("control", "shape"))
def test_without_switches_plain_meshes_go_on(problem):
    found, base = sharpened(problem)
    assert found is None
    assert base.end is End.CONVERGED


def test_a_blurred_point_at_an_end_is_no_arc_and_an_abnormal_end_is_known_less_well():
    """x'' = -x + u, |u| <= 1, from 6 to rest: three half turns (Bushaw, 1958; from memory), with none to spare.

    Whole half turns reach no farther, so that to second order the end stays where it is when the switches move: the
    multipliers grow without bound, and the least time falls like the root of what is missed of the end.
    """
    found, _ = sharpened(stated(
        independent={"name": "t", "from": 0, "to": "T"}, parameters={"T": {"within": [0.1, 40]}},
        unknowns={"x": {}, "v": {}, "u": {"within": [-1, 1]}}, dynamics=["x' = v", "v' = u - x"],
        functional={"seek": "minimum", "endpoint": "T"},
        endpoints=["x(0) = 6", "v(0) = 0", "x(T) = 0", "v(T) = 0"],
    ))  # fmt: skip
    path = found.paths[-1]
    assert [switch.place for switch in present_switches(path)] == pytest.approx([np.pi, 2 * np.pi], abs=1e-5)
    assert abs(path.value - 3 * np.pi) <= found.value_error <= 1e-6 * path.value
    assert worth_of_misses(path) > 0.5 * found.value_error


def test_what_a_structure_lacks_is_read_off_what_it_leads_to():
    """The first mesh shows no full thrust before the singular arc: without it the error hardly falls, but is seen.

    Dolan, More, Munson (2004), ANL/MCS-TM-273, problem 10; more digits by integrating the arcs, as in the catalogue.
    """
    rocket = stated(
        independent={"name": "t", "from": 0, "to": "T"},
        parameters={"T": {"within": [0.01, 1]}},
        unknowns={"h": {}, "v": {}, "m": {"within": [0.6, 1]}, "F": {"within": [0, 3.5]}},
        dynamics=["h' = v", "v' = (F - 310*v^2*exp(-500*(h - 1)))/m - 1/h^2", "m' = -2*F"],
        functional={"seek": "maximum", "endpoint": "h(T)"},
        endpoints=["h(0) = 1", "v(0) = 0", "m(0) = 1", "m(T) = 0.6"],
    )
    found, base = sharpened(rocket)
    assert len(base.paths) == 1
    assert [(h.stretch, h.side) for h in found.problem.held] == [(0, 1), (2, -1)]
    assert found.paths[-1].value == pytest.approx(1.01283691831751, abs=1e-11)


def test_chattering_is_continued_from_the_first_mesh():
    """Fuller (1963): infinitely many switches; the value is the closed form of the catalogue."""
    found, base = sharpened(stated(**FULLER))
    assert len(base.paths) == 1
    assert found.shown
    assert chatter(found.paths[-1]).steady
    assert abs(found.paths[-1].value - VALUE) <= found.value_error <= 1e-6 * VALUE
