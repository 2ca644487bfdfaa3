"""Arcs in parametric form: t as an unknown of its own on every arc whose cost grows linearly with the slopes.

On such an arc the curve may stand upright.  Where all arcs are such and nothing but the integral is minimised, a gauge
by squares serves here too: with shares w of the pieces that sum up to one,

    (sum of the integrals of f)^2  <=  the sum of the integrals of f^2 / w,

with equality where f is constant and w is the share of a piece in the cost (Cauchy and Schwarz twice).  Else each piece
has a constant speed of its own.  Arcs whose integral is the same for every parametrisation get a speed only.

Reference: as in `solvers.forms.gauge`.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from solvers.forms.arc_guess import with_sketches
from solvers.forms.beside import END, START, Beside, Copy, Piece, side_by_side
from solvers.forms.gauge import (
    EVENLY,
    SPEED,
    STEADILY,
    TWO,
    Gauged,
    Sizes,
    Way,
    at_rest,
    constant_speed,
    infinite,
    integrals_of,
    is_invariant,
    root_of,
    tied,
)
from solvers.forms.homogeneous import Homogeneous, OtherGrowthError
from solvers.formula.nodes import Name, Node, Number, Power, Product, Sum, children, with_children
from solvers.problem import MIDDLE, Condition, Equation, Parameter, Place, Problem, Seek, Unknown

SHARE = "path share"
LEAST_SHARE = 1e-6
"""A piece with less of the cost is as good as none."""

GROWS = "On {} the integrand grows linearly with the slope: the curve was found in parametric form there, {}."
INVARIANT = "On {} the integral is the same for every parametrisation: the curve is told there in the one {}."


class Upright(Copy):
    """A piece on which t is an unknown besides the others."""

    def __init__(self, problem: Problem, piece: Piece, form: Homogeneous) -> None:
        super().__init__(problem, piece)
        self.form = form
        self.x = piece.own(problem.independent)
        self._problem = problem

    @property
    def rates(self) -> dict[str, str]:
        """The copies that the speed is made of, by what they are copies of."""
        own = {unknown.name: self.quantity(unknown.name, 0).name for unknown in self.arc.unknowns}
        return {self._independent: self.x} | own

    def tree(self, tree: Node) -> Node:
        return self.moved(self.form.plain(tree))

    def over_arc(self, tree: Node) -> Node:
        homogeneous, degree = self.form.of(tree)
        return self.moved(self.form.raised(homogeneous, 1 - degree))

    def moved(self, tree: Node) -> Node:
        """A formula of derivatives along the curve in the copies."""
        if not isinstance(tree, Name):
            return with_children(tree, tuple(self.moved(part) for part in children(tree)))
        if tree.name == self._independent:
            return Name(self.x, tree.order)
        if tree.name == MIDDLE:
            return self.middle
        if tree.name in self._names:
            return Name(self.quantity(tree.name, 0).name, tree.order)
        return self.quantity(tree.name, 0) if tree.name in self._abbreviations else tree

    def unknowns(self) -> Iterator[Unknown]:
        yield Unknown(self.x, 1, unit=self._problem.independent_unit)
        yield from self.own_unknowns()

    def own_unknowns(self) -> Iterator[Unknown]:
        """The copies of the arc's unknowns."""
        return (replace(u, name=self.quantity(u.name, 0).name, guess=None) for u in self.arc.unknowns)

    def where(self) -> tuple[tuple[str, Node], ...]:
        return tuple((self.quantity(name, 0).name, self.tree(tree)) for name, tree in self.arc.where)

    def dynamics(self) -> Iterator[Equation]:
        return iter(())

    def constraints(self) -> Iterator[Condition]:
        yield from super().constraints()
        label = self.piece.own(f"{self._independent} runs forward")
        yield Condition(Name(self.x, 1), START, None, label, "")

    def endpoints(self) -> Iterator[Condition]:
        for at, place in self.ends:
            yield tied(self.x, at, place, self._problem)

    @property
    def ends(self) -> tuple[tuple[Node, Place], tuple[Node, Place]]:
        """The ends of the common variable, and the places that they are."""
        places = self._problem.places[self.piece.place : self.piece.place + 2]
        return (START, places[0]), (END, places[1])

    def at_rest(self) -> Iterator[Condition]:
        """What holds at ends where the integrand is infinite, where it is squared."""
        laws = replace(self._problem.along(self.arc), endpoints=self._problem.endpoints)
        for at, place in self.ends:
            if infinite(laws, place):
                yield from at_rest(tuple(self.rates.values()), at)


class Invariant(Upright):
    """A piece whose integrals are the same for every parametrisation: t is told by the places of its ends alone."""

    @property
    def rates(self) -> dict[str, str]:
        rates = dict(super().rates)
        del rates[self._independent]
        return rates

    def tree(self, tree: Node) -> Node:
        return self.moved(self.form.of(tree)[0])

    def moved(self, tree: Node) -> Node:
        return self.here() if isinstance(tree, Name) and tree.name == self._independent else super().moved(tree)

    def unknowns(self) -> Iterator[Unknown]:
        return self.own_unknowns()

    def where(self) -> tuple[tuple[str, Node], ...]:
        still = [(name, tree) for name, tree in self.arc.where if not self.form.moves(tree)]
        return tuple((self.quantity(name, 0).name, self.moved(tree)) for name, tree in still)

    def constraints(self) -> Iterator[Condition]:
        return Copy.constraints(self)

    def endpoints(self) -> Iterator[Condition]:
        return iter(())


