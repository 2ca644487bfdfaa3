"""Formulas that are homogeneous in the derivatives of a curve: how an integrand changes with the parametrisation.

Where y(x) is written as x(s), y(s), a slope y' becomes y'/x', and an integrand f(x, y, y') becomes x' f(x, y, y'/x').
"""

from __future__ import annotations

from fractions import Fraction

from solvers.formula.nodes import Call, Name, Negative, Node, Number, Power, Product, Sum, children, walk, with_children
from solvers.problem import MIDDLE


class OtherGrowthError(Exception):
    """A tree grows with the slope in another way than a power does."""


class Homogeneous:
    """Trees in x, y(x), y'(x) rewritten in x(s), y(s), x'(s), y'(s), where y' becomes y'/x'."""

    def __init__(self, independent: str, unknowns: set[str], where: dict[str, Node]) -> None:
        self._slope = Name(independent, 1)
        self._unknowns = unknowns
        self._where = where

    def plain(self, tree: Node) -> Node:
        """The tree with every y' written as y'/x'."""
        if isinstance(tree, Name) and tree.name in self._unknowns and tree.order == 1:
            return Product((tree, self._slope), (False, True))
        return with_children(tree, tuple(self.plain(part) for part in children(tree)))

    def integrals(self, tree: Node) -> Node:
        """The tree with every integral over x as one over s."""
        if isinstance(tree, Call) and tree.function == "integral":
            body, degree = self.of(tree.arguments[0])
            return Call("integral", (self.raised(body, 1 - degree),))
        return with_children(tree, tuple(self.integrals(part) for part in children(tree)))

    def raised(self, tree: Node, power: Fraction) -> Node:
        """The tree times a power of x'."""
        if power == 0:
            return tree
        if power == 1:
            return Product((tree, self._slope), (False, False))
        return Product((tree, Power(self._slope, Number(float(power), str(power)))), (False, False))

    def of(self, tree: Node) -> tuple[Node, Fraction]:
        """A tree h and a degree d with h = tree * x'^d, homogeneous in (x', y') of degree d, free of 1/x'.

        Raises OtherGrowthError where there is none, as for exp(y').
        """
        match tree:
            case Name(name=name, order=order) if name in self._unknowns and order == 1:
                return tree, Fraction(1)
            case Name(name=name) if name in self._where and self.moves(tree):
                return self.of(self._where[name])
            case Negative(operand=operand):
                inner, degree = self.of(operand)
                return Negative(inner), degree
            case Sum(terms=terms, minus=minus):
                parts = [self.of(term) for term in terms]
                degree = max(d for _, d in parts)
                return Sum(tuple(self.raised(part, degree - d) for part, d in parts), minus), degree
            case Product(factors=factors, over=over):
                parts = [self.of(factor) for factor in factors]
                degree = sum((-d if below else d for (_, d), below in zip(parts, over, strict=True)), Fraction(0))
                return Product(tuple(part for part, _ in parts), over), degree
            case Power(base=base, exponent=exponent) if isinstance(_number(exponent), float):
                inner, degree = self.of(base)
                return Power(inner, exponent), degree * Fraction(str(_number(exponent))).limit_denominator(1000)
            case Call(function="sqrt", arguments=(inside,)):
                inner, degree = self.of(inside)
                return Call("sqrt", (inner,)), degree / 2
            case Call(function="abs", arguments=(inside,)):
                inner, degree = self.of(inside)
                return Call("abs", (inner,)), degree
            case Call(function="hypot", arguments=sides):
                parts = [self.of(side) for side in sides]
                degree = max(d for _, d in parts)
                return Call("hypot", tuple(self.raised(part, degree - d) for part, d in parts)), degree
            case _ if self.moves(tree):
                raise OtherGrowthError
            case _:
                return tree, Fraction(0)

    def moves(self, tree: Node) -> bool:
        """Whether a tree, its abbreviations included, holds a derivative."""
        return any(
            isinstance(node, Name)
            and ((node.name in self._unknowns and node.order == 1)
                 or (node.name in self._where and self.moves(self._where[node.name])))
            for node in walk(tree)
        )  # fmt: skip

    def invariant(self, tree: Node, degree: int) -> bool:
        """Whether a tree is homogeneous of this degree in the derivatives, and x is nowhere in it.

        With degree 1 its integral is the same for every parametrisation, with degree 0 the tree itself.
        """
        try:
            homogeneous, own = self.of(tree)
        except OtherGrowthError:
            return False
        return own == degree and not self._holds_independent(homogeneous)

    def _holds_independent(self, tree: Node) -> bool:
        """Whether a tree, its abbreviations included, holds x or x', or what changes with x from stretch to stretch."""
        names = {node.name for node in walk(tree) if isinstance(node, Name)}
        held = (self._holds_independent(self._where[name]) for name in names if name in self._where)
        return not names.isdisjoint((self._slope.name, MIDDLE)) or any(held)


def _number(tree: Node) -> float | None:
    match tree:
        case Number(value=value):
            return float(value)
        case Negative(operand=Number(value=value)):
            return -float(value)
        case Product(factors=(Number(value=above), Number(value=below)), over=(False, True)) if below:
            return above / below
        case _:
            return None
