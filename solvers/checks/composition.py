"""Is a formula convex?  Established by rules of composition only, so that "convex" is never said without a proof.

A `Shape` says how a formula bends as a function of all unknowns, their derivatives and the parameters together, and in
which interval its values lie.  The independent variable and the constants count as given.  Sums, products with given
factors, monotone functions of convex ones follow the usual rules; on top of them sums of numeric quadratics are decided
by eigenvalues, and square roots of nonnegative quadratic forms are norms.

Reference: Boyd, Vandenberghe (2004), Convex Optimization, sections 3.1 and 3.2 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from enum import Enum

from solvers.checks.quadratic import Quadratic, add_to, bends, multiplied, nowhere_negative
from solvers.checks.tabulated import bounds, inside
from solvers.formula.evaluate import REAL
from solvers.formula.nodes import SIDE, At, Call, Lookup, Name, Negative, Node, Number, Power, Product, Sum

INF = math.inf


class Bend(Enum):
    """How a formula bends."""

    GIVEN = "given"  # holds no unknown
    AFFINE = "affine"
    CONVEX = "convex"
    CONCAVE = "concave"
    UNKNOWN = "unknown"


@dataclass(frozen=True, slots=True)
class Shape:
    """How a formula bends, and the interval of its values."""

    bend: Bend
    low: float = -INF
    high: float = INF

    @property
    def convex(self) -> bool:
        """Known to be convex."""
        return self.bend in (Bend.GIVEN, Bend.AFFINE, Bend.CONVEX)

    @property
    def concave(self) -> bool:
        """Known to be concave."""
        return self.bend in (Bend.GIVEN, Bend.AFFINE, Bend.CONCAVE)

    @property
    def affine(self) -> bool:
        """Known to be affine."""
        return self.bend in (Bend.GIVEN, Bend.AFFINE)


UNKNOWN = Shape(Bend.UNKNOWN)

Leaf = Callable[[Name | At], Shape]
"""What is known of a name or of a value at a place."""

Unfold = Callable[[Node], Node]
"""A node with an abbreviation replaced by what it stands for."""


def shape_of(tree: Node, leaf: Leaf, unfold: Unfold) -> Shape:
    """The shape of a formula."""
    tree = unfold(tree)
    match tree:
        case Number(value=value):
            return Shape(Bend.GIVEN, value, value)
        case Name() | At():
            return leaf(tree)
        case Negative(operand=operand):
            return _flipped(shape_of(operand, leaf, unfold))
        case Sum():
            return _sum(tree, leaf, unfold)
        case Product():
            return _product(tree, leaf, unfold)
        case Power(base=base, exponent=exponent):
            return _power(shape_of(base, leaf, unfold), shape_of(exponent, leaf, unfold))
        case Call(function="integral", arguments=(inner,)):
            shape = shape_of(inner, leaf, unfold)
            return Shape(shape.bend, 0.0 if shape.low >= 0 else -INF, 0.0 if shape.high <= 0 else INF)
        case Call(function="sqrt", arguments=(inner,)) if _norm(inner, leaf, unfold):
            root = _call("sqrt", [shape_of(inner, leaf, unfold)])
            return root if root.bend is Bend.GIVEN else replace(root, bend=Bend.CONVEX)
        case Lookup(arguments=arguments):
            return _lookup(tree, [shape_of(part, leaf, unfold) for part in arguments])
        case Call(function=function, arguments=arguments):
            return _call(function, [shape_of(part, leaf, unfold) for part in arguments])
    return UNKNOWN


def _bend(convex: bool, concave: bool) -> Bend:
    if convex and concave:
        return Bend.AFFINE
    return Bend.CONVEX if convex else Bend.CONCAVE if concave else Bend.UNKNOWN


def _flipped(shape: Shape) -> Shape:
    opposite = {Bend.CONVEX: Bend.CONCAVE, Bend.CONCAVE: Bend.CONVEX}
    return Shape(opposite.get(shape.bend, shape.bend), -shape.high, -shape.low)


def _added(shapes: Iterable[Shape]) -> Shape:
    shapes = list(shapes)
    low, high = sum(s.low for s in shapes), sum(s.high for s in shapes)
    if all(s.bend is Bend.GIVEN for s in shapes):
        return Shape(Bend.GIVEN, low, high)
    return Shape(_bend(all(s.convex for s in shapes), all(s.concave for s in shapes)), low, high)


def _sum(tree: Sum, leaf: Leaf, unfold: Unfold) -> Shape:
    signed = [(term, minus) for term, minus in zip(tree.terms, tree.minus, strict=True)]
    shapes = [_flipped(s) if minus else s for s, minus in ((shape_of(t, leaf, unfold), m) for t, m in signed)]
    total = _added(shapes)
    if total.bend is not Bend.UNKNOWN:
        return total
    quadratic: Quadratic = {}
    others = []
    for (term, minus), shape in zip(signed, shapes, strict=True):
        part = quadratic_of(term, leaf, unfold)
        if part is None:
            others.append(shape)
        else:
            add_to(quadratic, part, -1.0 if minus else 1.0)
    return Shape(_added([Shape(_bend(*bends(quadratic))), *others]).bend, total.low, total.high)


def _times(a: Shape, b: Shape) -> Shape:
    low, high = _interval_product(a, b)
    if a.bend is not Bend.GIVEN:
        a, b = b, a
    if a.bend is not Bend.GIVEN:
        return Shape(Bend.UNKNOWN, low, high)
    if b.bend in (Bend.GIVEN, Bend.AFFINE) or a.low >= 0:
        return Shape(b.bend, low, high)
    return Shape(_flipped(b).bend if a.high <= 0 else Bend.UNKNOWN, low, high)


def _interval_product(a: Shape, b: Shape) -> tuple[float, float]:
    corners = [0.0 if 0.0 in (x, y) else x * y for x in (a.low, a.high) for y in (b.low, b.high)]
    return min(corners), max(corners)


def _product(tree: Product, leaf: Leaf, unfold: Unfold) -> Shape:
    total: Shape | None = None
    for factor, over in zip(tree.factors, tree.over, strict=True):
        shape = shape_of(factor, leaf, unfold)
        if over:
            shape = _power(shape, Shape(Bend.GIVEN, -1.0, -1.0))
        total = shape if total is None else _times(total, shape)
    assert total is not None
    if total.bend is Bend.UNKNOWN:
        quadratic = quadratic_of(tree, leaf, unfold)
        if quadratic is not None:
            return Shape(_bend(*bends(quadratic)), total.low, total.high)
    return total


def _power(base: Shape, exponent: Shape) -> Shape:
    if exponent.low != exponent.high:
        if base.bend is Bend.GIVEN and base.low == base.high and base.low > 0:  # c^f = exp(f log c)
            return _call("exp", [_times(Shape(Bend.GIVEN, math.log(base.low), math.log(base.low)), exponent)])
        both_given = base.bend is Bend.GIVEN and exponent.bend is Bend.GIVEN
        return Shape(Bend.GIVEN if both_given else Bend.UNKNOWN, 0.0 if base.low >= 0 else -INF, INF)
    p = exponent.low
    whole, even = p == int(p), p == int(p) and int(p) % 2 == 0
    low, high = _interval_power(base, p, whole, even)
    if base.bend is Bend.GIVEN:
        return Shape(Bend.GIVEN, low, high)
    if p in (0.0, 1.0):
        return base if p == 1.0 else Shape(Bend.GIVEN, 1.0, 1.0)
    if p > 1:
        convex = (
            (even and (base.affine or (base.concave and base.high <= 0)))
            or (base.convex and base.low >= 0)
            or (not whole and base.affine)
        )
        return Shape(Bend.CONVEX if convex else Bend.UNKNOWN, low, high)
    if p > 0:
        return Shape(Bend.CONCAVE if base.concave else Bend.UNKNOWN, low, high)
    return Shape(Bend.CONVEX if base.concave and (base.low >= 0 or not whole) else Bend.UNKNOWN, low, high)


def _interval_power(base: Shape, p: float, whole: bool, even: bool) -> tuple[float, float]:
    if not whole:
        base = Shape(base.bend, max(base.low, 0.0), max(base.high, 0.0))
    if base.low < 0 < base.high and p < 0:
        return (0.0, INF) if even else (-INF, INF)
    ends = [_raised(base.low, p), _raised(base.high, p)]
    if base.low <= 0 <= base.high and p < 0:  # one end is zero: the values run off on the side of the other
        other = base.high if base.high > 0 else base.low
        return (min(ends), INF) if even or other > 0 else (-INF, max(ends))
    if even and base.low < 0 < base.high:
        return 0.0, max(ends)
    return min(ends), max(ends)


def _raised(value: float, p: float) -> float:
    if value == 0:
        return INF if p < 0 else 1.0 if p == 0 else 0.0
    try:
        return math.pow(value, p)
    except OverflowError:
        return INF if value > 0 or p % 2 == 0 else -INF


def _call(function: str, parts: list[Shape]) -> Shape:
    if all(part.bend is Bend.GIVEN for part in parts):
        return Shape(Bend.GIVEN, *_given_interval(function, parts))
    first = parts[0]
    match function:
        case "sqrt":
            return _power(first, Shape(Bend.GIVEN, 0.5, 0.5))
        case "exp":
            return Shape(Bend.CONVEX if first.convex else Bend.UNKNOWN, *_given_interval(function, parts))
        case "log":
            return Shape(Bend.CONCAVE if first.concave else Bend.UNKNOWN, *_given_interval(function, parts))
        case "abs" | "cosh":
            convex = first.affine or (first.convex and first.low >= 0) or (first.concave and first.high <= 0)
            return Shape(Bend.CONVEX if convex else Bend.UNKNOWN, 0.0 if function == "abs" else 1.0, INF)
        case "sinh":
            convex, concave = first.convex and first.low >= 0, first.concave and first.high <= 0
            return Shape(_bend(convex, concave), 0.0 if first.low >= 0 else -INF, 0.0 if first.high <= 0 else INF)
        case "max":
            bend = Bend.CONVEX if all(p.convex for p in parts) else Bend.UNKNOWN
            return Shape(bend, max(p.low for p in parts), max(p.high for p in parts))
        case "min":
            bend = Bend.CONCAVE if all(p.concave for p in parts) else Bend.UNKNOWN
            return Shape(bend, min(p.low for p in parts), min(p.high for p in parts))
        case "hypot":
            convex = all(p.affine or (p.convex and p.low >= 0) for p in parts)
            return Shape(Bend.CONVEX if convex else Bend.UNKNOWN, 0.0, INF)
    return UNKNOWN


def _lookup(node: Lookup, parts: list[Shape]) -> Shape:
    """A table bends as its polynomials do; of two arguments nothing is known but where the values lie."""
    table, orders = node.table, node.orders
    within = inside(table, [(part.low, part.high) for part in parts])
    low, high = bounds(table, orders, within)
    if all(part.bend is Bend.GIVEN for part in parts):
        return Shape(Bend.GIVEN, low, high)
    if len(parts) > 1 or orders[0]:
        return Shape(Bend.UNKNOWN, low, high)
    (rise, steepest), (least, most) = (bounds(table, (order,), within) for order in (1, 2))
    argument = parts[0]
    along = argument.affine or (argument.convex and rise >= 0) or (argument.concave and steepest <= 0)
    against = argument.affine or (argument.concave and rise >= 0) or (argument.convex and steepest <= 0)
    return Shape(_bend(least >= 0 and along, most <= 0 and against), low, high)


def _given_interval(function: str, parts: list[Shape]) -> tuple[float, float]:
    """Where a function's values lie when its arguments lie in intervals."""
    bounded = {"sin": (-1.0, 1.0), "cos": (-1.0, 1.0), "hypot": (0.0, INF), "abs": (0.0, INF)}
    bounded |= {"sign": (-1.0, 1.0), SIDE: (-1.0, 1.0)}
    try:
        if all(part.low == part.high for part in parts):
            value = float(REAL[function](*(part.low for part in parts)))
            return value, value
        low, high = parts[0].low, parts[0].high
        match function:
            case "exp":
                return (math.exp(low) if low > -700 else 0.0), (math.exp(high) if high < 700 else INF)
            case "log":
                return (math.log(low) if low > 0 else -INF), (math.log(high) if 0 < high < INF else INF)
            case "sqrt":
                return math.sqrt(max(low, 0.0)), (math.sqrt(high) if 0 <= high < INF else INF)
            case "cosh":
                return 1.0, INF
            case "max":
                return max(p.low for p in parts), max(p.high for p in parts)
            case "min":
                return min(p.low for p in parts), min(p.high for p in parts)
    except (ValueError, OverflowError, ZeroDivisionError):
        return -INF, INF
    return bounded.get(function, (-INF, INF))


