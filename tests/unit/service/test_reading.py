"""How documents are read back: every statement of a reading, on small documents."""

import html
import json
import subprocess
import sys
import xml.etree.ElementTree as ET

import pytest

from service import samples
from service.assemble import assemble
from service.reading import read_back, with_necessary
from service.spec import read

HOSE = {
    "format": 1,
    "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
    "constants": {"w": "6.5 N/m", "l": "4.2 m +/- 2 cm"},
    "unknowns": {"y": {"unit": "m"}},
    "functional": {"seek": "minimum", "integrand": "w*y*sqrt(1 + y'^2)"},
    "endpoints": ["y(0) = 2", "y(3) = 2.4"],
    "constraints": ["integral(sqrt(1 + y'^2)) = l", "y >= 0.9"],
}

CRUCIBLE = {
    "format": 1,
    "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
    "constants": {"g": "9.80665 m/s^2", "l": "0.80 m"},
    "parameters": {"T": {"unit": "s", "within": [0.5, None]}},
    "unknowns": {
        "x": {"unit": "m"},
        "q": {"unit": "deg", "within": [-12, 12]},
        "a": {"unit": "m/s^2", "within": [None, 2]},
    },
    "where": {"pull": "g*sin(q) + a*cos(q)"},
    "dynamics": ["x'' = a", "q''  = -pull/l"],
    "functional": {"seek": "minimum", "endpoint": "T", "integrand": "0.1*log(1 + x^2/l^2)"},
    "endpoints": ["x(0) = 0", "x'(0) = 0", "q(0) = 0", "q'(0) = 0", "x(T) = 3", "q(T) = 0"],
    "constraints": ["-1.5 <= x' <= 1.5"],
}


STAGES = {
    "format": 1,
    "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
    "parameters": {"t1": {"unit": "s"}, "T": {"unit": "s"}},
    "unknowns": {"v": {"unit": "m/s"}, "m": {"unit": "kg"}, "F": {"unit": "N", "within": [0, 9]}},
    "constants": {"shell": "3 kg", "rate": "0.1 kg/s"},
    "functional": {"seek": "maximum", "endpoint": "v(T)"},
    "endpoints": ["v(0) = 0", "m(0) = 20", "m(t1-) = 15", "m(t1+) = m(t1-) - shell", "m(T) = 11"],
    "dynamics": ["m*v' = pull"],
    "arcs": [
        {"name": "burn", "from": 0, "to": "t1", "where": {"pull": "F"}, "dynamics": ["m' = -rate"]},
        {"name": "glide", "from": "t1", "to": "T", "where": {"pull": "0"}, "dynamics": ["m' = -rate/2"],
         "integrand": "v/T", "constraints": ["v >= 0"]},
    ],
}  # fmt: skip


def problem_and_document(source):
    document = read(json.dumps(source).encode())
    return assemble(document), document


def reading(source):
    return read_back(*problem_and_document(source))


def plain(markup):
    """The source that the MathML keeps."""
    return html.unescape(markup.split('<annotation encoding="text/plain">')[1].split("</annotation>")[0])


def sentences(source):
    return [(unknown["sentence"], unknown["role"], unknown["free"]) for unknown in reading(source)["unknowns"]]


def freedom(source):
    return reading(source)["freedom"]


def test_names_ends_and_units_are_the_users():
    told = reading(HOSE)
    assert told["independent"] == {"name": "x", "unit": "m", "from": "0", "to": "3"}
    assert told["constants"] == [
        {"name": "w", "value": 6.5, "unit": "N/m", "tolerance": None},
        {"name": "l", "value": 4.2, "unit": "m", "tolerance": 0.02},
    ]
    assert told["parameters"] == []
    told = reading(CRUCIBLE)
    assert told["independent"] == {"name": "t", "unit": "s", "from": "0", "to": "T"}
    assert told["parameters"] == [{"name": "T", "unit": "s"}]


def test_unknowns_have_roles():
    assert sentences(HOSE) == [("y: function whose derivative y' is free", "state", True)]
    assert sentences(CRUCIBLE) == [
        ("x: state of order 2, given by its dynamics", "state", False),
        ("q: state of order 2, given by its dynamics", "state", False),
        ("a: control, free everywhere", "control", True),
    ]


