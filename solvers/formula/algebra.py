"""Sums, products and powers that tidy up as they are built: 0 and 1 vanish, numbers fold, like factors collect.

Light on purpose: nothing is multiplied out and no order is changed, so that a derived formula still looks like the one
that it came from.  Numbers are exact; most of them are whole, and Python's whole numbers cost a tenth of its fractions.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from operator import is_

from solvers.formula.nodes import (
    NOWHERE,
    At,
    Call,
    Lookup,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Sum,
    children,
    size,
    walk,
)

ZERO = Number(0.0, "0")
ONE = Number(1.0, "1")

Exact = int | Fraction
"""A rational number."""

_HALF = Fraction(1, 2)
_LARGEST = 10**9
"""Folded numbers stay below this in numerator and denominator; larger ones would not be readable."""


def bare(tree: Node) -> Node:
    """The tree without its places in the text, so that equal formulas are equal."""
    before = children(tree)
    parts = tuple(map(bare, before))
    if tree.span == NOWHERE and all(map(is_, parts, before)):
        return tree
    match tree:
        case Number(value, text):
            return Number(value, text)
        case Name(name, order):
            return Name(name, order)
        case At(name, order, _, side):
            return At(name, order, parts[0], side)
        case Call(function, _):
            return Call(function, parts)
        case Lookup(table, orders):
            return Lookup(table, orders, parts)
        case Negative():
            return Negative(parts[0])
        case Sum(_, minus):
            return Sum(parts, minus)
        case Product(_, over):
            return Product(parts, over)
        case Power():
            return Power(parts[0], parts[1])


def add(terms: Iterable[Node]) -> Node:
    """The sum, with like terms collected.  The trees are bare."""
    collected: list[_Monomial] = []
    alike: dict[frozenset[Node], list[int]] = {}
    for node in terms:
        for term in _terms(node):
            # By the bases only: a set made of a dictionary's keys takes their hashes over, and trees are long to hash.
            places = alike.setdefault(frozenset(term.factors), [])
            place = next((place for place in places if collected[place].factors == term.factors), None)
            if place is None:
                places.append(len(collected))
                collected.append(term)
            else:
                before = collected[place]
                total = before.coefficient + term.coefficient
                collected[place] = before.with_coefficient(total, before.decimal or term.decimal)
    left = [term for term in collected if term.coefficient]
    if not left:
        return ZERO
    if len(left) == 1:
        return left[0].node()
    first, *others = left
    absolute = (term.with_coefficient(_absolute(term.coefficient), term.decimal).node() for term in others)
    return Sum((first.node(), *absolute), (False, *(term.coefficient < 0 for term in others)))


def multiply(factors: Iterable[Node]) -> Node:
    """The product, with numbers folded and like factors collected.  The trees are bare."""
    return product_of([(factor, 1) for factor in factors])


def negative(tree: Node) -> Node:
    """The tree with the other sign; that of a sum is turned term by term."""
    if isinstance(tree, Sum):
        return add(negative(term.node()) for term in _terms(tree))
    return multiply([Number(-1.0, "-1"), tree])


def product_of(factors: Iterable[tuple[Node, Exact]]) -> Node:
    """The product of powers."""
    return _monomial(factors).node()


def factored(tree: Node) -> Node:
    """A sum with what its terms share taken out of it, where that makes it shorter."""
    if not isinstance(tree, Sum):
        return tree
    terms = [term for term in _terms(tree) if term.coefficient]
    if len(terms) < 2:
        return add([tree])
    bases = dict.fromkeys(base for term in terms for base in term.factors)
    shared: dict[Node, Exact] = {base: min(term.factors.get(base, 0) for term in terms) for base in bases}
    number = _absolute(terms[0].coefficient)
    if any(_absolute(term.coefficient) != number for term in terms):
        number = 1
    if number == 1 and not any(shared.values()):
        return tree
    common = _Monomial(number, any(term.decimal for term in terms), {b: e for b, e in shared.items() if e})
    rest = []
    for term in terms:
        left = [(base, power - shared[base]) for base, power in term.factors.items()]
        left += [(base, -power) for base, power in shared.items() if power and base not in term.factors]
        rest.append(multiply([_numeral(Fraction(term.coefficient, number), term.decimal), product_of(left)]))
    shorter = multiply([factored(add(rest)), common.node()])
    return shorter if size(shorter) < size(tree) else tree


def monic(tree: Node) -> Node:
    """A product without its number and sign; anything else as it is."""
    term = _monomial([(tree, 1)])
    return term.with_coefficient(1, False).node() if term.factors else tree


def factors_of(tree: Node) -> tuple[Node, list[tuple[Node, Exact]]]:
    """A product as its number and its other factors with their exponents."""
    term = _monomial([(tree, 1)])
    return _numeral(term.coefficient, term.decimal), list(term.factors.items())


def rational(tree: Node) -> Exact | None:
    """The exact value of a formula of numbers, or None."""
    if isinstance(tree, Number) and (said := _folded(tree, 1)) is not None:
        return said
    if any(isinstance(node, Name | At | Call | Lookup) for node in walk(tree)):  # most often the first leaf is one
        return None
    if isinstance(tree, Sum):
        tree = add([tree])
    if isinstance(tree, Sum):
        return None
    term = _monomial([(tree, 1)])
    return None if term.factors else term.coefficient


@dataclass(frozen=True, slots=True)
class _Monomial:
    """A rational number times powers; `decimal` says that the user wrote it with a decimal point."""

    coefficient: Exact
    decimal: bool
    factors: dict[Node, Exact]

    def with_coefficient(self, coefficient: Exact, decimal: bool) -> _Monomial:
        return _Monomial(coefficient, decimal, self.factors)

    def node(self) -> Node:
        if not self.coefficient:
            return ZERO
        size = _absolute(self.coefficient)
        above = [_powered(base, e) for base, e in self.factors.items() if e > 0]
        below = [_powered(base, -e) for base, e in self.factors.items() if e < 0]
        if (self.decimal and _finite(size)) or not _small(size):
            if size != 1 or not above:
                above.insert(0, _numeral(size, True))
        else:
            if size.numerator != 1 or not above:
                above.insert(0, _numeral(size.numerator, False))
            if size.denominator != 1:
                below.insert(0, _numeral(size.denominator, False))
        if below:
            under = below[0] if len(below) == 1 else Product(tuple(below), (False,) * len(below))
            tree: Node = Product((*above, under), (False,) * len(above) + (True,))
        else:
            tree = above[0] if len(above) == 1 else Product(tuple(above), (False,) * len(above))
        return Negative(tree) if self.coefficient < 0 else tree


def _powered(base: Node, exponent: Exact) -> Node:
    if exponent == 1:
        return base
    if exponent == _HALF:
        return Call("sqrt", (base,))
    return Power(base, _Monomial(exponent, exponent.denominator not in (1, 2, 3, 4, 6, 8), {}).node())


def _terms(tree: Node) -> list[_Monomial]:
    if isinstance(tree, Sum):
        found = []
        for term, minus in zip(tree.terms, tree.minus, strict=True):
            for part in _terms(term):
                found.append(part.with_coefficient(-part.coefficient, part.decimal) if minus else part)
        return found
    return [_monomial([(tree, 1)])]


def _monomial(factors: Iterable[tuple[Node, Exact]]) -> _Monomial:
    coefficient: Exact = 1
    decimal = False
    collected: dict[Node, Exact] = {}
    waiting = list(factors)[::-1]
    while waiting:
        base, exponent = waiting.pop()
        whole = exponent.denominator == 1
        match base:
            case Name():
                _collect(collected, base, exponent)
            case Number() if (folded := _folded(base, exponent)) is not None and _small(coefficient * folded):
                coefficient *= folded
                decimal = decimal or not base.text.lstrip("-").isdigit()
            case Sum() if whole and (number := rational(base)):
                waiting.append((_numeral(number, False), exponent))
            case Negative(operand=operand) if whole:
                coefficient *= (-1) ** (exponent.numerator % 2)
                waiting.append((operand, exponent))
            case Product(factors=parts, over=over) if whole:
                waiting.extend((p, -exponent if o else exponent) for p, o in zip(parts[::-1], over[::-1], strict=True))
            case Call(function="sqrt", arguments=(inside,)) if whole or not isinstance(inside, Power):
                waiting.append((inside, exponent * _HALF))
            case Power(base=inside, exponent=power) if whole and (number := rational(power)) is not None:
                waiting.append((inside, number * exponent))
            case _:
                _collect(collected, base, exponent)
    return _Monomial(coefficient, decimal, collected if coefficient else {})


def _collect(collected: dict[Node, Exact], base: Node, exponent: Exact) -> None:
    if not exponent:
        return
    known = len(collected)
    before = collected.setdefault(base, exponent)  # one look, since trees are long to hash
    if len(collected) > known:
        return
    if total := before + exponent:
        collected[base] = _plain(total)
    else:
        del collected[base]


def _folded(number: Number, exponent: Exact) -> Exact | None:
    """The power of a number as an exact fraction, or None where it is better left as it stands."""
    if exponent.denominator != 1 or _absolute(exponent) > 30:
        return None
    value = _said(number.text, number.value)
    if value is None or (value == 0 and exponent.numerator < 0):
        return None
    power: Exact = (value if exponent.numerator > 0 else Fraction(value)) ** exponent.numerator
    return _plain(power) if _small(power) else None


@lru_cache(1024)
def _said(text: str, value: float) -> Exact | None:
    """What the text of a number says; None where its value is another one, converted from some unit, or no number."""
    if not math.isfinite(value):
        return None
    try:
        said = Fraction(text or repr(value))
    except ValueError:  # assembly made one number of a formula such as 3*pi
        return None
    return _plain(said) if float(said) == value else None


def _absolute(value: Exact) -> Exact:
    return -value if value < 0 else value


def _plain(value: Exact) -> Exact:
    """The same number, as a whole one where it is one."""
    return value.numerator if value.denominator == 1 else value


def _small(value: Exact) -> bool:
    return -_LARGEST < value.numerator < _LARGEST and value.denominator < _LARGEST


def _finite(value: Exact) -> bool:
    """Whether a float's digits say it exactly."""
    return Fraction(repr(float(value))) == value


def _numeral(value: Exact, decimal: bool) -> Node:
    if value.denominator == 1 and _small(value):
        return Number(float(value), str(value.numerator))
    if (decimal and _finite(value)) or not _small(value):
        return Number(float(value), repr(float(value)))
    above, below = (Number(float(part), str(part)) for part in (value.numerator, value.denominator))
    return Product((above, below), (False, True))
