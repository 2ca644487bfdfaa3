"""Which part of the problem document each row and field of the composer shows.

A field is named `section.row.column` in sections of rows and `section.column` in the others; a title is just `title`.
Adding a column here is all that is needed: the reader, the filler and the template go by this table.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum


class Shape(Enum):
    """How a member of the document is laid out."""

    MAP = "map"  # name -> entry, one row each; the first field of a row is the name
    LIST = "list"  # formulas, one row each
    OBJECTS = "objects"  # a list of objects, one row each
    RECORD = "record"  # a fixed set of fields


class Kind(Enum):
    """What the text of a field stands for."""

    TEXT = "text"  # always a string
    FORMULA = "formula"  # a string, shown as mathematics beside the field
    VALUE = "value"  # a number where it reads as one, else a string such as "3 m +/- 0.1 m"
    GUESS = "guess"  # a number, a formula, or points as JSON
    LINES = "lines"  # formulas, one on each line
    ENTRIES = "entries"  # name = formula, one on each line
    CHOICE = "choice"  # one of `Column.choices`; where "" is among them the member may be left out
    ARGUMENTS = "arguments"  # names with units: `r in mm, z in mm`
    POINTS = "points"  # rows of numbers, one a line, as they are pasted


@dataclass(frozen=True, slots=True)
class Column:
    """One field.  `member` is the path of its value within the entry; "" is the entry itself."""

    key: str
    member: str
    label: str
    kind: Kind = Kind.TEXT
    example: str = ""
    width: str = "wide"  # "narrow", "medium", "wide" or "full": a class of the style sheet
    choices: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Section:
    """One member of the document as a block of the form."""

    name: str
    shape: Shape
    heading: str
    explanation: str
    columns: tuple[Column, ...]
    row: str = ""  # what one row is called on its buttons
    folded: bool = False  # shown closed while it is empty


HEAD = (
    Column("title", "title", "Title", example="Crucible across the hall"),
    Column("notes", "notes", "Notes", example="What is built, and why"),
)
"""Text members of the document itself."""

_UNIT = Column("unit", "unit", "Unit", example="m/s", width="narrow")
_BOUNDS = (
    Column("lower", "within/0", "Not below", Kind.VALUE, width="narrow"),
    Column("upper", "within/1", "Not above", Kind.VALUE, width="narrow"),
)
_ABOUT = Column("about", "about", "What it is", example="trolley position")

SECTIONS = (
    Section(
        "independent",
        Shape.RECORD,
        "Along what",
        "The independent variable and its ends. An end that is to be found is the name of a parameter.",
        (
            Column("name", "name", "Name", example="t", width="narrow"),
            Column("unit", "unit", "Unit", example="s", width="narrow"),
            Column("from", "from", "From", Kind.VALUE, example="0", width="narrow"),
            Column("to", "to", "To", Kind.VALUE, example="T", width="narrow"),
        ),
    ),
    Section(
        "unknowns",
        Shape.MAP,
        "Unknowns",
        "The functions to be found, states and controls alike. Bounds hold everywhere.",
        (_UNIT, *_BOUNDS, _ABOUT),
        row="unknown",
    ),
    Section(
        "parameters",
        Shape.MAP,
        "Parameters",
        "Unknown numbers: a free final time, a free length, a design size.",
        (_UNIT, *_BOUNDS, _ABOUT),
        row="parameter",
        folded=True,
    ),
    Section(
        "constants",
        Shape.MAP,
        "Constants",
        "Given numbers, with unit and, if known, tolerance: 0.80 m +/- 0.01 m.",
        (Column("value", "", "Value", Kind.VALUE, example="9.80665 m/s^2"),),
        row="constant",
        folded=True,
    ),
    Section(
        "tables",
        Shape.MAP,
        "Measured tables",
        "Functions given by points, used as n(r) or n(x, y) in formulas. Paste two columns, place and value; for two "
        "arguments a grid, whose first line has the places of the second and whose other lines begin with one of the "
        "first.",
        (
            Column("of", "of", "Of", Kind.ARGUMENTS, example="r in mm", width="medium"),
            Column("unit", "unit", "Unit of the values", example="kJ/kg", width="medium"),
            Column(
                "between",
                "between",
                "Between the points",
                Kind.CHOICE,
                "usual: smooth",
                "medium",
                ("", "smooth", "monotone", "linear"),
            ),
            Column(
                "outside",
                "outside",
                "Beyond them",
                Kind.CHOICE,
                "usual: refuse",
                "medium",
                ("", "refuse", "hold", "extend"),
            ),
            Column("about", "about", "What it is", example="refractive index", width="medium"),
            Column("points", "points", "Points", Kind.POINTS, "0  1.62\n1  1.61\n2  1.57", "full"),
        ),
        row="table",
        folded=True,
    ),
    Section(
        "where",
        Shape.MAP,
        "Where",
        "Abbreviations that every formula may use.",
        (Column("formula", "", "Stands for", Kind.FORMULA, example="1/2*rho*v^2"),),
        row="abbreviation",
        folded=True,
    ),
    Section(
        "dynamics",
        Shape.LIST,
        "Dynamics",
        "Differential equations that hold along the curve, of any order. A pure shape problem has none.",
        (Column("formula", "", "Equation", Kind.FORMULA, example="x'' = a"),),
        row="equation",
        folded=True,
    ),
    Section(
        "functional",
        Shape.RECORD,
        "What is sought",
        "The integral of the integrand plus the endpoint term; one of them is enough.",
        (
            Column("seek", "seek", "Seek", Kind.CHOICE, width="narrow", choices=("minimum", "maximum", "stationary")),
            Column("integrand", "integrand", "Integrand", Kind.FORMULA, example="y*sqrt(1 + y'^2)"),
            Column("endpoint", "endpoint", "Endpoint term", Kind.FORMULA, example="T"),
        ),
    ),
    Section(
        "endpoints",
        Shape.LIST,
        "Endpoints",
        "Relations between values at the ends, or at places between. What nothing fixes is free.",
        (Column("formula", "", "Relation", Kind.FORMULA, example="y(0) = 1"),),
        row="relation",
    ),
    Section(
        "constraints",
        Shape.LIST,
        "Constraints",
        "What holds everywhere, on any derivative, or in the integral.",
        (Column("formula", "", "Relation", Kind.FORMULA, example="-2 <= x'' <= 2"),),
        row="relation",
        folded=True,
    ),
    Section(
        "arcs",
        Shape.OBJECTS,
        "Arcs",
        "Stretches with laws of their own, one after the other from the first end to the last; all that stands above "
        "holds on each of them. One formula to a line. Where two meet, what has dynamics is continuous, unless the "
        "endpoints name the value after: m(t1+) = m(t1-) - shell.",
        (
            Column("name", "name", "Name", example="burn", width="medium"),
            Column("from", "from", "From", Kind.VALUE, example="0", width="narrow"),
            Column("to", "to", "To", Kind.VALUE, example="t1", width="narrow"),
            Column("integrand", "integrand", "Integrand", Kind.FORMULA, example="n*sqrt(1 + y'^2)"),
            Column("where", "where", "Where", Kind.ENTRIES, example="F = 300*u"),
            Column("dynamics", "dynamics", "Dynamics", Kind.LINES, example="v' = F/m - g"),
            Column("constraints", "constraints", "Constraints", Kind.LINES, example="0 <= u <= 1"),
        ),
        row="arc",
        folded=True,
    ),
    Section(
        "observations",
        Shape.OBJECTS,
        "Observations",
        "Measured values along the curve: the squares of the misfits join what is minimised, so that unknowns and "
        "parameters are fitted to them. One line for each point: place, value and, if known, its own sigma.",
        (
            Column("of", "of", "Measured", Kind.FORMULA, example="y"),
            _UNIT,
            Column("sigma", "sigma", "Sigma", Kind.VALUE, example="0.2", width="narrow"),
            Column("points", "points", "Points", Kind.POINTS, example="0.5 1.21"),
            Column("arc", "arc", "On the arc", width="medium"),
            _ABOUT,
        ),
        row="list",
        folded=True,
    ),
    Section(
        "guess",
        Shape.MAP,
        "Guess",
        "Where to start from: a formula or points [[0, 1], [2, 3]] for an unknown, a number for a parameter. "
        "Ordinary problems need none.",
        (Column("value", "", "Guess", Kind.GUESS, example="1 + t/2"),),
        row="guess",
        folded=True,
    ),
    Section(
        "sweep",
        Shape.MAP,
        "Sweep",
        "Constants for whose values the problem is solved too: so many from one value to another, or [1, 1.5, 3]. "
        "Two constants make a grid.",
        (
            Column("from", "from", "From", Kind.VALUE, example="1", width="narrow"),
            Column("to", "to", "To", Kind.VALUE, example="4", width="narrow"),
            Column("count", "count", "How many", Kind.VALUE, example="31", width="narrow"),
            Column("values", "values", "or these values", Kind.VALUE, example="[1, 1.5, 3]"),
        ),
        row="swept constant",
        folded=True,
    ),
    Section(
        "continuation",
        Shape.RECORD,
        "Continuation",
        "A constant in which the solution is followed from its own value towards another one, and back behind a fold.",
        (
            Column("constant", "constant", "Constant", example="d", width="narrow"),
            Column("to", "to", "To", Kind.VALUE, example="120", width="narrow"),
        ),
        folded=True,
    ),
    Section(
        "solve",
        Shape.RECORD,
        "How far to go",
        "Left empty, each has its default: 10⁻⁶, 60 s, one start.",
        (
            Column("tolerance", "tolerance", "Relative tolerance", Kind.VALUE, example="1e-6", width="narrow"),
            Column("time_limit", "time_limit", "Time limit in s", Kind.VALUE, example="60", width="narrow"),
            Column("starts", "starts", "Number of starts", Kind.VALUE, example="1", width="narrow"),
            Column("points", "points", "Most points", Kind.VALUE, example="20000", width="narrow"),
        ),
        folded=True,
    ),
)
"""All blocks of the form, in the order in which a problem is thought out."""

ORDER = (
    "format", "title", "notes", "independent", "constants", "parameters", "unknowns", "tables", "where", "dynamics",
    "functional", "endpoints", "constraints", "arcs", "observations", "guess", "sweep", "continuation", "solve",
)  # fmt: skip
"""The order of the members in a document that the form writes."""


def column_of(field: str) -> Column:
    """The column that a field belongs to; that of the title for what is none."""
    name, key = field.partition(".")[0], field.rpartition(".")[2]
    columns = (column for section in SECTIONS if section.name == name for column in section.columns)
    return next((column for column in columns if column.key == key), HEAD[0])
