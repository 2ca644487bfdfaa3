"""Syntax tree -> presentation MathML (MathML Core): the user's order, the looks of paper."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape
from itertools import pairwise

from solvers.formula.nodes import (
    FUNCTIONS,
    At,
    Call,
    Lookup,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Relation,
    Sum,
)
from solvers.formula.printer import ATOM, POWER, PRODUCT, SIGNED, numeral, text, tightness, written
from solvers.tables.table import Table

GREEK = {
    "alpha": "α", "beta": "β", "gamma": "γ", "delta": "δ", "epsilon": "ε", "zeta": "ζ", "eta": "η", "theta": "θ",
    "iota": "ι", "kappa": "κ", "lambda": "λ", "mu": "μ", "nu": "ν", "xi": "ξ", "pi": "π", "rho": "ρ", "sigma": "σ",
    "tau": "τ", "upsilon": "υ", "phi": "φ", "chi": "χ", "psi": "ψ", "omega": "ω", "Gamma": "Γ", "Delta": "Δ",
    "Theta": "Θ", "Lambda": "Λ", "Xi": "Ξ", "Pi": "Π", "Sigma": "Σ", "Phi": "Φ", "Psi": "Ψ", "Omega": "Ω",
}  # fmt: skip
"""Names that are written out and shown as letters."""

_WORDS = {"log": "ln", "asin": "arcsin", "acos": "arccos", "atan": "arctan", "sign": "sgn"}
"""Functions whose textbook name says more than ours; `log` is the natural logarithm."""

_RAISED = ("sin", "cos", "tan", "sinh", "cosh", "tanh")
"""Functions that carry their exponent on the name: sin²(x)."""

_SIGNS = {"=": "=", "<=": "≤", ">=": "≥"}
_PRIMES = ("", "′", "″", "‴")
_SPACE = '<mspace width="0.17em"/>'
_TIMES = "<mo>\u2062</mo>"  # invisible
_DOT = "<mo>⋅</mo>"
_CROSS = "<mo>×</mo>"
_MINUS = '<mo form="prefix">−</mo>'
_OPENING = '<mo form="prefix">(</mo>'
_CLOSING = '<mo form="postfix">)</mo>'


@dataclass(frozen=True, slots=True)
class Range:
    """What the integrals of a formula run over."""

    independent: str
    start: Node
    end: Node


def mathml(
    tree: Node | Relation, *, label: str | None = None, block: bool = False, integrals: Range | None = None
) -> str:
    """A `<math>` element.

    `label` is the source kept as annotation (else the tree as text); `block` sets it on a line of its own;
    `integrals` gives every `integral(…)` its limits and its differential.
    """
    return element(fragment(tree, integrals), text(tree) if label is None else label, block=block)


@dataclass(frozen=True, slots=True)
class Misfit:
    """What was measured along the curve, and whether its sigmas are known."""

    of: Node
    weighted: bool

    @property
    def text(self) -> str:
        """The sum of squares as plain text."""
        difference = f"{text(self.of)} - measured"
        return f"sum of (({difference})/sigma)^2" if self.weighted else f"sum of ({difference})^2"

    @property
    def mathml(self) -> str:
        """The same as MathML."""
        difference = f"<mrow><mo>(</mo>{fragment(self.of)}<mo>)</mo><mo>−</mo><mtext>measured</mtext></mrow>"
        inner = f"<mfrac>{difference}<mi>σ</mi></mfrac>" if self.weighted else difference
        return f"<mo>∑</mo><msup><mrow><mo>(</mo>{inner}<mo>)</mo></mrow><mn>2</mn></msup>"


def functional_mathml(
    seek: str,
    integrand: Node | None,
    endpoint: Node | None,
    extent: Range,
    parts: Sequence[tuple[Node, Range]] = (),
    misfits: Sequence[Misfit] = (),
) -> str:
    """What is sought: "minimum of" (or "maximum", "stationary") the squares of misfits, the endpoint term and the
    integral, plus integrals over parts of the range.
    """
    terms = [] if endpoint is None else [endpoint]
    if integrand is not None:
        terms.append(Call("integral", (integrand,)))
    shown, told = [misfit.mathml for misfit in misfits], [misfit.text for misfit in misfits]
    if terms:
        tree = terms[0] if len(terms) == 1 else Sum(tuple(terms), (False, False))
        shown.append(fragment(tree, extent))
        told.append(text(tree))
    for part, over in parts:
        shown.append(fragment(Call("integral", (part,)), over))
        told.append(f"integral({text(part)}) from {text(over.start)} to {text(over.end)}")
    what = f"{seek} value" if seek == "stationary" else seek
    heading = f"<mtext>{escape(what)} of\u2002</mtext>"
    return element(heading + "<mo>+</mo>".join(shown), f"{what} of {' + '.join(told)}", block=True)


def element(inner: str, annotation: str, *, block: bool = False) -> str:
    """The `<math>` element around a fragment, with its plain text as annotation."""
    display = ' display="block"' if block else ""
    source = f'<annotation encoding="text/plain">{escape(annotation, quote=False)}</annotation>'
    return f"<math{display}><semantics><mrow>{inner}</mrow>{source}</semantics></math>"


def fragment(tree: Node | Relation, integrals: Range | None = None) -> str:
    """The MathML of a tree without the `<math>` element."""
    if isinstance(tree, Relation):
        sides = [fragment(side, integrals) for side in tree.sides]
        signs = ["", *(f"<mo>{_SIGNS[sign]}</mo>" for sign in tree.signs)]
        return "".join(sign + side for sign, side in zip(signs, sides, strict=True))
    return _Printer(integrals).node(tree)


@dataclass(frozen=True, slots=True)
class _Printer:
    integrals: Range | None

    def node(self, tree: Node) -> str:
        match tree:
            case Number():
                number = written(tree)
                return _number(numeral(number)) if isinstance(number, Number) else self.node(number)
            case Name(name=name, order=order):
                return _name(name, order)
            case At(name=name, order=order, place=place, side=side):
                where = self.node(place)
                if side:
                    where = f"<msup><mrow>{where}</mrow><mo>{'−' if side == '-' else '+'}</mo></msup>"
                return _name(name, order) + _bracketed(where)
            case Call(function=function, arguments=arguments):
                return self.call(function, arguments)
            case Lookup(orders=orders, arguments=arguments):
                name = _name(tree.table.name, orders[0]) if len(orders) == 1 else _name(tree.spelling, 0)
                inner = [self.node(argument) for argument in arguments]
                return name + _bracketed('<mo separator="true">,</mo>'.join(inner))
            case Negative(operand=operand):
                return _MINUS + self.part(operand, PRODUCT)
            case Sum(terms=terms, minus=minus):
                shown = self.part(terms[0], SIGNED)
                for term, negative in zip(terms[1:], minus[1:], strict=True):
                    shown += f"<mo>{'−' if negative else '+'}</mo>{self.part(term, PRODUCT)}"
                return shown
            case Product(factors=factors, over=over):
                return self.product(factors, over)
            case Power(base=base, exponent=exponent):
                return self.power(base, exponent)

    def part(self, tree: Node, least: int) -> str:
        inner = self.node(tree)
        return inner if tightness(tree) >= least else _bracketed(inner)

    def product(self, factors: tuple[Node, ...], over: tuple[bool, ...]) -> str:
        """Left to right: each run of divisors makes a fraction with what stands before it."""
        parts: list[tuple[list[Node], list[Node]]] = []
        for factor, divides in zip(factors, over, strict=True):
            if divides:
                parts[-1][1].append(factor)
            elif parts and not parts[-1][1]:
                parts[-1][0].append(factor)
            else:
                parts.append(([factor], []))
        shown = ""
        for numerators, divisors in parts:
            if divisors:
                fraction = f"<mfrac>{self.group(numerators)}{self.group(divisors)}</mfrac>"
                shown += (_DOT if shown else "") + fraction
            else:
                shown += (_TIMES if shown else "") + self.row(numerators)
        return shown

    def group(self, factors: list[Node]) -> str:
        """Above or below a fraction's bar, where a single factor needs no parentheses."""
        return f"<mrow>{self.node(factors[0]) if len(factors) == 1 else self.row(factors)}</mrow>"

    def row(self, factors: list[Node]) -> str:
        shown = self.part(factors[0], POWER)
        for left, right in pairwise(factors):
            shown += _between(left, right) + self.part(right, POWER)
        return shown

    def power(self, base: Node, exponent: Node) -> str:
        raised = self.node(exponent)
        match base, exponent:
            case Name(name=name, order=order), Number() if 0 < order < len(_PRIMES):
                return _scripted(name, f"<mo>{_PRIMES[order]}</mo>{raised}")
            case Name(name=name, order=0), _:
                return _scripted(name, raised)
            case Call(function=function, arguments=arguments), Number(value=value) if function in _RAISED and value > 1:
                name = f"<msup><mi>{function}</mi>{raised}</msup>"
                return name + "<mo>\u2061</mo>" + _bracketed(self.node(arguments[0]))
            case (Call(function="sqrt" | "integral"), _) | (Name(), _):
                shown = _bracketed(self.node(base))
            case Number(), _ if "<mo>" in self.node(base):  # a power of ten
                shown = _bracketed(self.node(base))
            case _:
                shown = self.part(base, ATOM)
        return f"<msup><mrow>{shown}</mrow><mrow>{raised}</mrow></msup>"

    def call(self, function: str, arguments: tuple[Node, ...]) -> str:
        shown = [self.node(argument) for argument in arguments]
        if function == "sqrt":
            return f"<msqrt>{shown[0]}</msqrt>"
        if function == "abs":
            return f'<mrow><mo form="prefix">|</mo>{shown[0]}<mo form="postfix">|</mo></mrow>'
        if function == "integral":
            return self.integral(arguments[0])
        if "/" in function:
            return f"{_operator(function)}{_SPACE}{self.part(arguments[0], POWER)}"
        name = f"<mi>{_WORDS.get(function, function)}</mi>" if function in FUNCTIONS else _name(function, 0)
        return name + "<mo>\u2061</mo>" + _bracketed('<mo separator="true">,</mo>'.join(shown))

    def integral(self, integrand: Node) -> str:
        inner = self.part(integrand, PRODUCT)
        if self.integrals is None:
            return f"<mrow><mo>∫</mo>{inner}</mrow>"
        start, end = self.node(self.integrals.start), self.node(self.integrals.end)
        sign = f"<msubsup><mo>∫</mo><mrow>{start}</mrow><mrow>{end}</mrow></msubsup>"
        return f"<mrow>{sign}{inner}{_SPACE}{_differential(self.integrals.independent)}</mrow>"


