"""The rounding of kinks follows the size of what they are of, whatever the unit."""

import pytest

from solvers.forms.slack import with_slacks
from solvers.search.widths import with_widths
from solvers.transcription.functions import SMOOTHING, bent_uses
from tests.unit.solvers.problems import shape

SIZES = [1e-9, 1.0, 1e6]


def curve(size, integrand, **members):
    """y from 0 to its size over a range of three sizes."""
    return shape(**{
        "independent": {"name": "x", "from": 0, "to": 3 * size},
        "constants": {"h": size},
        "functional": {"seek": "minimum", "integrand": f"y'^2 + {integrand}"},
        "endpoints": ["y(0) = 0", f"y({3 * size!r}) = h"],
    } | members)  # fmt: skip


def width(problem):
    ((_, found),) = with_widths(problem).widths
    return found


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("integrand, wide", [
    ("abs(y - h/2)/h", 0.4),  # all the way from -h to 3 h/2
    ("sign(y)", 0.5),
    ("max(0, y - h, y)/h", 1.0),
    ("abs(y/h - 1)", 0.5),
    ("abs(h)/h", 1.0),
])  # fmt: skip
def test_a_width_is_a_share_of_the_size_of_the_argument(size, integrand, wide):
    unit = 1.0 if "y/h" in integrand else size
    assert width(curve(size, integrand)) == pytest.approx(wide * SMOOTHING * unit, rel=0.7)


@pytest.mark.parametrize("size", SIZES)
def test_what_is_at_places_and_what_is_integrated_have_sizes_too(size):
    functional = {"seek": "minimum", "integrand": "y'^2", "endpoint": "abs(y(0))"}
    ends = curve(size, "", functional=functional, endpoints=[f"y({3 * size!r}) = h"])
    assert 0.1 < width(ends) / SMOOTHING / size < 3
    whole = curve(size, "0*y", constraints=["abs(integral(y))/h^2 <= 3"])
    assert 0.01 < width(whole) / SMOOTHING / size**2 < 10


def test_what_has_a_width_keeps_it():
    problem = with_widths(curve(1.0, "abs(y - h/2)"))
    assert with_widths(problem) is problem


def test_without_kinks_there_is_nothing_to_do():
    problem = curve(1.0, "y^2")
    assert with_widths(problem) is problem


@pytest.mark.parametrize("size", SIZES)
def test_an_unknown_that_stands_for_a_kink_begins_at_its_size(size):
    problem = with_widths(curve(size, "abs(y - h/2)"))
    (use,) = bent_uses(problem)
    exact = with_slacks(problem)
    assert not bent_uses(exact)
    assert exact.unknowns[-1].guess.value == pytest.approx(dict(problem.widths)[use] / SMOOTHING)
