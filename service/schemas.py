"""The shapes of all answers, as models: the reference page, OpenAPI and the JSON Schemas are made from them.

Answers are not built through these models (a result may hold a million numbers); tests hold the answers to them.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field
from pydantic.json_schema import GenerateJsonSchema

DIALECT = "https://json-schema.org/draft/2020-12/schema"

RunState = Literal["waiting", "solving", "finished", "failed", "stopped"]
Verdict = Literal[
    "global minimum",
    "local minimum",
    "global maximum",
    "local maximum",
    "stationary",
    "not a minimum",
    "not a maximum",
    "not verified",
    "best found",
    "infeasible",
    "no optimum",
]
Pieces = list[list[float | None]]


class Part(BaseModel):
    """A part of an answer; further members may come with later versions."""

    model_config = ConfigDict(extra="allow")


class Where(Part):
    """A place on the independent variable and what it concerns."""

    place: float | None = Field(description="in the unit of the independent variable")
    subject: str = Field(description="the unknown or condition concerned; empty where there is none")


class Amount(Part):
    """A number with its unit."""

    value: float | None
    unit: str


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


class IndependentRead(Part):
    """The independent variable and its ends, as formulas."""

    name: str
    unit: str
    start: str = Field(alias="from")
    end: str = Field(alias="to")


class UnknownRead(Part):
    """What became of an unknown function."""

    name: str
    order: int = Field(description="highest derivative anywhere")
    unit: str
    role: Literal["state", "control"]
    free: bool = Field(description="nothing gives its highest derivative: it is chosen")
    sentence: str


class ConstantRead(Part):
    """A constant in its own unit."""

    name: str
    value: float
    unit: str
    tolerance: float | None


class ArcRead(Part):
    """An arc, and what happens where the next one begins."""

    name: str
    start: str = Field(alias="from")
    end: str = Field(alias="to")
    sentence: str


class ParameterRead(Part):
    """An unknown number."""

    name: str
    unit: str


class FunctionalRead(Part):
    """What is sought."""

    sentence: str
    mathml: str
    unit: str


class RelationRead(Part):
    """One relation as mathematics."""

    pointer: str
    kind: Literal["pointwise", "integral", "endpoint", "dynamics", "abbreviation", "parameter"]
    mathml: str
    unit: str


class NecessaryCondition(Part):
    """One condition that the optimum satisfies."""

    kind: Literal[
        "Lagrangian",
        "Hamiltonian",
        "Euler-Lagrange",
        "costate",
        "stationarity",
        "natural boundary",
        "corner",
        "first integral",
    ]
    subject: str = Field(alias="for")
    mathml: str
    text: str


class Freedom(Part):
    """How much there is to choose, and how much is fixed."""

    unknown_functions: int
    conditions: int
    sentence: str


class TableRead(Part):
    """A measured function."""

    name: str
    of: list[ParameterRead] = Field(description="its arguments")
    unit: str
    sentence: str = Field(description="how many points there are, and what holds between and beyond them")


class ReadingDocument(Part):
    """How the problem was understood."""

    independent: IndependentRead
    unknowns: list[UnknownRead]
    parameters: list[ParameterRead]
    constants: list[ConstantRead]
    tables: list[TableRead]
    arcs: list[ArcRead] = Field(description="empty where one set of laws holds from end to end")
    functional: FunctionalRead
    relations: list[RelationRead]
    necessary: list[NecessaryCondition] | None = Field(default=None, description="only where it was asked for")
    freedom: Freedom
    notes: list[str]


class ExtremalFound(Part):
    """One of the distinct curves that several starts led to."""

    verdict: Verdict | None
    value: float | None
    value_error: float | None
    parameters: dict[str, Amount]
    starts: list[str] = Field(description="the starts that led there")
    checks: list[CheckResult]
    curve: CurveDocument | None


class FittedParameter(Part):
    """A parameter found from observations, with its standard deviation."""

    value: float | None
    sigma: float | None = Field(description="one standard deviation; null where the data leave something open")
    unit: str


class FittedObservations(Part):
    """One list of observations and what was fitted to it; all lists have one entry for each point."""

    of: str
    arc: str = Field("", description="the arc that all of it is of, where the document names one")
    pointer: str
    unit: str
    place: list[float | None]
    observed: list[float | None]
    fitted: list[float | None]
    residual: list[float | None] = Field(description="observed less fitted")
    sigma: list[float | None] | None = Field(description="as given; null where none were")
    normalised: list[float | None] | None = Field(description="residual over sigma, or over the spread")
    fitted_sigma: list[float | None] | None = Field(description="one standard deviation of the fitted value")


class FitDocument(Part):
    """A fit by least squares."""

    points: int
    sigmas_known: bool = Field(description="whether the observations gave their standard deviations")
    sum_of_squares: float | None = Field(description="of the residuals, over sigma where that is known")
    degrees_of_freedom: float | None = Field(description="points less the numbers that were determined from them")
    spread: float | None = Field(description="root of sum of squares over degrees of freedom")
    unit: str = Field(description="of the spread; the sum of squares has its square")
    parameters: dict[str, FittedParameter]
    covariance: list[list[float | None]] | None = Field(description="of the parameters, in their order and units")
    lists: list[FittedObservations]


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


class Links(Part):
    """Addresses that belong to a run, relative to this server."""

    self: str
    page: str
    problem: str
    events: str
    result: str | None = None
    table: str | None = None
    cancel: str | None = None


class Run(Part):
    """One problem being solved, or solved."""

    id: str
    state: RunState
    title: str
    problem_hash: str
    created: str = Field(description="RFC 3339")
    finished: str | None
    seconds: float | None = Field(description="of work in the worker")
    verdict: Verdict | None
    value: float | None
    value_error: float | None
    value_unit: str | None
    failure: str | None = Field(description="why the run failed, where it did")
    links: Links


class RunPage(Part):
    """Runs, newest first; `next` is the address of the older ones."""

    runs: list[Run]
    next: str | None


class Complaint(Part):
    """One thing that is wrong, where, and what would be right."""

    pointer: str | None = Field(default=None, description="JSON pointer (RFC 6901) into the body that was sent")
    span: list[int] | None = Field(
        default=None, description="first character of the formula, and the one after the last"
    )
    code: str
    message: str
    hint: str | None = None


class ProblemDetails(Part):
    """RFC 9457."""

    type: str
    title: str
    status: int
    detail: str
    stage: str | None = None
    complaints: list[Complaint] | None = None


class Readiness(Part):
    """Whether runs can be accepted and solved."""

    ready: bool
    database: bool = Field(description="can be written")
    workers: int = Field(description="how many are up")


class _Dialect(GenerateJsonSchema):
    schema_dialect = DIALECT


def json_schema(model: type[BaseModel], address: str) -> dict[str, Any]:
    """The model as a JSON Schema document of its own (2020-12)."""
    schema = model.model_json_schema(schema_generator=_Dialect)
    return {"$schema": DIALECT, "$id": address, **schema}
