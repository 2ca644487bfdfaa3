"""The records of the catalogue: a case with its published value, and what a result may be called."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from pathlib import Path

from solvers.solution import Verdict

PROBLEMS = Path(__file__).parent / "problems"

TAGS = frozenset(
    {
        "smooth",
        "singular endpoint",
        "corner",
        "obstacle",
        "isoperimetric",
        "eigenvalue",
        "higher order",
        "free end",
        "moving end",
        "free time",
        "way points",
        "bang-bang",
        "singular arc",
        "chattering",
        "state constraint",
        "several optima",
        "no minimiser",
        "boundary layer",
        "scaling",
        "units",
        "parameter fit",
        "boundary value problem",
        "guess given",
        "arcs",
    }
)


class Sort(Enum):
    """What is true of a case, with the verdicts that say so."""

    MINIMUM = frozenset({Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM})
    MAXIMUM = frozenset({Verdict.GLOBAL_MAXIMUM, Verdict.LOCAL_MAXIMUM})
    STATIONARY = frozenset({Verdict.STATIONARY, Verdict.NOT_A_MINIMUM, Verdict.NOT_A_MAXIMUM})
    SOLUTION = frozenset({Verdict.STATIONARY, Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM})  # nothing to choose
    UNBOUNDED = frozenset({Verdict.NO_OPTIMUM, Verdict.NOT_A_MINIMUM})
    NOT_ATTAINED = frozenset({Verdict.NO_OPTIMUM, Verdict.NOT_A_MINIMUM, Verdict.NOT_VERIFIED, Verdict.BEST_FOUND})
    SUPREMUM = frozenset({Verdict.NO_OPTIMUM, Verdict.NOT_A_MAXIMUM, Verdict.NOT_VERIFIED, Verdict.BEST_FOUND})
    GAP = frozenset({Verdict.NO_OPTIMUM, Verdict.NOT_VERIFIED})  # curves of bounded slope stay away from the infimum

    @property
    def attained(self) -> bool:
        """True where some curve of bounded slope comes as near to the published value as one likes, and one has it."""
        return self not in (Sort.UNBOUNDED, Sort.NOT_ATTAINED, Sort.SUPREMUM, Sort.GAP)


@dataclass(frozen=True, slots=True)
class Figure:
    """Another published figure: a parameter, or an unknown (with its primes) at a place; "end" is the last place."""

    subject: str
    value: float
    tolerance: float  # absolute
    place: float | str | None = None


@dataclass(frozen=True, slots=True)
class Case:
    """One problem document with its published value, in the document's units.

    `tolerance` is relative, absolute where the value is 0.  `known_to` is the absolute uncertainty of the published
    value itself (0: closed form).  Where no curve attains it, the value is the infimum or supremum, or None where there
    is none.
    """

    id: str
    sort: Sort
    value: float | None
    tolerance: float
    source: str
    tags: tuple[str, ...]
    known_to: float = 0.0
    figures: tuple[Figure, ...] = ()

    @property
    def document(self) -> Path:
        """The problem document."""
        return PROBLEMS / f"{self.id}.json"

    @property
    def allowed(self) -> float:
        """The largest difference from the published value that counts as reached."""
        assert self.value is not None
        return self.tolerance * (abs(self.value) or 1.0)


@dataclass(frozen=True, slots=True)
class Unsaid:
    """A published problem that is not in the catalogue, and why."""

    id: str
    title: str
    reason: str


def at(subject: str, place: float | str, value: float, tolerance: float = 1e-5) -> Figure:
    """The value of an unknown at a place."""
    return Figure(subject, value, tolerance, place)


def parameter(subject: str, value: float, tolerance: float = 1e-5) -> Figure:
    """The value of a parameter."""
    return Figure(subject, value, tolerance)