def test_an_equation_that_is_not_solved_determines_the_derivative_and_leaves_the_force_free():
    implicit = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"v": {}, "F": {}},
        "dynamics": ["2*v' + v = F"],
        "functional": {"seek": "minimum", "integrand": "F^2"},
        "endpoints": ["v(0) = 0", "v(1) = 1"],
    }
    assert sentences(implicit) == [
        ("v: state of order 1, determined by 2*v' + v = F", "state", False),
        ("F: control, free everywhere", "control", True),
    ]
    bound = implicit | {
        "unknowns": {"v": {}, "F": {}, "G": {}},
        "functional": {"seek": "minimum", "integrand": "F^2 + G"},
        "constraints": ["G - F^2 = v"],
    }
    assert freedom(bound)["unknown_functions"] == 1
    assert sentences(bound)[1:] == [
        ("F: function, determined by G - F^2 = v", "control", False),
        ("G: control, free everywhere", "control", True),
    ]


def test_the_functional_is_told_in_words_and_as_mathematics():
    told = reading(HOSE)["functional"]
    assert told["sentence"] == "Sought is the minimum of the integral of w*y*sqrt(1 + y'^2) over x from 0 to 3."
    assert told["unit"] == "N*m"
    assert plain(told["mathml"]) == "minimum of integral(w*y*sqrt(1 + y'^2))"
    told = reading(CRUCIBLE)["functional"]
    assert told["sentence"] == (
        "Sought is the minimum of the endpoint term T plus the integral of 0.1*log(1 + x^2/l^2) over t from 0 to T."
    )
    least = reading(CRUCIBLE | {"functional": {"seek": "stationary", "endpoint": "T"}})["functional"]
    assert least["sentence"] == "Sought is a stationary value of T."


def test_relations_have_pointers_kinds_units_and_the_users_text():
    told = [(r["pointer"], r["kind"], r["unit"], plain(r["mathml"])) for r in reading(CRUCIBLE)["relations"]]
    assert told == [
        ("/where/pull", "abbreviation", "", "pull = g*sin(q) + a*cos(q)"),
        ("/dynamics/0", "dynamics", "m/s^2", "x'' = a"),
        ("/dynamics/1", "dynamics", "deg/s^2", "q''  = -pull/l"),
        ("/endpoints/0", "endpoint", "m", "x(0) = 0"),
        ("/endpoints/1", "endpoint", "m/s", "x'(0) = 0"),
        ("/endpoints/2", "endpoint", "deg", "q(0) = 0"),
        ("/endpoints/3", "endpoint", "deg/s", "q'(0) = 0"),
        ("/endpoints/4", "endpoint", "m", "x(T) = 3"),
        ("/endpoints/5", "endpoint", "deg", "q(T) = 0"),
        ("/constraints/0", "pointwise", "m/s", "-1.5 <= x' <= 1.5"),
        ("/unknowns/q/within", "pointwise", "deg", "-12 <= q <= 12"),
        ("/unknowns/a/within", "pointwise", "m/s^2", "a <= 2"),
        ("/parameters/T/within", "parameter", "s", "T >= 0.5"),
    ]
    kinds = [(r["pointer"], r["kind"]) for r in reading(HOSE)["relations"]]
    assert kinds[2:] == [("/constraints/0", "integral"), ("/constraints/1", "pointwise")]


def test_numbers_are_shown_as_they_were_written():
    (angle,) = [r for r in reading(CRUCIBLE)["relations"] if r["pointer"] == "/unknowns/q/within"]
    assert "<mn>12</mn>" in angle["mathml"] and "0.209" not in angle["mathml"]


def test_freedom_is_counted():
    assert freedom(HOSE) == {
        "unknown_functions": 1,
        "conditions": 3,
        "sentence": "To be found: y. 3 conditions at single places or in the integral.",
    }
    assert freedom(CRUCIBLE) == {
        "unknown_functions": 1,
        "conditions": 6,
        "sentence": "To be found: a and T. 6 conditions at single places. "
        "Nothing fixes x'(T) and q'(T): natural boundary conditions take that place.",
    }
    assert freedom(HOSE | {"endpoints": ["y(0) = 2"], "constraints": []})["sentence"] == (
        "To be found: y. 1 condition at single places. "
        "Nothing fixes y(3): its natural boundary condition takes that place."
    )


