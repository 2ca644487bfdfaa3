"""Abbreviations of single arcs: each is used only where it has a meaning."""

from __future__ import annotations

from collections.abc import Iterator

from service.assemble.formulas import Formula, Formulas
from service.assemble.meaning import Meaning
from service.complaints import Complaint, listing
from solvers.formula.nodes import At, Call, Name, Node, children


def out_of_scope(formulas: Formulas) -> Iterator[Complaint]:
    """Abbreviations used on an arc that does not have them, or outside where not all arcs have them."""
    owners: dict[str, list[str]] = {}
    for arc in formulas.arcs:
        for name in arc.where:
            owners.setdefault(name, []).append(arc.name)
    arcs = [arc.name for arc in formulas.arcs]
    inside = {formula.pointer for arc in formulas.arcs for formula in arc.running()}
    inside |= {formula.pointer for formula in formulas.observed}
    for formula in formulas.moving():
        if formula.pointer not in inside:
            yield from _missing(formula, owners, arcs)
    for formula, arc_name in zip(formulas.observed, formulas.observed_on, strict=True):
        yield from _missing(formula, owners, [arc_name] if arc_name in arcs else arcs)
    for arc in formulas.arcs:
        for formula in arc.running():
            yield from _missing(formula, owners, [arc.name])


def _missing(formula: Formula, owners: dict[str, list[str]], arcs: list[str]) -> Iterator[Complaint]:
    for node in formula.nodes:
        if not isinstance(node, Name | At) or node.name not in owners:
            continue
        lacking = [arc for arc in arcs if arc not in owners[node.name]]
        if lacking:
            on = listing(owners[node.name])
            message = f"“{node.name}” means something on {on} only; this holds on {listing(arcs)}."
            hint = f"Give it in `where` of {listing(lacking)} too, or outside of the arcs."
            yield formula.complaint(node.span, "not-on-arc", message, hint)


def without_place(formulas: Formulas, meaning: Meaning) -> Iterator[Complaint]:
    """Abbreviations that differ from arc to arc, in formulas that hold on none of them."""
    own = {name for arc in formulas.arcs for name in arc.where}
    stated = [*formulas.endpoints, *(() if formulas.endpoint is None else (formulas.endpoint,))]
    stated += [c for c in formulas.constraints if not meaning.of(c.tree).moving]
    for formula in stated if own else ():
        stack: list[Node] = list(formula.sides)
        while stack:
            node = stack.pop()
            if isinstance(node, At) or (isinstance(node, Call) and node.function == "integral"):
                continue
            if isinstance(node, Name) and node.name in own:
                message = f"“{node.name}” differs from arc to arc: it has no single value here."
                yield formula.complaint(node.span, "not-on-arc", message, "Give it outside of the arcs.")
            stack.extend(children(node))
