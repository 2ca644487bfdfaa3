"""What the grammar says, and what its refusals say."""

import dataclasses

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solvers.formula.algebra import bare as without_spans
from solvers.formula.derivative import derivative
from solvers.formula.errors import FormulaError
from solvers.formula.evaluate import evaluate
from solvers.formula.mathml import mathml
from solvers.formula.nodes import (
    FUNCTIONS,
    At,
    Call,
    Lookup,
    Name,
    Negative,
    Number,
    Power,
    Product,
    Relation,
    Span,
    Sum,
    children,
    walk,
)
from solvers.formula.parser import ENDLESS, parse_either, parse_expression, parse_relation
from solvers.formula.printer import text
from solvers.formula.tokens import REFUSED, read_name
from tests.unit.solvers.measured import TABLES


def bare(tree):
    """The tree without its spans."""
    if isinstance(tree, Relation):
        return Relation(tuple(map(without_spans, tree.sides)), tree.signs)
    return without_spans(tree)


a, b, c = Name("a"), Name("b"), Name("c")
one, two = Number(1.0, "1"), Number(2.0, "2")

READINGS = [
    ("a + b - c", Sum((a, b, c), (False, False, True))),
    ("a*b/c", Product((a, b, c), (False, False, True))),
    ("(a + b)*c", Product((Sum((a, b), (False, False)), c), (False, False))),
    ("(a*b)*c", Product((Product((a, b), (False, False)), c), (False, False))),  # the user's order and grouping stay
    ("-2^2", Negative(Power(two, two))),  # the sign is looser than the power: -4
    ("2^-1", Power(two, Negative(one))),
    ("a^b^c", Power(a, Power(b, c))),  # to the right
    ("-a*b", Negative(Product((a, b), (False, False)))),
    ("a*-b", Product((a, Negative(b)), (False, False))),
    ("a - -b", Sum((a, Negative(b)), (False, True))),
    ("y''", Name("y", 2)),
    ("y″ ", Name("y", 2)),
    ("x′(T)", At("x", 1, Name("T"))),
    ("m(t1-)", At("m", 0, Name("t1"), "-")),
    ("m(t1 + a+)", At("m", 0, Sum((Name("t1"), a), (False, False)), "+")),
    ("y(-1)", At("y", 0, Negative(one))),
    ("n(a, b)", Call("n", (a, b))),  # a table of two arguments
    ("max(a, b, c)", Call("max", (a, b, c))),
    ("integral(a)", Call("integral", (a,))),
    ("a·b × c − 1", Sum((Product((a, b, c), (False,) * 3), one), (False, True))),
    (".5e-3", Number(0.0005, ".5e-3")),
    ("2e", None),  # not a number: 2 and a name
    ("1 <= a <= b", Relation((one, a, b), ("<=", "<="))),
    ("a ≥ 1", Relation((a, one), (">=",))),
    ("2*π", Product((two, Name("pi")), (False, False))),
    ("µ", Name("μ")),  # micro sign -> mu
    ("Δx_1", Name("Δx_1")),
    ("скорость", Name("скорость")),
    ("e\u0301", Name("é")),  # NFC
]


@pytest.mark.parametrize(("formula", "tree"), READINGS, ids=[formula for formula, _ in READINGS])
def test_reads(formula, tree):
    if tree is None:
        with pytest.raises(FormulaError):
            parse_either(formula)
    else:
        assert bare(parse_either(formula)) == tree


def test_every_node_knows_its_characters():
    formula = " -(a + 2) * x''(T/2) <= sqrt( y^-b ) "
    spans = {}
    tree = parse_relation(formula)
    for side in tree.sides:
        for node in walk(side):
            spans[formula[node.span.start : node.span.end]] = type(node).__name__
    assert spans == {
        "-(a + 2) * x''(T/2)": "Negative",
        "(a + 2) * x''(T/2)": "Product",
        "a + 2": "Sum",
        "a": "Name",
        "2": "Number",
        "x''(T/2)": "At",
        "T/2": "Product",
        "T": "Name",
        "sqrt( y^-b )": "Call",
        "y^-b": "Power",
        "y": "Name",
        "-b": "Negative",
        "b": "Name",
    }
    assert formula[tree.span.start : tree.span.end] == formula.strip()


