"""Kinks that are given along arcs: their places cut the arcs into pieces, and every piece has its branches."""

from __future__ import annotations

from dataclasses import replace

from solvers.forms.kinks import Kinks, free_places
from solvers.problem import KINK, Arc, Place, Problem
from solvers.transcription.functions import rounded_functions
from solvers.transcription.limits import number


def arcs_at_kinks(problem: Problem) -> Problem:
    """A problem of arcs with places at the kinks of all arcs between given places.

    Limits of states with kinks hold at these places besides.
    """
    places: list[Place] = [problem.places[0]]
    arcs: list[Arc] = []
    endpoints = list(problem.endpoints)
    moved = {0: 0}  # where the places of the problem stand among all
    for arc in problem.arcs:
        laws = _resolved(problem.along(arc))
        first = len(places) - 1
        for place in laws.places[1:]:
            if place.label.startswith(KINK + " "):
                count = sum(other.label.startswith(KINK + " ") for other in places)
                places.append(replace(place, label=f"{KINK} {count + 1}"))
            else:
                places.append(place)
                moved[len(moved)] = len(places) - 1
        endpoints += laws.endpoints
        own = replace(arc, integrand=laws.integrand, where=laws.where, dynamics=laws.dynamics)
        own = replace(own, constraints=laws.constraints, integrals=laws.integrals)
        arcs.append(replace(own, first=first, last=len(places) - 1))
    jumps = frozenset(replace(jump, place=moved[jump.place]) for jump in problem.jumps)
    return replace(problem, places=tuple(places), arcs=tuple(arcs), endpoints=tuple(endpoints), jumps=jumps)


def _resolved(laws: Problem) -> Problem:
    """The laws of an arc with its given kinks at places, where its ends are given."""
    if free_places(laws) or not rounded_functions(laws):
        return laws
    constants = {c.name: c.value for c in laws.constants}
    return Kinks(laws, [number(place.tree, constants) for place in laws.places]).resolved
