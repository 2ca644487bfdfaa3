"""Abbreviations written out, values taken to a place, and the limits of both."""

import pytest

from solvers.formula.algebra import bare
from solvers.formula.derivative import total_derivative
from solvers.formula.nodes import Name, Number
from solvers.formula.parser import parse_expression
from solvers.formula.printer import text
from solvers.formula.substitute import TooLargeError, at_place, depth, expander, substitute


def expand(where, formula, nodes=100, levels=20):
    pairs = [(name, bare(parse_expression(tree))) for name, tree in where]

    def rate(tree):
        return total_derivative(tree, "x", {"y"})

    write_out = expander(pairs, "x", {"y"}, rate, nodes=nodes, levels=levels)
    return text(write_out(bare(parse_expression(formula))))


def test_abbreviations_are_written_out_one_in_the_other():
    assert expand([("a", "y + 1"), ("b", "a^2")], "b*k + a") == "(y + 1)^2*k + (y + 1)"


def test_a_prime_on_an_abbreviation_follows_the_curve():
    assert expand([("a", "x*y")], "a'") == "y + x*y'"
    assert expand([("a", "y^2")], "a''") == "2*y'^2 + 2*y*y''"


def test_an_abbreviation_at_a_place_is_its_value_there():
    assert expand([("a", "x*y' + k")], "a(T-)") == "T*y'(T-) + k"
    assert expand([("a", "y^2")], "a'(0)") == "2*y(0)*y'(0)"


def test_names_become_values_at_a_place():
    tree = at_place(parse_expression("x + y'' + k"), Name("T"), "+", "x", {"y"})
    assert text(tree) == "T + y''(T+) + k"


def test_what_would_be_too_large_is_refused_before_it_is_built():
    doubling = [("a0", "y"), *((f"a{i + 1}", f"a{i}*a{i}") for i in range(200))]
    with pytest.raises(TooLargeError, match=r"written out, the formula has \d+ parts; the limit is 100"):
        expand(doubling, "a200")
    nested = [("a0", "y"), *((f"a{i + 1}", f"sin(a{i})") for i in range(30))]
    with pytest.raises(TooLargeError, match="nested more than 20 deep"):
        expand(nested, "a30")


def test_depth_counts_levels():
    assert [depth(parse_expression(f)) for f in ("a", "a + b", "sin(a + b)^2")] == [1, 2, 4]


def test_substitution_goes_from_the_top_and_not_into_what_it_put_in():
    swapped = substitute(
        bare(parse_expression("a + b")), {Name("a"): bare(parse_expression("b + a")), Name("b"): Number(1.0, "1")}.get
    )
    assert text(swapped) == "(b + a) + 1"