REFUSALS = [  # formula, code, markers, message, hint
    ("2x", "missing-operator", "^^", "a sign is missing between two values", "write 2*x"),
    ("a b", "missing-operator", "^^^", "a sign is missing between two values", "write a*b"),
    ("2(a)", "missing-operator", "^^", "a sign is missing between two values", "write '*' between the two"),
    ("2 sin(a)", "missing-operator", "^^^^^", "a sign is missing between two values", "write 2*sin"),
    ("9.8 m", "missing-operator", "^^^^^",
     "a sign is missing between two values", "write 9.8*m; a value with its unit goes into 'constants'"),
    ("2 *", "expected-value", "   ^", "expected a number, a name or '(' after '*'", ""),
    ("+3", "expected-value", "^", "expected a number, a name or '(' at the start", "leave out the '+'"),
    ("a + (b-)", "expected-value", "       ^", "expected a number, a name or '(' after '-'", ""),
    (" ", "expected-value", " ^", "the formula is empty", ""),
    ("(a", "parenthesis", "^", "this '(' is never closed", "add the missing ')'"),
    ("a)", "parenthesis", " ^", "this ')' closes nothing", "remove it, or add the missing '('"),
    ("(a = b)", "relation-unexpected", "   ^", "'=' cannot stand inside parentheses", "compare whole expressions"),
    ("0,5", "sign", " ^", "',' stands only between the arguments of a function", "a decimal number has a point: 0.5"),
    ("x < 3", "sign", "  ^", "'<' is not a condition", "write '<=': a limit belongs to what is allowed"),
    ("x == 3", "sign", "  ^^", "'==' is not a sign here", "an equality is written with a single '='"),
    ("x != 3", "sign", "  ^^", "'!=' is not a condition", "conditions are written with '=', '<=' or '>='"),
    ("x**2", "sign", " ^^", "'**' is not a sign here", "a power is written with '^'"),
    ("y’", "sign", " ^", "'’' is a quotation mark", "a derivative is written with the straight ' or the prime ′"),
    ("1 <= a >= 0", "relation-chain", "       ^^",
     "a chain runs in one direction", "write two relations, or turn one sign round"),
    ("(y)'", "prime", "   ^", "a prime can only follow a name", "the derivative of y is written y'"),
    ("pi'", "prime", "^^^", "'pi' is a number and takes no prime", "primes stand on unknowns"),
    ("sin'(x)", "prime", "^^^^", "'sin' is a function and takes no prime", "primes stand on unknowns"),
    ("sin + 1", "function-name", "^^^", "'sin' is a function and needs its argument", "write sin(…)"),
    ("sin(a, b)", "argument-count", "^^^^^^^^^", "'sin' takes one argument, not 2", ""),
    ("atan2(a)", "argument-count", "^^^^^^^^", "'atan2' takes two arguments, not 1", ""),
    ("min(a)", "argument-count", "^^^^^^", "'min' takes two or more arguments, not 1", ""),
    ("exp()", "argument-count", "^^^^^", "'exp' takes one argument, not none", ""),
    ("y()", "place", "^^^", "'y(…)' has no place in its parentheses", "write one place: y(0)"),
    ("x'(0, 1)", "place", "^^^^^^^^", "'x'(…)' has 2 places", "write one place: x'(0)"),
    ("x(y')", "place", "  ^^",
     "a place cannot hold the derivative of 'y'",
     "a place is a number, a constant, a parameter or a formula of them"),
    ("y" + "'" * 10, "order-limit", "^^^^^^^^^^^", "10 primes on 'y'; the limit is 9", ""),
    ("x²", "character", " ^", "'²' is not a digit that formulas know", "a power is written ^2"),
    ("yʹ", "character", " ^",
     "'ʹ' is not a prime that formulas know", "a derivative is written with the straight ' or the prime ′"),
    ("x٣", "character", " ^", "'٣' is not a digit that formulas know", "write 3"),
    ("a\u200b", "character", " ^", "an invisible character (U+200B ZERO WIDTH SPACE) stands here", "delete it"),
    ("_a", "character", "^", "'_' is not used in formulas", "a name begins with a letter"),
    ("k + а", "confusable-name", "    ^",
     "'а' in this name is Cyrillic small letter a, which looks like a Latin letter", "write a in Latin letters"),
    ("𝑥", "name", "^", "the name has letters in a special style", "write x"),
    ("1e999", "number-range", "^^^^^",
     "the number is too large to compute with", "numbers reach from 5e-324 to 1.79e308"),
    ("0.1e-400", "number-range", "^^^^^^^^",
     "the number is too small to compute with", "numbers reach from 5e-324 to 1.79e308"),
    ("1" * 41, "number-limit", "^" * 41,
     "the number has 41 characters; the limit is 40", "17 digits say all that computation can use"),
]  # fmt: skip


