"""A problem as the solver takes it: names resolved, everything in coherent SI units, orders found.

The trees hold no unit and no text that still needs a meaning: a `Name` is the independent variable, a constant, a
parameter, an unknown (with `order` primes), an abbreviation of `where`, or `pi`; an `At` names an unknown or an
abbreviation and its place is one of `Problem.places`.  The solver's own forms may hold a `SIDE` too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from enum import Enum

from solvers.formula.nodes import Node
from solvers.tables.table import Table
from solvers.units import PLAIN, Unit

MIDDLE = "middle of the stretch"
"""The name of what stands, on every stretch between two places, for its middle; no user can write it."""
KINK = "kink"
"""What the labels of places begin with that the solver adds where a formula has a kink; a blank follows."""


class Seek(Enum):
    """The sort of extremum asked for."""

    MINIMUM = "minimum"
    MAXIMUM = "maximum"
    STATIONARY = "stationary"


class Role(Enum):
    """What the dynamics make of an unknown."""

    STATE = "state"  # its derivatives below the highest one are continuous
    CONTROL = "control"  # order 0: nothing says how it moves


@dataclass(frozen=True, slots=True)
class Constant:
    """A given number; `tolerance` is one standard deviation, or None."""

    name: str
    value: float
    tolerance: float | None = None
    unit: Unit = PLAIN


@dataclass(frozen=True, slots=True)
class Parameter:
    """An unknown number with bounds (infinite where open) and, if given, a guess."""

    name: str
    lower: float = float("-inf")
    upper: float = float("inf")
    guess: float | None = None
    unit: Unit = PLAIN


@dataclass(frozen=True, slots=True)
class Unknown:
    """An unknown function.  `order` is its highest derivative anywhere; bounds are on the function itself.

    `guess` is a formula in the independent variable, constants and parameters, or points (t, value), or None.
    """

    name: str
    order: int
    lower: float = float("-inf")
    upper: float = float("inf")
    guess: Node | tuple[tuple[float, float], ...] | None = None
    unit: Unit = PLAIN
    sketched: bool = False  # the guess is none of the user's: it may be bent like a line

    @property
    def role(self) -> Role:
        """State where it has derivatives, control where it has none."""
        return Role.STATE if self.order else Role.CONTROL


@dataclass(frozen=True, slots=True)
class Equation:
    """One line of `dynamics`, left = right.

    `determines` is (name, order) where the line is explicit: the left side is just that highest derivative and the
    right side is free of it.  Else None, and the line holds as an equality at every point.
    """

    left: Node
    right: Node
    determines: tuple[str, int] | None
    label: str
    pointer: str


@dataclass(frozen=True, slots=True)
class Condition:
    """lower <= body <= upper; equality where both are the same tree.  The limits hold constants and numbers only.

    `label` is the user's text and `pointer` its JSON pointer: one relation may give several conditions.
    """

    body: Node
    lower: Node | None
    upper: Node | None
    label: str
    pointer: str
    unit: Unit = PLAIN

    @property
    def equality(self) -> bool:
        """True where the condition is `=`."""
        return self.lower is not None and self.lower is self.upper


@dataclass(frozen=True, slots=True)
class Place:
    """A named place of the independent variable: an end, or a place between them that some condition names.

    `tree` is a number or a formula of constants (a fixed place), or the `Name` of a parameter (a free place).
    """

    tree: Node
    label: str


@dataclass(frozen=True, slots=True)
class Arc:
    """A stretch between two places (by their index) with laws of its own; what holds everywhere is among them.

    `unknowns` are those that occur on it, with their orders there.  `integrals` hold integrals over this arc only.
    """

    name: str
    first: int
    last: int
    unknowns: tuple[Unknown, ...]
    integrand: Node | None = None
    where: tuple[tuple[str, Node], ...] = ()
    dynamics: tuple[Equation, ...] = ()
    constraints: tuple[Condition, ...] = ()
    integrals: tuple[Condition, ...] = ()


@dataclass(frozen=True, slots=True)
class Jump:
    """A derivative of an unknown that need not be continuous at a junction (a place by its index)."""

    name: str
    order: int
    place: int


@dataclass(frozen=True, slots=True)
class Observed:
    """A value (SI) that was measured at a place, which is one of `Problem.places`; sigma is 1 where it is not known.

    Of a problem of arcs `side` says which of those that meet at the place it is of: "-" the one before, "+" the next.
    """

    place: Node
    value: float
    sigma: float = 1.0
    side: str = ""


@dataclass(frozen=True, slots=True)
class Observation:
    """What was measured along the curve: the squares of the misfits, over sigma, join the endpoint term.

    `body` is what was measured, a formula of what runs along the curve; `weighted` says that the sigmas are known.
    `arc` is the name of the arc that all of it is of, where the user gave one.
    """

    body: Node
    points: tuple[Observed, ...]
    weighted: bool
    label: str
    pointer: str
    unit: Unit = PLAIN
    arc: str = ""


@dataclass(frozen=True, slots=True)
class Held:
    """A free quantity that stays on its lower (side -1) or upper (side 1) limit along the stretch after a place.

    Or a pointwise constraint: then `name` is its label, `order` its rank among all that holds at every point.
    """

    stretch: int
    name: str
    order: int
    side: int


@dataclass(frozen=True, slots=True)
class Touch:
    """A state that touches its lower (side -1) or upper (side 1) limit at an inner place, with its slope zero there."""

    place: str
    name: str
    order: int
    side: int


@dataclass(frozen=True, slots=True)
class Calm:
    """A control that is free but acts linearly along a stretch (a singular arc): half the degree of the mesh is enough.

    With as many coefficients as points it could ring between them without the discrete problem noticing.
    """

    stretch: int
    name: str
    order: int


@dataclass(frozen=True, slots=True)
class Variation:
    """How a start differs from the default guess.

    `modes` has, by unknown, the amplitudes of the waves that are added, the longest wave first, relative to the
    unknown's size; `parameters` has shares of the range of a parameter (0 to 1).
    """

    label: str = "default guess"
    modes: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    parameters: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Options:
    """How far to go.  `tolerance` is relative, for the curve and for the value; `points` limits the mesh."""

    tolerance: float = 1e-6
    time_limit: float = 60.0
    starts: int = 1
    points: int = 20_000


@dataclass(frozen=True, slots=True)
class Sweep:
    """The increasing values (SI) of one constant for which the problem is solved too."""

    constant: str
    values: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Continuation:
    """A constant in which the branch of solutions is followed, and the value (SI) towards which."""

    constant: str
    to: float


@dataclass(frozen=True, slots=True)
class Problem:
    """Everything that the solver has to know.

    With `arcs`, which follow each other from the first place to the last, the laws along the curve are theirs:
    `integrand`, `where`, `dynamics` and `constraints` are empty then, `unknowns` has every name with its highest order,
    and integrals in `integrals` and `endpoint` run over all arcs.
    """

    independent: str
    places: tuple[Place, ...]  # in order; the first is `from`, the last is `to`
    unknowns: tuple[Unknown, ...]
    seek: Seek = Seek.MINIMUM
    integrand: Node | None = None
    endpoint: Node | None = None  # without the squares of the observations (see `solvers.observations.terminal`)
    constants: tuple[Constant, ...] = ()
    parameters: tuple[Parameter, ...] = ()
    tables: tuple[Table, ...] = ()  # the trees hold those that they use
    where: tuple[tuple[str, Node], ...] = ()  # in an order in which each uses only earlier ones
    dynamics: tuple[Equation, ...] = ()
    endpoints: tuple[Condition, ...] = ()  # bodies use `At`, parameters, constants
    constraints: tuple[Condition, ...] = ()  # pointwise: hold everywhere
    integrals: tuple[Condition, ...] = ()  # bodies hold `Call("integral", ...)`, may hold `At` and parameters too
    arcs: tuple[Arc, ...] = ()
    jumps: frozenset[Jump] = frozenset()
    observations: tuple[Observation, ...] = ()
    held: tuple[Held, ...] = ()  # found by the solver, never given by the user
    implied: tuple[Held, ...] = ()  # the same: states that rest on a limit because of what is held there
    touches: tuple[Touch, ...] = ()  # the same
    calm: tuple[Calm, ...] = ()  # the same
    widths: tuple[tuple[Node, float], ...] = ()  # the same: of the rounding of each kink (SI)
    start: Variation = field(default_factory=Variation)  # the same
    continuation: Continuation | None = None
    sweeps: tuple[Sweep, ...] = ()  # none, one, or two whose values make a grid
    options: Options = field(default_factory=Options)
    independent_unit: Unit = PLAIN
    value_unit: Unit = PLAIN

    @property
    def conditions(self) -> tuple[Condition, ...]:
        """All conditions that the user stated, those of the arcs included."""
        of_arcs = (condition for arc in self.arcs for condition in (*arc.constraints, *arc.integrals))
        return (*self.endpoints, *self.constraints, *self.integrals, *of_arcs)

    def along(self, arc: Arc) -> Problem:
        """The laws of one arc as a problem of their own, without what holds at places."""
        return replace(
            self,
            places=self.places[arc.first : arc.last + 1],
            unknowns=arc.unknowns,
            integrand=arc.integrand,
            endpoint=None,
            where=arc.where,
            dynamics=arc.dynamics,
            endpoints=(),
            constraints=arc.constraints,
            integrals=arc.integrals,
            arcs=(),
            jumps=frozenset(),
        )