def test_the_natural_logarithm_is_pointed_out():
    assert reading(CRUCIBLE)["notes"] == ["log is the natural logarithm."]


def test_what_nothing_determines_is_noted():
    carried = HOSE | {"unknowns": {"y": {"unit": "m"}, "z": {"unit": "m^2"}}, "dynamics": ["z' = y"]}
    (note,) = reading(carried)["notes"]
    assert note.startswith("Nothing determines where z starts")
    assert reading(HOSE)["notes"] == []


def test_the_necessary_conditions_are_added_to_a_reading():
    problem, document = problem_and_document(HOSE)
    before = read_back(problem, document)
    told = with_necessary(before, problem)
    assert "necessary" not in before
    assert [(n["kind"], n["for"], n["text"]) for n in told["necessary"]] == [
        ("Lagrangian", "L", "L = (w*y + λ)*sqrt(1 + y'^2)"),
        ("Euler-Lagrange", "y", "d/dx((w*y + λ)*y'/sqrt(1 + y'^2)) = w*sqrt(1 + y'^2)"),
        ("first integral", "x", "(w*y + λ)/sqrt(1 + y'^2) = C"),
    ]
    assert all(plain(n["mathml"]) == n["text"] for n in told["necessary"])
    assert "λ is the multiplier of integral(sqrt(1 + y'^2)) = l." in told["notes"]


def test_a_reading_without_time_says_so():
    problem, document = problem_and_document(HOSE)
    told = with_necessary(read_back(problem, document), problem, seconds=0)
    assert told["necessary"] == []
    assert told["notes"] == ["Some necessary conditions are left out: deriving them takes too long."]


@pytest.mark.parametrize("name", samples.names())
def test_every_sample_is_read_back_whole(name):
    problem, document = problem_and_document(samples.load(name))
    told = with_necessary(read_back(problem, document), problem)
    json.dumps(told, allow_nan=False)
    formulas = [*told["relations"], *told["necessary"], told["functional"]]
    for formula in formulas:
        ET.fromstring(formula["mathml"])
    assert told["necessary"] and not any("left out" in note for note in told["notes"])
    listed = {r["pointer"] for r in told["relations"]}
    for member in ("dynamics", "endpoints", "constraints"):
        assert {f"/{member}/{i}" for i in range(len(getattr(document, member)))} <= listed


def test_reading_needs_nothing_that_only_workers_have():
    code = "import sys, service.reading; print(sorted({'casadi', 'scipy'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_arcs_say_what_happens_between_them_and_what_each_unknown_is_on_them():
    told = reading(STAGES)
    assert [arc["sentence"] for arc in told["arcs"]] == [
        "burn: t from 0 to t1. At t1 v is continuous, and m may jump as the endpoints say.",
        "glide: t from t1 to T.",
    ]
    assert [(unknown["sentence"], unknown["free"]) for unknown in told["unknowns"]] == [
        ("v: state of order 1, determined by m*v' = pull on all arcs", False),
        ("m: state of order 1, given by its dynamics on all arcs", False),
        ("F: control, free everywhere on burn; in no law on glide", True),
    ]
    assert told["functional"]["sentence"] == (
        "Sought is the maximum of v(T) plus the integral of v/T over t from t1 to T."
    )
    assert reading(HOSE)["arcs"] == []


def test_every_formula_of_an_arc_is_a_relation_with_its_pointer():
    kinds = {item["pointer"]: (item["kind"], item["unit"]) for item in reading(STAGES)["relations"]}
    assert kinds["/arcs/0/where/pull"] == ("abbreviation", "")
    assert kinds["/arcs/1/dynamics/0"] == ("dynamics", "kg/s")
    assert kinds["/arcs/1/constraints/0"] == ("pointwise", "m/s")


def test_the_corner_conditions_are_among_the_necessary_ones():
    problem, document = problem_and_document(STAGES)
    corners = [item for item in with_necessary(read_back(problem, document), problem)["necessary"]
               if item["kind"] == "corner"]  # fmt: skip
    assert [item["for"] for item in corners] == ["v", "t"]
    assert ET.fromstring(corners[0]["mathml"]) is not None
