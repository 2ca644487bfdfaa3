"""What a solve leaves behind: the verdict, the value with its bound, the curve, the evidence.  All in SI units."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from enum import Enum

import numpy as np

from solvers.curve import Array, Curve
from solvers.undetermined import Undetermined
from solvers.units import PLAIN, Unit


class Verdict(Enum):
    """What a result may be called, and nothing more than its checks support."""

    GLOBAL_MINIMUM = "global minimum"
    LOCAL_MINIMUM = "local minimum"
    GLOBAL_MAXIMUM = "global maximum"
    LOCAL_MAXIMUM = "local maximum"
    STATIONARY = "stationary"
    NOT_A_MINIMUM = "not a minimum"
    NOT_A_MAXIMUM = "not a maximum"
    NOT_VERIFIED = "not verified"
    BEST_FOUND = "best found"
    INFEASIBLE = "infeasible"
    NO_OPTIMUM = "no optimum"


class Status(Enum):
    """How a check ended."""

    PASSED = "passed"
    FAILED = "failed"
    NOT_APPLICABLE = "not applicable"


@dataclass(frozen=True, slots=True)
class Check:
    """One independent test of a result.

    `figure` is what was measured and `threshold` what it must not exceed (both relative, so without unit);
    `place` is where on the independent variable it is worst, `subject` the unknown or condition that it is about.
    """

    name: str
    status: Status
    sentence: str
    figure: float | None = None
    threshold: float | None = None
    place: float | None = None
    subject: str = ""


@dataclass(frozen=True, slots=True)
class Price:
    """Change of the optimal value per unit by which a condition's limit is raised."""

    label: str
    pointer: str
    price: float


@dataclass(frozen=True, slots=True)
class Slope:
    """Change of the optimal value per unit of a constant (NaN where there is none), and the constant's tolerance."""

    constant: str
    slope: float
    tolerance: float | None = None

    @property
    def contribution(self) -> float | None:
        """How far one standard deviation of the constant moves the value; None where it has no tolerance."""
        return None if self.tolerance is None else abs(self.slope) * self.tolerance


@dataclass(frozen=True, slots=True)
class ArcCurve:
    """The curve and the costates of one of several arcs."""

    name: str
    curve: Curve
    costates: Curve | None = None


@dataclass(frozen=True, slots=True)
class Change:
    """What one standard deviation of a constant does, to first order: to the curve at fixed places, to parameters.

    Of a problem of arcs `arcs` has the curves instead.
    """

    constant: str
    curve: Curve | None
    parameters: Mapping[str, float] = field(default_factory=dict)
    arcs: tuple[ArcCurve, ...] = ()


@dataclass(frozen=True, slots=True)
class Finding:
    """One line of a diagnosis: which condition or sub-expression, by how much, where."""

    label: str
    pointer: str = ""
    amount: float | None = None
    place: float | None = None
    note: str = ""


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """Why there is no (full) result: `reason` is a stable word, `sentence` is for people."""

    reason: str  # the value of an `End` that is neither converged nor settled
    sentence: str
    findings: tuple[Finding, ...] = ()


@dataclass(frozen=True, slots=True)
class MeshStep:
    """One mesh of the refinement: its size and what it gave.  `error` is the relative estimate."""

    intervals: int
    points: int
    lowest_degree: int
    highest_degree: int
    value: float | None
    error: float | None
    iterations: int
    seconds: float


@dataclass(frozen=True, slots=True)
class Progress:
    """One sign of life.  `kind` is "iteration", "mesh" or "point" (of a sweep); what does not apply is None.

    `value` is the functional in SI, `infeasibility` the largest relative violation, `breaks` the mesh (for "mesh"),
    `error` the relative error estimate of the mesh just finished.
    """

    kind: str
    mesh: int
    iteration: int
    intervals: int
    points: int
    value: float | None = None
    infeasibility: float | None = None
    error: float | None = None
    breaks: tuple[float, ...] | None = None
    start: int = 1  # which of several starts
    point: tuple[int, int] | None = None  # how many points of a sweep are done, and of how many


@dataclass(frozen=True, slots=True)
class SwitchPlace:
    """A place at which controls jump or a limit begins or ceases to bind, and the unknowns that it is about.

    `error` is how far it may be off.
    """

    place: float
    of: frozenset[str]
    error: float


class Course(Enum):
    """What a control, a state or a constraint does along a stretch."""

    LOWER = "at its lower limit"
    UPPER = "at its upper limit"
    SINGULAR = "singular"
    INSIDE = "inside its limits"
    CHATTERING = "switching ever faster"


@dataclass(frozen=True, slots=True)
class Stretch:
    """What is said of `of`, a control or what lies on a limit: an unknown with its primes, or a constraint's label.

    The errors are how far its ends may be off, None where these are given.
    """

    start: float
    end: float
    of: str
    course: Course
    control: bool = False
    arc: str = ""  # of a problem of arcs
    start_error: float | None = None
    end_error: float | None = None


