"""What formulas depend on, abbreviations included, and the abbreviations in an order without circles."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from graphlib import CycleError, TopologicalSorter

from service.assemble.formulas import Formulas
from service.assemble.names import Kind, Names
from service.complaints import Refused, Stage
from solvers.formula.nodes import At, Call, Name, Node, Relation, children


@dataclass(frozen=True, slots=True)
class Traits:
    """What a formula depends on, abbreviations included.

    `moving`: the independent variable or an unknown, so that it varies along the curve; `placed`: values at places;
    `integral`: an integral; `parameter`: a parameter.  With none of them it is a given number.  `unknown`: an unknown.
    """

    moving: bool = False
    placed: bool = False
    integral: bool = False
    parameter: bool = False
    unknown: bool = False

    @property
    def fixed(self) -> bool:
        """Whether it is a given number."""
        return not (self.moving or self.placed or self.integral or self.parameter)

    @property
    def sought(self) -> bool:
        """Whether it depends on what is sought: it is neither a given number nor given along the curve."""
        return self.unknown or self.placed or self.integral or self.parameter


GIVEN = Traits()

_OF_KIND = {
    Kind.INDEPENDENT: Traits(moving=True),
    Kind.UNKNOWN: Traits(moving=True, unknown=True),
    Kind.PARAMETER: Traits(parameter=True),
}
"""The traits of names that are not those of a formula or of nothing."""


@dataclass(frozen=True, slots=True)
class Meaning:
    """Names understood: their kinds, the abbreviations in an order in which each uses earlier ones, the traits of
    every name."""

    names: Names
    order: tuple[str, ...]
    traits: Mapping[str, Traits]

    def of(self, *trees: Node | Relation) -> Traits:
        """The traits of trees taken together."""
        moving = placed = integral = parameter = unknown = False
        stack = [part for tree in trees for part in (tree.sides if isinstance(tree, Relation) else (tree,))]
        while stack:
            node = stack.pop()
            match node:
                case At():
                    placed = True
                case Call(function="integral"):
                    integral = True
                case Name(name=name):
                    of = self.traits.get(name, GIVEN)
                    moving, placed = moving or of.moving, placed or of.placed
                    integral, parameter = integral or of.integral, parameter or of.parameter
                    unknown = unknown or of.unknown
                case _:
                    stack.extend(children(node))
        return Traits(moving, placed, integral, parameter, unknown)


def read_meaning(formulas: Formulas, names: Names) -> Meaning:
    """The meaning of the names.  Raises `Refused` (stage names) where abbreviations go round in a circle."""
    order = _order(formulas, names)
    traits = {name: _OF_KIND.get(kind, GIVEN) for name, kind in names.kinds.items()}
    meaning = Meaning(names, order, traits)
    for name in order:
        traits[name] = meaning.of(*(formula.tree for formula in formulas.definitions[name]))
    return meaning


def _order(formulas: Formulas, names: Names) -> tuple[str, ...]:
    """The abbreviations so that each uses earlier ones.  Raises `Refused` where they go round in a circle."""
    definitions = formulas.definitions
    graph = {
        name: [
            node.name
            for formula in found
            for node in formula.nodes
            if isinstance(node, Name | At) and names.kinds.get(node.name) is Kind.ABBREVIATION
        ]
        for name, found in definitions.items()
    }
    try:
        return tuple(TopologicalSorter(graph).static_order())
    except CycleError as error:
        circle: list[str] = error.args[1]
        first = min(circle[:-1], key=list(definitions).index)
        formula = definitions[first][0]
        round_trip = " -> ".join(reversed(circle))
        message = f"The abbreviations use each other in a circle: {round_trip}."
        if len(circle) == 2:
            message = f"The abbreviation “{first}” uses itself."
        complaint = formula.complaint(formula.tree.span, "circle", message, "Take one of them out of the circle.")
        raise Refused(Stage.NAMES, [complaint]) from error
