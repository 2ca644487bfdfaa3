"""What a run leaves behind."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from service.schemas.fits import FitDocument
from service.schemas.parts import Amount, Part, Pieces, RunState, Verdict, Where
from service.schemas.reading import ReadingDocument


class CheckResult(Part):
    """One independent test of the result."""

    name: str
    status: Literal["passed", "failed", "not applicable"]
    figure: float | None = Field(description="what was measured, relative")
    threshold: float | None = Field(description="what the figure must not exceed")
    where: Where | None = Field(description="where it is worst")
    sentence: str


class ArcPieces(Part):
    """Functions on one arc as piecewise polynomials."""

    name: str
    basis: Literal["legendre"]
    breaks: list[float | None] = Field(description="ends of the n intervals, n + 1 increasing places")
    functions: dict[str, Pieces] = Field(
        description="name with primes -> for each interval the coefficients of the Legendre polynomials P0, P1, ... "
        "in the local variable that runs from -1 to 1 over the interval"
    )


class Independent(Part):
    """The independent variable."""

    name: str
    unit: str


class CurveDocument(Part):
    """The exact curve."""

    independent: Independent
    error: float | None = Field(description="estimate of the relative error of the curve")
    arcs: list[ArcPieces]
    units: dict[str, str] = Field(description="unit of each function")


class Costates(Part):
    """Costates and multipliers of pointwise conditions along the curve."""

    arcs: list[ArcPieces]
    units: dict[str, str]


class PriceOfCondition(Part):
    """Change of the optimal value per unit by which the limit of a condition is raised."""

    condition: str
    pointer: str
    price: float | None
    unit: str


class StretchFound(Part):
    """What a control does from switch to switch, or where a state or a constraint lies on a limit."""

    of: str = Field(description="an unknown with its primes, or the constraint")
    arc: str = Field(description="the arc; empty where one set of laws holds from end to end")
    start: float | None = Field(alias="from", description="in the unit of the independent variable")
    start_error: float | None = Field(
        default=None, alias="from_error", description="how far that may be off; null where the place is given"
    )
    end: float | None = Field(alias="to")
    end_error: float | None = Field(default=None, alias="to_error")
    course: Literal[
        "at its lower limit", "at its upper limit", "singular", "inside its limits", "switching ever faster"
    ]


class SlopeOfConstant(Part):
    """Change of the optimal value per unit by which a constant is raised."""

    constant: str
    slope: float | None = Field(description="null where the value has no slope with this constant")
    unit: str
    tolerance: float | None = Field(description="the constant's standard deviation, in its unit")
    contribution: float | None = Field(description="how far one standard deviation moves the value, in its unit")


class ChangeOfCurve(Part):
    """What one standard deviation of a constant does to the curve at fixed places, to first order; units as there."""

    constant: str
    arcs: list[ArcPieces]


class Band(Part):
    """What the tolerances of the constants leave open: one standard deviation, to first order."""

    value: float | None = Field(description="standard deviation of the value, in its unit")
    curve: list[ChangeOfCurve] = Field(description="one for each tolerance; their squares add up")


class Multipliers(Part):
    """What the conditions cost."""

    costates: Costates
    prices: list[PriceOfCondition]


class SweptConstant(Part):
    """A constant and the values that were put in, in its unit."""

    name: str
    unit: str
    values: list[float | None]


class PointOfSweep(Part):
    """What came out for one value of each swept constant."""

    at: list[float | None] = Field(description="the values, in the order of `constants`")
    verdict: Verdict | None
    value: float | None
    value_error: float | None
    parameters: dict[str, float | None]
    failed: list[str] = Field(description="names of the checks that failed")
    note: str = Field(description="why there is no full result; empty where there is one")


class CurveOfSweep(Part):
    """The curve of one point."""

    point: int = Field(description="index into `points`")
    arcs: list[ArcPieces]


class SweepDocument(Part):
    """The same problem for many values of one or two constants."""

    constants: list[SweptConstant]
    parameters: dict[str, str] = Field(description="unit of each parameter")
    points: list[PointOfSweep] = Field(description="row by row: the values of the last constant run fastest")
    curves: list[CurveOfSweep] = Field(description="of some points; units as in `curve`")


class PointOfBranch(Part):
    """A stationary curve for one value of the constant."""

    at: float | None
    value: float | None
    leg: int = Field(description="how many folds lie before it")


class ContinuationDocument(Part):
    """A branch of stationary curves followed in one constant, around folds."""

    constant: str
    unit: str
    points: list[PointOfBranch]
    folds: list[PointOfBranch] = Field(description="where the constant turns back: two solutions meet and vanish")
    end: str = Field(description="why the branch ends, in a sentence")
    error: float | None = Field(description="largest local error of the mesh along the branch, relative")


class FindingOfDiagnosis(Part):
    """One condition or sub-expression that stands in the way."""

    condition: str
    pointer: str
    amount: float | None
    unit: str
    where: Where | None
    note: str


class DiagnosisDocument(Part):
    """Why there is no full result."""

    reason: str
    sentence: str
    findings: list[FindingOfDiagnosis]


class UndeterminedFound(Part):
    """Something that is free and that nothing determines: one choice of many is shown."""

    name: str = Field(description="an unknown or a parameter")
    pointer: str = Field(description="its place in the document")
    where: Where | None = Field(description="where it is freest; null where that is all along")
    sentence: str


class MeshOfHistory(Part):
    """One mesh of the refinement."""

    intervals: int
    points: int
    lowest_degree: int
    highest_degree: int
    value: float | None
    error: float | None
    iterations: int
    seconds: float | None


class Provenance(Part):
    """What is needed to obtain the same numbers again."""

    versions: dict[str, str]
    options: dict[str, float | None]
    times: dict[str, float | None] = Field(description="seconds per stage")
    iterations: int
    meshes: list[MeshOfHistory]


class ExtremalFound(Part):
    """One of the distinct curves that several starts led to."""

    verdict: Verdict | None
    value: float | None
    value_error: float | None
    parameters: dict[str, Amount]
    starts: list[str] = Field(description="the starts that led there")
    checks: list[CheckResult]
    curve: CurveDocument | None


class ResultDocument(Part):
    """What a run leaves behind; all numbers in the user's units, null where there is no finite number."""

    format: Literal[1]
    id: str | None = Field(description="the run's; null for a solve without a server")
    state: RunState
    problem: dict[str, Any] = Field(description="the problem document as it was sent")
    problem_hash: str = Field(pattern="^sha256:[0-9a-f]{64}$")
    verdict: Verdict | None
    value: float | None
    value_error: float | None = Field(description="bound on the error of the value, in its unit")
    value_unit: str
    parameters: dict[str, Amount]
    checks: list[CheckResult]
    curve: CurveDocument | None
    multipliers: Multipliers
    stretches: list[StretchFound] = Field(
        default=[], description="where switches were found and made unknowns: what lies between them"
    )
    observations: FitDocument | None = Field(default=None, description="only where something was observed")
    extremals: list[ExtremalFound] = Field(
        default=[], description="what several starts led to, the best (the result itself) first; empty for one start"
    )
    slopes: list[SlopeOfConstant] = Field(description="empty where no optimum was found")
    band: Band | None = Field(description="null where no constant has a tolerance")
    continuation: ContinuationDocument | None = Field(description="null where none was asked for")
    sweep: SweepDocument | None = Field(description="null where no constant is swept")
    diagnosis: DiagnosisDocument | None
    undetermined: list[UndeterminedFound] = Field(default=[], description="what is free that nothing determines")
    notes: list[str]
    reading: ReadingDocument
    provenance: Provenance