@dataclass(frozen=True, slots=True)
class Fitted:
    """One list of observations and what was fitted to it; all arrays have one entry for each point.

    `sigma` is None where the data have none, `normalised` (residual over sigma, or over the spread) where that is
    nothing, `fitted_sigma` (one sigma of the fitted value) where the data leave something open.
    """

    label: str
    pointer: str
    places: Array
    observed: Array
    fitted: Array
    sigma: Array | None
    normalised: Array | None
    fitted_sigma: Array | None
    unit: Unit = PLAIN
    arc: str = ""  # where the user said which one it is


@dataclass(frozen=True, slots=True)
class Fit:
    """A fit to observations: `squares` is the sum of the squares of the residuals, over sigma where that is known.

    `freedom` is the number of points less that of the numbers determined from them, `spread` the root of squares over
    freedom; both None where the data leave something open, and so is `covariance` (of the parameters `names`).  Those
    that are `held` rest on a limit, and are taken as given there.
    """

    squares: float
    points: int
    freedom: float | None
    spread: float | None
    weighted: bool
    names: tuple[str, ...]
    covariance: Array | None
    observations: tuple[Fitted, ...]
    held: tuple[str, ...] = ()


Watch = Callable[[Progress], bool]
"""Takes each sign of life; True asks the solver to stop at the next iteration."""


@dataclass(frozen=True, slots=True)
class SweepPoint:
    """What came out for one value of each swept constant (`at`, SI, in the order of the sweeps).

    `failed` names the checks that failed; `note` says why there is no value.  The curve is kept at some points only.
    """

    at: tuple[float, ...]
    verdict: Verdict | None = None
    value: float | None = None
    value_error: float | None = None
    parameters: Mapping[str, float] = field(default_factory=dict)
    failed: tuple[str, ...] = ()
    note: str = ""
    curve: Curve | None = None
    arcs: tuple[ArcCurve, ...] = ()  # the curve of a problem of arcs


@dataclass(frozen=True, slots=True)
class BranchPoint:
    """A stationary curve for one value (SI) of the constant; `leg` counts the folds before it."""

    at: float
    value: float
    leg: int


@dataclass(frozen=True, slots=True)
class Branch:
    """What was found along a branch: its points in order, the points of its folds, and why it ends."""

    constant: str
    points: tuple[BranchPoint, ...]
    folds: tuple[BranchPoint, ...]
    end: str
    error: float  # largest local error of the mesh, relative


@dataclass(frozen=True, slots=True)
class Solution:
    """The outcome of `solvers.solve.solve`.

    `curve` holds every unknown with its derivatives up to its order; `costates` has one function per state
    (named like the state) and one per pointwise condition that binds somewhere (named by its label).  A problem of
    arcs has both in `arcs` instead, in their order, without those that turned out to have no length.
    """

    verdict: Verdict | None
    value: float | None = None
    value_error: float | None = None
    parameters: Mapping[str, float] = field(default_factory=dict)
    curve: Curve | None = None
    curve_error: float | None = None  # relative
    costates: Curve | None = None
    arcs: tuple[ArcCurve, ...] = ()
    switches: tuple[SwitchPlace, ...] = ()  # those that were made unknowns of the problem
    stretches: tuple[Stretch, ...] = ()  # what lies between them
    prices: tuple[Price, ...] = ()
    slopes: tuple[Slope, ...] = ()
    changes: tuple[Change, ...] = ()  # of the curve, with the constants that have a tolerance
    branch: Branch | None = None
    sweep: tuple[SweepPoint, ...] = ()  # row by row: the values of the last constant run fastest
    checks: tuple[Check, ...] = ()
    diagnosis: Diagnosis | None = None
    undetermined: tuple[Undetermined, ...] = ()  # one choice of many is shown
    meshes: tuple[MeshStep, ...] = ()
    iterations: int = 0
    times: Mapping[str, float] = field(default_factory=dict)  # seconds per stage
    notes: tuple[str, ...] = ()  # what was done that the reader should know: abs smoothed, free ends found, ...
    fit: Fit | None = None
    extremals: tuple[Extremal, ...] = ()  # what several starts led to, the best (this one) first

    @property
    def value_band(self) -> float | None:
        """One standard deviation of the value, of first order and with independent tolerances; None without any."""
        parts = [slope.contribution for slope in self.slopes if slope.contribution is not None]
        return float(np.sqrt(np.sum(np.square(parts)))) if parts else None


@dataclass(frozen=True, slots=True)
class Extremal:
    """One of the curves that several starts led to, and the starts that led there."""

    solution: Solution
    starts: tuple[str, ...]