@pytest.mark.parametrize(("formula", "code", "markers", "message", "hint"), REFUSALS, ids=[row[0] for row in REFUSALS])
def test_refuses_and_says_what_would_be_right(formula, code, markers, message, hint):
    with pytest.raises(FormulaError) as refusal:
        parse_either(formula)
    shown = formula.replace("\u200b", " ")
    assert str(refusal.value) == "\n".join([message, shown, markers, *([hint] if hint else [])])
    assert refusal.value.code == code


@pytest.mark.parametrize("sign", REFUSED)
def test_signs_from_habit_are_refused_at_their_place(sign):
    with pytest.raises(FormulaError) as refusal:
        parse_either(f"a {sign} 1")
    message, hint = REFUSED[sign]
    assert (refusal.value.message, refusal.value.hint) == (message, hint)
    assert refusal.value.span == Span(2, 2 + len(sign))


def test_an_expression_is_no_relation_and_a_relation_no_expression():
    with pytest.raises(FormulaError) as refusal:
        parse_expression("(a) <= b")
    assert str(refusal.value) == (
        "an expression is expected here, not a relation with '<='\n(a) <= b\n    ^^\ngive the expression alone"
    )
    with pytest.raises(FormulaError) as refusal:
        parse_relation("a + b")
    assert str(refusal.value) == "a relation needs '=', '<=' or '>='\na + b\n^^^^^\nfor example: a + b = 0"


def test_limits_answer_with_limit_and_figure():
    with pytest.raises(FormulaError, match="2,001 characters; the limit is 2,000"):
        parse_either("a" * 2001)
    parse_either("(" * 100 + "a" + ")" * 100)
    for deep in ("(" * 101 + "a" + ")" * 101, "-" * 101 + "a", "a" + "^a" * 101, "exp(" * 101 + "a" + ")" * 101):
        with pytest.raises(FormulaError, match="more than 100 deep; the limit is 100") as refusal:
            parse_either(deep)
        assert refusal.value.code == "depth-limit"


@pytest.mark.parametrize(
    ("before", "after"), [("(", "+1)*2"), ("sin(", "+1)"), ("2/(1+", ")"), ("1+2*(", ")"), ("y^", ""), ("-", "")]
)
def test_the_deepest_formulas_are_printed_without_running_out_of_stack(before, after):
    tree = parse_expression(before * 100 + "y" + after * 100)
    assert text(tree).count("y") == mathml(tree, label="").count("<mi>y</mi>") > 0


def test_the_deepest_formula_is_derived_without_running_out_of_stack():
    tree = parse_expression("(" * 100 + "y" + "+1)/2" * 100)
    slope = evaluate(derivative(tree, Name("y")), {}.get, {"power": lambda base, exponent: base**exponent})
    assert slope == pytest.approx(2.0**-100)


def test_a_place_far_inside_a_long_formula_is_shown_with_its_surroundings():
    with pytest.raises(FormulaError) as refusal:
        parse_either("a + " * 100 + "2x" + " + a" * 100)
    _, shown, marker, _ = str(refusal.value).splitlines()
    assert shown[marker.index("^") : marker.index("^") + 2] == "2x"
    assert shown.startswith("…") and shown.endswith("…") and len(shown) < 110