def in_parametric_form_by_arcs(beside: Beside, problem: Problem, sizes: Sizes, squared: bool) -> Gauged | None:
    """The equivalent problem of arcs with those in parametric form that can be; None where none can.

    `problem` is that of `beside`, maybe with other values of constants.
    """
    original = replace(beside.original, constants=problem.constants)
    if original.observations:
        return None
    copies = [_copy(original, piece) for piece in beside.pieces]
    found = [copy for copy in copies if isinstance(copy, Upright)]
    if not found:
        return None
    integrals = [body for part in (original, *map(original.along, original.arcs)) for body in integrals_of(part)]
    plain = original.seek is not Seek.STATIONARY and original.endpoint is None and not integrals
    squared = squared and plain and len(found) == len(copies)
    sketched = with_sketches(side_by_side(original, _copy))
    sketched = replace(sketched, start=problem.start, options=problem.options, sweeps=problem.sweeps)
    lengths = _Lengths(sketched, found)
    changed, roots = _by_squares(sketched, found, lengths) if squared else (_steady(sketched, found, lengths), ())
    ways = tuple(Way(c.x, tuple(u.name for u in c.own_unknowns())) for c in found if not isinstance(c, Invariant))
    return Gauged(problem, changed, squared, roots, ways, _note(found, squared))


def _copy(problem: Problem, piece: Piece) -> Copy:
    """The copy on a piece, in parametric form where that is granted."""
    arc = problem.arcs[piece.arc]
    first_order = bool(arc.unknowns) and all(unknown.order == 1 for unknown in arc.unknowns)
    if arc.integrand is None or arc.dynamics or not first_order:
        return Copy(problem, piece)
    laws = problem.along(arc)
    form = Homogeneous(problem.independent, {unknown.name for unknown in arc.unknowns}, dict(arc.where))
    bodies = (arc.integrand, *integrals_of(problem), *integrals_of(laws))
    if len(arc.unknowns) > 1 and is_invariant(laws, form, bodies):
        return Invariant(problem, piece, form)
    try:
        steepest = max(form.of(body)[1] for body in bodies)
    except OtherGrowthError:
        return Copy(problem, piece)
    return Upright(problem, piece, form) if steepest == 1 else Copy(problem, piece)


class _Lengths:
    """How long the first guess is on each piece, where every unknown counts relative to its size on all of them."""

    def __init__(self, sketched: Problem, copies: list[Upright]) -> None:
        drawn = {u.name: np.array([at[1] for at in u.guess]) for u in sketched.unknowns if isinstance(u.guess, tuple)}
        self.sizes: dict[str, float] = {}
        for copy in copies:
            for name, own in copy.rates.items():
                self.sizes[name] = max(self.sizes.get(name, 0.0), float(np.abs(drawn[own]).max()))
        self.sizes = {name: size or 1.0 for name, size in self.sizes.items()}
        self._drawn = drawn

    def of(self, copy: Upright) -> float:
        """The length on one piece."""
        moved = [np.diff(self._drawn[own]) / self.sizes[name] for name, own in copy.rates.items()
                 if len(self._drawn[own]) > 2]  # fmt: skip
        return float(np.sqrt(np.square(moved).sum(axis=0)).sum())


def _by_squares(sketched: Problem, copies: list[Upright], lengths: _Lengths) -> tuple[Problem, tuple[Node, ...]]:
    """The problem with the least sum of squares over shares, and the integrands that are squared."""
    total = sum(map(lengths.of, copies)) or 1.0
    roots, terms, shares = [], [], []
    rest: list[Condition] = []
    for copy in copies:
        assert copy.arc.integrand is not None
        root = root_of(copy.over_arc(copy.arc.integrand), sketched)
        share = Parameter(copy.piece.own(SHARE), LEAST_SHARE, 1.0, max(lengths.of(copy) / total, 1e3 * LEAST_SHARE))
        roots.append(root)
        terms.append(Product((Power(root, TWO), Name(share.name)), (False, True)))
        shares.append(share)
        rest += copy.at_rest()
    one = Number(1.0, "1")
    together = Condition(_sum([Name(share.name) for share in shares]), one, one, "the shares of the pieces", "")
    changed = replace(
        sketched,
        seek=Seek.MINIMUM,
        integrand=_sum(terms),
        parameters=(*sketched.parameters, *shares),
        endpoints=(*sketched.endpoints, together, *rest),
    )
    return changed, tuple(roots)


def _steady(sketched: Problem, copies: list[Upright], lengths: _Lengths) -> Problem:
    """The problem with a constant speed on every piece in parametric form."""
    speeds, gauges = [], []
    for copy in copies:
        speed = Parameter(copy.piece.own(SPEED), 0.0, guess=lengths.of(copy) or 1.0)
        rates = [(Name(own, 1), lengths.sizes[name]) for name, own in copy.rates.items()]
        gauges.append(constant_speed(rates, speed.name, copy.piece.own("constant speed along the curve")))
        speeds.append(speed)
    return replace(
        sketched,
        parameters=(*sketched.parameters, *speeds),
        constraints=(*sketched.constraints, *gauges),
    )


def _note(copies: list[Upright], squared: bool) -> str:
    """What was done, in words."""
    speed = EVENLY if squared else STEADILY
    told = []
    for sentence, invariant in ((GROWS, False), (INVARIANT, True)):
        names = dict.fromkeys(copy.arc.name for copy in copies if isinstance(copy, Invariant) is invariant)
        told += [sentence.format(", ".join(names), speed)] if names else []
    return " ".join(told)


def _sum(terms: Sequence[Node]) -> Node:
    return terms[0] if len(terms) == 1 else Sum(tuple(terms), (False,) * len(terms))
