"""The conditions along arcs and at junctions, against the textbooks."""

import time

from solvers.necessary.on_arcs import necessary_on_arcs
from tests.unit.solvers.arcs import refraction, stages, wall


def found(problem, kind):
    return [(c.subject, c.text) for c in necessary_on_arcs(problem).conditions if c.kind == kind]


def test_light_is_refracted_by_the_law_of_refraction():
    """n cos(slope angle) is the same on both sides of a level interface (Snell; common practice)."""
    assert found(refraction(), "corner") == [
        ("x", "1/sqrt(1 + y'(a-)^2) = 1.5/sqrt(1 + y'(a+)^2) at x = a"),
    ]


def test_each_arc_has_its_own_equations():
    subjects = [subject for subject, _ in found(refraction(), "Euler-Lagrange")]
    assert subjects == ["y on air", "y on glass"]
    assert dict(found(stages(), "costate"))["m on first"] == "p_m' = 20*p_v*rate*c/m^2"


def test_only_what_is_continuous_and_free_there_has_a_continuous_costate():
    """Bryson, Ho (1975), Applied Optimal Control, section 3.7 (from memory)."""
    assert [subject for subject, _ in found(stages(), "corner")] == ["v", "t"]
    assert found(stages(), "corner")[0][1] == "p_v(t1-) = p_v(t1+) at t = t1"
    assert [subject for subject, _ in found(wall(), "corner")] == ["t"]


def test_a_junction_that_the_value_depends_on_has_no_continuous_hamiltonian():
    problem = stages(functional={"seek": "maximum", "endpoint": "v(T) - 3*t1*g"})
    assert [subject for subject, _ in found(problem, "corner")] == ["v"]


def test_a_derivation_without_time_says_so():
    result = necessary_on_arcs(refraction(), time.monotonic() - 1)
    assert result.conditions == ()
    assert result.notes == ("Some necessary conditions are left out: deriving them takes too long.",)
