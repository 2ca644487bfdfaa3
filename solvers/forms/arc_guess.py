"""First guesses for arcs beside each other: lines in t through what is known at any place, cut at the junctions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from solvers.forms.beside import Beside, Piece
from solvers.formula.nodes import At, Name
from solvers.observations import known_values
from solvers.problem import Jump, Problem, Unknown
from solvers.starts.guess import first_value
from solvers.starts.sketch import between, given_values
from solvers.transcription.limits import interval_of, number
from solvers.transcription.lowering import primed

Array = NDArray[np.float64]

POINTS = 33
"""Points of a piece at which a guess of the user's is taken over."""

Known = dict[tuple[str, int], list[tuple[int, str, float]]]
"""Values (place, side, value) of a derivative of an unknown; side "" is both sides."""


def with_sketches(beside: Beside) -> Problem:
    """The equivalent problem with a guess for every copy, and for every parameter that is a place."""
    original = beside.original
    parameters = {p.name: first_value(p) for p in original.parameters}
    constants = {c.name: c.value for c in original.constants}
    places = _places(original, constants, parameters)
    free = {place.tree.name: float(at) for place, at in zip(original.places, places, strict=True)
            if isinstance(place.tree, Name) and place.tree.name in parameters}  # fmt: skip
    numbers = constants | parameters | free
    known = _known(original, constants)
    guesses: dict[str, tuple[tuple[float, float], ...]] = {}
    drawn = set()
    for piece in beside.pieces:
        ends = places[piece.place : piece.place + 2].tolist()
        guesses[piece.own(original.independent)] = ((0.0, ends[0]), (1.0, ends[1]))
        for unknown in original.arcs[piece.arc].unknowns:
            for order, row in enumerate(_rows(original, piece, unknown, places, known, numbers)):
                copy = piece.own(primed((unknown.name, order)))
                guesses[copy] = tuple(zip(np.linspace(0.0, 1.0, len(row)).tolist(), row.tolist(), strict=True))
                if unknown.guess is None:
                    drawn.add(copy)
    return replace(
        beside.problem,
        unknowns=tuple(
            replace(unknown, guess=guesses[unknown.name], sketched=unknown.name in drawn)
            for unknown in beside.problem.unknowns
        ),
        parameters=tuple(replace(p, guess=free.get(p.name, p.guess)) for p in beside.problem.parameters),
    )


def _places(problem: Problem, constants: dict[str, float], parameters: dict[str, float]) -> Array:
    """Values of the places; free ones between the ends that have no guess are spread between their neighbours."""
    guessed = {p.name for p in problem.parameters if p.guess is not None}
    last = len(problem.places) - 1
    values = np.full(last + 1, np.nan)
    for index, place in enumerate(problem.places):
        name = place.tree.name if isinstance(place.tree, Name) else ""
        if name not in parameters:
            values[index] = number(place.tree, constants)
        elif index in (0, last) or name in guessed:
            values[index] = parameters[name]
    if values[-1] <= values[0]:
        values[-1] = values[0] + max(1.0, abs(values[0]))
    known = np.flatnonzero(np.isfinite(values))
    values = np.interp(np.arange(last + 1), known, values[known])
    for index, place in enumerate(problem.places):
        for parameter in problem.parameters:
            if isinstance(place.tree, Name) and place.tree.name == parameter.name:
                values[index] = np.clip(values[index], parameter.lower, parameter.upper)
    return np.asarray(values)


def _known(problem: Problem, constants: dict[str, float]) -> Known:
    """Values that conditions fix, or hold away from zero, or that were measured."""
    known: Known = {}
    for condition in problem.endpoints:
        body = condition.body
        if not isinstance(body, At):
            continue
        lower, upper = interval_of(condition, constants)
        if not condition.equality and lower <= 0.0 <= upper:
            continue
        place = next(index for index, place in enumerate(problem.places) if place.tree is body.place)
        side = body.side if Jump(body.name, body.order, place) in problem.jumps else ""
        value = lower if np.isfinite(lower) else upper
        known.setdefault((body.name, body.order), []).append((place, side, value))
    for name, order, tree, mean in known_values(problem):
        place = next(index for index, place in enumerate(problem.places) if place.tree is tree)
        values = known.setdefault((name, order), [])
        if all(other != place for other, _, _ in values):
            values.append((place, "", mean))
    return known


def _rows(
    problem: Problem, piece: Piece, unknown: Unknown, places: Array, known: Known, numbers: dict[str, float]
) -> list[Array]:
    """An unknown and its derivatives in t on a piece."""
    start, end = places[piece.place], places[piece.place + 1]
    grid = np.linspace(start, end, POINTS)
    if unknown.guess is not None:
        rows = [given_values(unknown.guess, grid, numbers, problem.independent)]
        for _ in range(unknown.order):
            rows.append(np.gradient(rows[-1], grid) if end > start else np.zeros_like(grid))
        return rows
    rows = []
    for order in range(unknown.order + 1):
        row = _line(known.get((unknown.name, order), []), piece, places, grid)
        if row is None and order == 0:
            row = np.full_like(grid, between(unknown.lower, unknown.upper))
        elif row is None:
            slope = (rows[0][-1] - rows[0][0]) / (end - start) if order == 1 and end > start else 0.0
            row = np.full_like(grid, slope)
        rows.append(row)
    return rows


def _line(values: list[tuple[int, str, float]], piece: Piece, places: Array, grid: Array) -> Array | None:
    """The line through the values that reach a piece: before it those after a jump, behind it those before one."""
    reaching = {place: value for place, side, value in values if side != ("-" if place <= piece.place else "+")}
    if not reaching:
        return None
    spots = sorted(reaching)
    return np.asarray(np.interp(grid, places[spots], [reaching[spot] for spot in spots]))