def _bracketed(inner: str) -> str:
    return f"<mrow>{_OPENING}{inner}{_CLOSING}</mrow>"


def _differential(name: str) -> str:
    return f'<mi mathvariant="normal">d</mi>{_name(name, 0)}'


def _operator(function: str) -> str:
    """`d/dx` or `d^2/dx^2`: the total derivative in a necessary condition."""
    match = re.fullmatch(r"d(?:\^(\d+))?/d(\w+?)(?:\^\d+)?", function)
    if match is None:
        raise ValueError(f"{function!r} is no derivative")
    times, name = match.groups()
    above, below = '<mi mathvariant="normal">d</mi>', _differential(name)
    if times:
        above, below = f"<msup>{above}<mn>{times}</mn></msup>", f"<msup><mrow>{below}</mrow><mn>{times}</mn></msup>"
    return f"<mfrac><mrow>{above}</mrow><mrow>{below}</mrow></mfrac>"


def _number(literal: str) -> str:
    """Digits, with a power of ten where the user wrote an exponent."""
    digits, _, exponent = literal.lower().partition("e")
    shown = f"<mn>{digits}</mn>"
    if exponent:
        minus = "<mo>−</mo>" if exponent.startswith("-") else ""
        shown += f"{_CROSS}<msup><mn>10</mn><mrow>{minus}<mn>{exponent.lstrip('+-')}</mn></mrow></msup>"
    return shown