def quadratic_of(tree: Node, leaf: Leaf, unfold: Unfold) -> Quadratic | None:
    """The tree as a polynomial of degree at most two with numbers as coefficients, or None."""
    tree = unfold(tree)
    match tree:
        case Name() | At():
            shape = leaf(tree)
            if shape.bend is Bend.AFFINE:
                place = repr(tree.place) if isinstance(tree, At) else ""
                return {((tree.name, tree.order, place),): 1.0}
            return {(): shape.low} if shape.bend is Bend.GIVEN and shape.low == shape.high else None
        case Negative(operand=operand):
            inner = quadratic_of(operand, leaf, unfold)
            return None if inner is None else {key: -value for key, value in inner.items()}
        case Sum(terms=terms, minus=minus):
            total: Quadratic = {}
            for term, negative in zip(terms, minus, strict=True):
                part = quadratic_of(term, leaf, unfold)
                if part is None:
                    return None
                add_to(total, part, -1.0 if negative else 1.0)
            return total
        case Product(factors=factors, over=over):
            result: Quadratic | None = {(): 1.0}
            for factor, divides in zip(factors, over, strict=True):
                part = quadratic_of(factor, leaf, unfold)
                if part is not None and divides:
                    part = {(): 1 / part[()]} if set(part) == {()} and part[()] else None
                result = None if part is None or result is None else multiplied(result, part)
            return result
        case Power(base=base, exponent=exponent):
            power = quadratic_of(exponent, leaf, unfold)
            inner = quadratic_of(base, leaf, unfold)
            if inner is None or power is None or set(power) != {()}:
                return None
            if power[()] == 2.0:
                return multiplied(inner, inner)
    shape = shape_of(tree, leaf, unfold) if isinstance(tree, Number | Power | Call) else UNKNOWN
    return {(): shape.low} if shape.bend is Bend.GIVEN and shape.low == shape.high else None


