"""Formulas as MathML: what is drawn, in the user's order, and nothing that a reader could take for markup."""

import xml.etree.ElementTree as ET

import pytest

from solvers.formula.mathml import Range, functional_mathml, mathml
from solvers.formula.nodes import Call, Name, Number, Power, Product
from solvers.formula.parser import parse_either, parse_expression
from solvers.formula.printer import text

EXTENT = Range("t", Number(0.0, "0"), Name("T"))


def drawn(element):
    """The MathML as one line: fractions [a]/[b], roots √(a), scripts a_{b}^{c}, invisible times as a blank."""
    parts = [drawn(child) for child in element]
    match element.tag:
        case "mfrac":
            return "[{}]/[{}]".format(*parts)
        case "msqrt":
            return f"√({''.join(parts)})"
        case "msup":
            return "{}^{{{}}}".format(*parts)
        case "msub":
            return "{}_{{{}}}".format(*parts)
        case "msubsup":
            return "{}_{{{}}}^{{{}}}".format(*parts)
        case "mspace":
            return " "
        case "annotation":
            return ""
    own = (element.text or "").replace("\u2062", " ").replace("\u2061", "")
    return own + "".join(parts)


def shown(formula, integrals=None):
    line = drawn(ET.fromstring(mathml(parse_either(formula), integrals=integrals)))
    return " ".join(line.split())


@pytest.mark.parametrize(
    ("formula", "line"),
    [
        ("y*sqrt(1 + y'^2)", "y √(1+y^{′2})"),
        ("q'' = -(g*sin(q) + a*cos(q))/l", "q^{″}=−[g sin(q)+a cos(q)]/[l]"),
        ("-1.5 <= x' <= 1.5", "−1.5≤x^{′}≤1.5"),
        ("a/b/c*d", "[a]/[b c] d"),  # runs of divisors share a bar; the order stays
        ("1/2*m*v^2", "[1]/[2] m v^{2}"),
        ("2*3*x*4", "2×3 x⋅4"),
        ("x*10^2", "x⋅10^{2}"),
        ("d*(x + 1)", "d⋅(x+1)"),  # d(x + 1) would be a value at a place
        ("2*(x + 1)", "2 (x+1)"),
        ("v_max*t1", "v_{max} t_{1}"),
        ("x_1_b'^2", "x_{1,b}^{′2}"),
        ("theta*Delta_x*λ", "θ Δ_{x} λ"),
        ("mass*speed", "mass speed"),
        ("x''''(T)", "x^{(4)}(T)"),
        ("x'(T)^2", "x^{′}(T)^{2}"),
        ("m(t1+) - m(t1-)", "m(t_{1}^{+})−m(t_{1}^{−})"),
        ("sin(x)^2 + cos(2*x)^n", "sin^{2}(x)+cos(2 x)^{n}"),
        ("sin(x)^-1", "sin(x)^{−1}"),  # never sin⁻¹, which is read as the arc sine
        ("(y')^n", "(y^{′})^{n}"),
        ("sqrt(x)^3", "(√(x))^{3}"),
        ("(a + b)^2", "(a+b)^{2}"),
        ("(-a)^2 - -b", "(−a)^{2}−(−b)"),
        ("2^-1", "2^{−1}"),
        ("a^b^c", "a^{b^{c}}"),
        ("1e-3*x + 2.5E+4", "1×10^{−3} x+2.5×10^{4}"),
        ("(1e3)^2", "(1×10^{3})^{2}"),
        ("abs(x - 1)", "|x−1|"),
        ("log(x) + asin(x) + sign(x)", "ln(x)+arcsin(x)+sgn(x)"),
        ("max(a, b, 2) + atan2(y, x)", "max(a,b,2)+atan2(y,x)"),
        ("n(r, s)", "n(r,s)"),
        ("a - (b - c)", "a−(b−c)"),
        ("pi*r^2", "π r^{2}"),
        ("integral(a + b)", "∫(a+b)"),
    ],
)
def test_draws(formula, line):
    assert shown(formula) == line


def test_an_integral_has_its_limits_and_differential():
    assert shown("integral(sqrt(1 + y'^2)) = 4.2", EXTENT) == "∫_{0}^{T}√(1+y^{′2}) dt=4.2"


def test_a_total_derivative_is_an_operator():
    tree = Call("d^2/dt^2", (parse_expression("a + b"),))
    assert drawn(ET.fromstring(mathml(tree))).strip() == "[d^{2}]/[dt^{2}] (a+b)"
    tree = Call("d/dx_1", (Name("y"),))
    assert drawn(ET.fromstring(mathml(tree))).strip() == "[d]/[dx_{1}] y"


@pytest.mark.parametrize(("seek", "words"), [("minimum", "minimum of"), ("stationary", "stationary value of")])
def test_the_functional_names_what_is_sought(seek, words):
    markup = functional_mathml(seek, parse_expression("L"), parse_expression("x(T)"), EXTENT)
    assert " ".join(drawn(ET.fromstring(markup)).split()) == f"{words} x(T)+∫_{{0}}^{{T}}L dt"
    assert f'<annotation encoding="text/plain">{words} x(T) + integral(L)</annotation>' in markup
    alone = functional_mathml(seek, None, parse_expression("T"), EXTENT)
    assert " ".join(drawn(ET.fromstring(alone)).split()) == f"{words} T"


def test_integrals_over_parts_of_the_range_are_added_with_their_ends():
    half = Range("t", EXTENT.start, Name("h"))
    markup = functional_mathml("minimum", None, parse_expression("T"), EXTENT, [(parse_expression("L"), half)])
    assert " ".join(drawn(ET.fromstring(markup)).split()) == "minimum of T+∫_{0}^{h}L dt"
    assert "minimum of T + integral(L) from 0 to h" in markup


def test_the_element_says_how_it_stands_and_keeps_its_source():
    tree = parse_expression("a*b")
    source = '<annotation encoding="text/plain">{}</annotation></semantics></math>'
    assert mathml(tree) == ("<math><semantics><mrow><mi>a</mi><mo>\u2062</mo><mi>b</mi></mrow>" + source.format("a*b"))
    assert mathml(tree, block=True).startswith('<math display="block">')
    assert mathml(tree, label="a · b").endswith(source.format("a · b"))


def test_a_number_that_stands_for_a_formula_is_drawn_as_the_formula():
    # assembly converts `-3/2` in mm or `2*Length` to one number in m; the text stays
    tree = Product((Number(-0.0015, "-3/2"), Name("y")), (False, True))
    assert drawn(ET.fromstring(mathml(tree))) == "[−[3]/[2]]/[y]"
    assert text(tree) == "(-3/2)/y"
    assert text(Power(Number(0.002, "2*Length"), Number(-2.0, ""))) == "(2*Length)^-2"


def test_nothing_from_outside_becomes_markup():
    hostile = '<img src=x onerror="1">&'
    for tree in (Name(hostile), Call(hostile, (Name(hostile), Name("b"))), Name("a_" + hostile), Number(1.0, hostile)):
        markup = mathml(tree, label=hostile)
        ET.fromstring(markup)  # well-formed
        assert "<img" not in markup