def _name(name: str, order: int) -> str:
    if order < len(_PRIMES):
        return _scripted(name, f"<mo>{_PRIMES[order]}</mo>" if order else "")
    return _scripted(name, f"<mo>(</mo><mn>{order}</mn><mo>)</mo>")


def _scripted(name: str, above: str) -> str:
    """The letters, with trailing digits and what follows a `_` as subscript and `above` as superscript."""
    letters, below = _split(name)
    base = f"<mi>{escape(GREEK.get(letters, letters))}</mi>"
    if below:
        marks = '<mo separator="true">,</mo>'.join(
            f"<mn>{part}</mn>" if part.isdigit() else f"<mi>{escape(GREEK.get(part, part))}</mi>" for part in below
        )
        base += f"<mrow>{marks}</mrow>"
    if above:
        tag = "msubsup" if below else "msup"
        return f"<{tag}>{base}<mrow>{above}</mrow></{tag}>"
    return f"<msub>{base}</msub>" if below else base


def _split(name: str) -> tuple[str, list[str]]:
    letters, *below = [part for part in name.split("_") if part]
    match = re.fullmatch(r"(\D+)(\d+)", letters)
    if match:
        return match[1], [match[2], *below]
    return letters, below


def _between(left: Node, right: Node) -> str:
    """The sign of a product: none where none is needed, as on paper."""
    if _ends_in_digit(left) and _begins_with_digit(right):
        return _CROSS
    if _begins_with_digit(right):
        return _DOT
    if isinstance(left, Name) and tightness(right) < POWER:
        return _DOT  # y(a + b) would be a value at a place
    if _is_word(left) or _is_word(right):
        return _TIMES + _SPACE
    return _TIMES


def _begins_with_digit(tree: Node) -> bool:
    match tree:
        case Number():
            return True
        case Power(base=base):
            return _begins_with_digit(base)
        case _:
            return False


def _ends_in_digit(tree: Node) -> bool:
    return isinstance(tree, Number) or (isinstance(tree, Power) and isinstance(tree.exponent, Number))


def _is_word(tree: Node) -> bool:
    """Whether it needs a little room: functions and names of several letters."""
    match tree:
        case Call(function=function):
            return function not in ("sqrt", "abs")
        case Name(name=name) | At(name=name) | Lookup(table=Table(name=name)):
            letters, _ = _split(name)
            return len(letters) > 1 and letters not in GREEK
        case Power(base=base):
            return _is_word(base)
        case _:
            return False