def _norm(tree: Node, leaf: Leaf, unfold: Unfold) -> bool:
    """True where the square root of the tree is a norm of something affine, times something given."""
    tree = unfold(tree)
    if isinstance(tree, Product):
        others = []
        for factor, over in zip(tree.factors, tree.over, strict=True):
            shape = shape_of(factor, leaf, unfold)
            if shape.bend is Bend.GIVEN and shape.low >= 0:
                continue
            if over:
                return False
            others.append(factor)
        return len(others) == 1 and _norm(others[0], leaf, unfold)
    quadratic = quadratic_of(tree, leaf, unfold)
    if quadratic is not None and any(quadratic):
        return nowhere_negative(quadratic)
    if isinstance(tree, Sum) and not any(tree.minus):
        return all(_square(term, leaf, unfold) for term in tree.terms)
    return _square(tree, leaf, unfold)


def _square(tree: Node, leaf: Leaf, unfold: Unfold) -> bool:
    """True where the tree is given and nonnegative, or a given nonnegative factor times the square of an affine one."""
    tree = unfold(tree)
    shape = shape_of(tree, leaf, unfold)
    if shape.bend is Bend.GIVEN:
        return shape.low >= 0
    if isinstance(tree, Power):
        exponent = shape_of(tree.exponent, leaf, unfold)
        return exponent.low == exponent.high == 2.0 and shape_of(tree.base, leaf, unfold).affine
    return isinstance(tree, Product) and _norm(tree, leaf, unfold)