@pytest.mark.parametrize("name", ["x", "Δx_1", "q2", "π"])
def test_names_that_are_names(name):
    assert read_name(name) == {"π": "pi"}.get(name, name)


@pytest.mark.parametrize("name", ["", "2x", "x y", "x'", "_x", "x-y", "ο", "xа", "x\u200b", "x²", "ﬁ", " x"])
def test_names_that_are_none(name):
    with pytest.raises(FormulaError):
        read_name(name)


# ---- properties ----

names = st.sampled_from(["x", "y", "T", "v_max", "θ", "Δx", "t1"])
numbers = st.one_of(st.integers(0, 10**6).map(str), st.floats(1e-9, 1e9).map(repr)).map(lambda t: Number(float(t), t))
leaves = st.one_of(numbers, st.builds(Name, names, st.integers(0, 9)), st.just(Name("pi")))


def several(parts, build):
    pairs = st.lists(st.tuples(parts, st.booleans()), min_size=2, max_size=4)
    return pairs.map(lambda p: build(tuple(t for t, _ in p), (False, *(flag for _, flag in p[1:]))))


def call(parts):
    def arguments(function):
        count = FUNCTIONS.get(function, 1)
        lists = st.lists(parts, min_size=count, max_size=4 if function in ENDLESS else count)
        return lists.map(lambda given: Call(function, tuple(given)))

    others = st.lists(parts, min_size=2, max_size=3).map(lambda given: Call("other", tuple(given)))
    return st.one_of(st.sampled_from([*FUNCTIONS, "integral"]).flatmap(arguments), others, lookup(parts))


def lookup(parts):
    def uses(name):
        count = len(TABLES[name].arguments)
        orders = st.tuples(*[st.integers(0, 4)] * count)
        return st.builds(Lookup, st.just(TABLES[name]), orders, st.tuples(*[parts] * count))

    return st.sampled_from([*TABLES]).flatmap(uses)


def without_primes(tree):
    changes = {"order": 0} if isinstance(tree, Name | At) else {}
    for field in dataclasses.fields(tree):
        value = getattr(tree, field.name)
        if field.name in ("place", "operand", "base", "exponent"):
            changes[field.name] = without_primes(value)
        elif field.name in ("arguments", "terms", "factors"):
            changes[field.name] = tuple(map(without_primes, value))
    return dataclasses.replace(tree, **changes)


def compound(parts):
    places = parts.map(without_primes)
    return st.one_of(
        several(parts, Sum),
        several(parts, Product),
        st.builds(Power, parts, parts),
        st.builds(Negative, parts),
        st.builds(At, names, st.integers(0, 9), places, st.sampled_from(["", "-", "+"])),
        call(parts),
    )


expressions = st.recursive(leaves, compound, max_leaves=25)


@st.composite
def relations(draw):
    sides = draw(st.lists(expressions, min_size=2, max_size=4))
    way = draw(st.sampled_from([["=", "<="], ["=", ">="]]))
    return Relation(tuple(sides), tuple(draw(st.sampled_from(way)) for _ in sides[1:]))


@given(st.one_of(expressions, relations()))
def test_what_is_printed_reads_as_the_same_tree(tree):
    assert bare(parse_either(text(tree), TABLES)) == tree


@given(st.text(alphabet="xyT12.0e+-*/^(),='<> \u2032≤·sinmapt_", max_size=40))
def test_any_text_is_read_or_refused_within_its_bounds(formula):
    try:
        tree = parse_either(formula)
    except FormulaError as error:
        assert 0 <= error.span.start <= error.span.end <= len(formula)
        assert error.message and error.code and str(error)
    else:
        sides = tree.sides if isinstance(tree, Relation) else (tree,)
        for side in sides:
            for node in walk(side):
                for part in children(node):
                    assert node.span.start <= part.span.start < part.span.end <= node.span.end
