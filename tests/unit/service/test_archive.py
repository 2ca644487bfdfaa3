"""The result document: SI to the user's units, place for place, and nothing that JSON cannot say."""

import json
from dataclasses import replace

import numpy as np
import pytest

from service.archive import result_document
from service.spec import read
from solvers.curve import Curve
from solvers.formula.nodes import Name, Number
from solvers.problem import Condition, Constant, Parameter, Place, Problem, Sweep, Unknown
from solvers.solution import (
    ArcCurve,
    Branch,
    BranchPoint,
    Change,
    Check,
    Diagnosis,
    Extremal,
    Finding,
    Fit,
    Fitted,
    MeshStep,
    Price,
    Slope,
    Solution,
    Status,
    SweepPoint,
    Verdict,
)
from solvers.undetermined import Undetermined
from solvers.units import PLAIN, Unit
from web.trajectory import read_costates, read_trajectory

MM, MS, N, MJ = Unit("mm", 1e-3), Unit("ms", 1e-3), Unit("N"), Unit("mJ", 1e-3)
DOCUMENT = read(
    json.dumps(
        {
            "format": 1,
            "title": "Any",
            "independent": {"name": "t", "unit": "ms", "from": 0, "to": "T"},
            "parameters": {"T": {"unit": "ms"}},
            "unknowns": {"x": {"unit": "mm"}, "F": {"unit": "N"}},
            "functional": {"seek": "minimum", "endpoint": "T"},
        }
    ).encode()
)
HALF = Number(0.5, "0.5")
PROBLEM = Problem(
    independent="t",
    places=(Place(Number(0.0, "0"), "0"), Place(Name("T"), "T")),
    unknowns=(Unknown("x", 2, unit=MM), Unknown("F", 0, unit=N)),
    parameters=(Parameter("T", unit=MS),),
    constants=(Constant("k", 2.0, 0.5, MM), Constant("n", 3.0)),
    endpoints=(Condition(Name("x"), HALF, HALF, "x(T) = 500", "/endpoints/0", MM),),
    constraints=(Condition(Name("F"), None, HALF, "F <= 0.5", "/constraints/0", N),),
    integrals=(Condition(Name("F"), None, HALF, "integral(F) <= 1", "/constraints/1", PLAIN),),
    independent_unit=MS,
    value_unit=MJ,
)
# Two intervals over 0 ... 0.1 ... 0.3 s; in SI x = 2 t + 1 (m), x' = 2 (m/s), F = 1 on the first and 3 on the second.
BREAKS = np.array([0.0, 0.1, 0.3])
CURVE = Curve(
    BREAKS,
    {
        "x": (np.array([1.1, 0.1]), np.array([1.4, 0.2])),
        "x'": (np.array([2.0]), np.array([2.0])),
        "F": (np.array([1.0]), np.array([3.0])),
    },
)
SOLVED = Solution(
    verdict=Verdict.LOCAL_MINIMUM,
    value=0.25,
    value_error=1e-9,
    parameters={"T": 0.3},
    curve=CURVE,
    curve_error=1e-8,
    costates=Curve(
        BREAKS,
        {"x": (np.array([5.0]),) * 2, "x'": (np.array([7.0]),) * 2, "F <= 0.5": (np.array([11.0]),) * 2},
    ),
    prices=(Price("x(T) = 500", "/endpoints/0", 4.0), Price("integral(F) <= 1", "/constraints/1", -2.0)),
    slopes=(Slope("k", 4.0, 0.003), Slope("n", np.nan)),
    checks=(
        Check("motion", Status.PASSED, "All well.", 1e-9, 1e-6, 0.1, "x"),
        Check("convexity", Status.NOT_APPLICABLE, "No."),
    ),
    meshes=(MeshStep(2, 8, 3, 4, 0.5, 1e-3, 12, 0.02),),
    iterations=12,
    times={"solve": 0.1},
    notes=("Well.",),
)


def _archived(solution=SOLVED, **options):
    return result_document(DOCUMENT, PROBLEM, solution, {"notes": []}, {"read": 0.01}, **options)


def test_what_nothing_determines_has_its_place_in_the_users_unit():
    loose = (
        Undetermined("x", "/unknowns/x", "Nothing determines x.", 0.1),
        Undetermined("T", "/parameters/T", "Nor T."),
    )
    told = _archived(replace(SOLVED, undetermined=loose))["undetermined"]
    assert told[0] == {"name": "x", "pointer": "/unknowns/x", "sentence": "Nothing determines x.",
                       "where": {"place": pytest.approx(100.0), "subject": ""}}  # fmt: skip
    assert told[1]["where"] is None
    assert _archived()["undetermined"] == []


def test_the_curve_says_the_same_in_the_users_units():
    arc = read_trajectory(_archived()).arcs[0]
    places = np.linspace(0, 300, 31)
    assert arc.evaluate("x", 0, places) == pytest.approx(1e3 * (2 * places / 1e3 + 1))
    assert arc.evaluate("x'", 0, places) == pytest.approx(2.0)  # 2 m/s are 2 mm/ms
    assert arc.evaluate("x", 1, places) == pytest.approx(2.0)
    assert arc.evaluate("F", 0, np.array([50.0, 200.0])).tolist() == [1, 3]
    assert _archived()["curve"]["units"] == {"x": "mm", "x'": "mm/ms", "F": "N"}
    assert _archived()["curve"]["arcs"][0]["breaks"] == pytest.approx([0, 100, 300])
    assert _archived()["curve"]["error"] == 1e-8  # relative: without unit


def test_value_and_parameters_are_in_their_units():
    result = _archived()
    assert (result["value"], result["value_error"], result["value_unit"]) == pytest.approx((250.0, 1e-6, "mJ"))
    assert result["parameters"] == {"T": {"value": pytest.approx(300.0), "unit": "ms"}}


def test_a_price_is_value_per_limit():
    first, second = _archived()["multipliers"]["prices"]
    # 4 J per m are 4 mJ per mm; -2 J per unit are -2000 mJ.
    assert (first["price"], first["unit"]) == (pytest.approx(4.0), "mJ/mm")
    assert (second["price"], second["unit"]) == (pytest.approx(-2000.0), "mJ")
    assert first["pointer"] == "/endpoints/0"


def test_a_slope_is_value_per_constant_and_the_band_is_a_value():
    result = _archived()
    first, second = result["slopes"]
    # 4 J per m are 4 mJ per mm; 3 mm of tolerance are 12 mJ.
    assert (first["constant"], first["unit"]) == ("k", "mJ/mm")
    assert (first["slope"], first["tolerance"], first["contribution"]) == pytest.approx((4.0, 3.0, 12.0))
    assert second == {"constant": "n", "slope": None, "unit": "mJ", "tolerance": None, "contribution": None}
    assert result["band"] == {"value": pytest.approx(12.0), "curve": []}
    (change,) = _archived(replace(SOLVED, changes=(Change("k", CURVE),)))["band"]["curve"]
    assert change == {"constant": "k", "arcs": result["curve"]["arcs"]}
    assert _archived(replace(SOLVED, slopes=()))["band"] is None


def test_a_sweep_is_in_the_units_of_its_constants_and_of_the_value():
    problem = replace(PROBLEM, sweeps=(Sweep("k", (1.0, 2.0)),))
    points = (
        SweepPoint((1.0,), Verdict.LOCAL_MINIMUM, 0.25, 1e-9, {"T": 0.3}, curve=CURVE),
        SweepPoint((2.0,), note="The time limit was reached before this point."),
    )
    sweep = result_document(DOCUMENT, problem, replace(SOLVED, sweep=points), {}, {})["sweep"]
    assert sweep["constants"] == [{"name": "k", "unit": "mm", "values": [1000.0, 2000.0]}]
    assert sweep["parameters"] == {"T": "ms"}
    first, second = sweep["points"]
    assert (first["at"], first["value"], first["parameters"]) == ([1000.0], 250.0, {"T": 300.0})
    assert (second["verdict"], second["value"]) == (None, None)
    (curve,) = sweep["curves"]
    assert curve["point"] == 0
    assert curve["arcs"] == _archived()["curve"]["arcs"]
    assert _archived()["sweep"] is None


def test_a_continuation_is_in_the_units_of_its_constant_and_of_the_value():
    branch = Branch("k", (BranchPoint(1.0, 0.25, 0),), (BranchPoint(1.5, 0.5, 0),), "Stopped.", 1e-8)
    found = _archived(replace(SOLVED, branch=branch))["continuation"]
    assert (found["constant"], found["unit"], found["end"]) == ("k", "mm", "Stopped.")
    assert found["points"] == [{"at": 1000.0, "value": 250.0, "leg": 0}]
    assert found["folds"] == [{"at": 1500.0, "value": 500.0, "leg": 0}]
    assert _archived()["continuation"] is None


def test_costates_are_value_per_state_and_densities_are_that_per_time():
    result = _archived()
    arc = read_costates(result).arcs[0]
    units = result["multipliers"]["costates"]["units"]
    assert units == {"x": "mJ/mm", "x'": "mJ*ms/mm", "F <= 0.5": "mJ/N/ms"}
    assert arc.evaluate("x", 0, np.array([50.0])) == pytest.approx([5.0])  # J/m = mJ/mm
    assert arc.evaluate("x'", 0, np.array([50.0])) == pytest.approx([7000.0])  # J/(m/s) = 1000 mJ/(mm/ms) x 1e0
    assert arc.evaluate("F <= 0.5", 0, np.array([50.0])) == pytest.approx([11.0])  # J/(N s) = mJ/(N ms)


def test_checks_keep_relative_figures_and_move_their_place():
    first, second = _archived()["checks"]
    assert first == {
        "name": "motion",
        "status": "passed",
        "figure": 1e-9,
        "threshold": 1e-6,
        "where": {"place": pytest.approx(100.0), "subject": "x"},
        "sentence": "All well.",
    }
    assert (second["status"], second["where"], second["figure"]) == ("not applicable", None, None)


@pytest.mark.parametrize(
    ("label", "pointer", "amount", "unit"),
    [
        ("x(T) = 500", "/endpoints/0", 200.0, "mm"),
        ("some other words", "/endpoints/0", 200.0, "mm"),  # found by its pointer alone
        ("x within", "/unknowns/x/within", 200.0, "mm"),
        ("T within", "/parameters/T/within", 200.0, "ms"),
        ("sqrt(x)", "/where/a", 0.2, ""),  # no unit can be told
    ],
)
def test_findings_are_in_the_unit_of_what_they_are_about(label, pointer, amount, unit):
    finding = Finding(label, pointer, 0.2, 0.1, "Note.")
    solution = Solution(Verdict.INFEASIBLE, diagnosis=Diagnosis("infeasible", "It cannot be.", (finding,)))
    diagnosis = _archived(solution)["diagnosis"]
    assert diagnosis["reason"] == "infeasible"
    assert diagnosis["findings"] == [
        {
            "condition": label,
            "pointer": pointer,
            "amount": pytest.approx(amount),
            "unit": unit,
            "where": {"place": pytest.approx(100.0), "subject": ""},
            "note": "Note.",
        }
    ]


def test_the_history_of_the_mesh_is_in_the_unit_of_the_value():
    provenance = _archived()["provenance"]
    assert provenance["meshes"] == [
        {
            "intervals": 2,
            "points": 8,
            "lowest_degree": 3,
            "highest_degree": 4,
            "value": 500.0,
            "error": 1e-3,
            "iterations": 12,
            "seconds": 0.02,
        }
    ]
    assert provenance["times"] == {"read": 0.01, "solve": 0.1}
    assert provenance["options"]["tolerance"] == PROBLEM.options.tolerance
    assert set(provenance["versions"]) >= {"curvewright", "casadi", "numpy"}


def test_what_is_no_finite_number_becomes_null():
    curve = Curve(BREAKS, {**CURVE.functions, "F": (np.array([np.nan]), np.array([np.inf]))})
    broken = replace(SOLVED, value=float("inf"), value_error=float("nan"), curve=curve, curve_error=float("inf"))
    result = _archived(broken)
    text = json.dumps(result, allow_nan=False)
    assert json.loads(text)["value"] is None
    assert result["value_error"] is None
    assert result["curve"]["error"] is None
    assert result["curve"]["arcs"][0]["functions"]["F"] == [[None], [None]]


def test_nothing_but_a_verdict_is_a_document_too():
    result = _archived(Solution(Verdict.NO_OPTIMUM))
    assert (result["verdict"], result["value"], result["curve"]) == ("no optimum", None, None)
    assert result["multipliers"] == {"costates": {"arcs": [], "units": {}}, "prices": []}
    assert read_trajectory(result) is None


def test_run_problem_and_hash_are_those_of_the_document():
    result = _archived(id="abc", state="stopped")
    assert (result["id"], result["state"]) == ("abc", "stopped")
    assert result["problem"] == DOCUMENT.source
    assert result["problem_hash"] == DOCUMENT.canonical_hash()
    assert _archived()["id"] is None


def test_what_several_starts_led_to_is_told_in_the_users_units():
    other = replace(SOLVED, verdict=Verdict.NOT_A_MINIMUM, value=0.5, parameters={"T": 0.3})
    found = (Extremal(SOLVED, ("default guess",)), Extremal(other, ("x with 1 half wave up", "Sobol point 1")))
    document = _archived(replace(SOLVED, extremals=found))
    first, second = document["extremals"]
    assert first["value"] == document["value"] and first["curve"] == document["curve"]
    assert second["verdict"] == "not a minimum"
    assert second["value"] == pytest.approx(500)
    assert second["parameters"] == {"T": {"value": pytest.approx(300), "unit": "ms"}}
    assert second["starts"] == ["x with 1 half wave up", "Sobol point 1"]
    assert _archived(SOLVED)["extremals"] == []


def test_a_fit_is_told_in_the_users_units():
    """SI: T = 0.3 s with a variance of 4e-4 s^2, x in m."""
    at = np.array([0.1, 0.2])
    seen = Fitted(
        "x", "/observations/0/of", at, at + 1, at + 0.9, None, np.array([1.0, -1.0]), np.array([0.1, 0.2]), MM
    )
    fit = Fit(0.04, 2, 1.0, 0.2, False, ("T", "switch 1"), np.array([[4e-4, 1.0], [1.0, 9.0]]), (seen,))
    found = _archived(replace(SOLVED, fit=fit))["observations"]
    assert found["parameters"]["T"] == {"value": pytest.approx(300), "sigma": pytest.approx(20), "unit": "ms"}
    assert found["covariance"] == [[pytest.approx(400)]]  # what the solver has added is none of the user's
    assert (found["sum_of_squares"], found["spread"], found["unit"]) == (pytest.approx(4e4), pytest.approx(200), "mm")
    assert (found["points"], found["degrees_of_freedom"], found["sigmas_known"]) == (2, 1.0, False)
    (one,) = found["lists"]
    assert (one["of"], one["unit"], one["sigma"]) == ("x", "mm", None)
    assert one["place"] == pytest.approx([100, 200])
    assert one["observed"] == pytest.approx([1100, 1200])
    assert one["residual"] == pytest.approx([100, 100])
    assert one["normalised"] == [1, -1]
    assert one["fitted_sigma"] == pytest.approx([100, 200])
    weighted = _archived(replace(SOLVED, fit=replace(fit, weighted=True, covariance=None)))["observations"]
    assert (weighted["unit"], weighted["spread"], weighted["covariance"]) == ("", 0.2, None)
    assert weighted["parameters"]["T"]["sigma"] is None
    assert _archived()["observations"] is None


def test_arcs_are_told_one_by_one_with_the_units_of_all():
    first = ArcCurve("burn", Curve(BREAKS[:2], {"x": (np.array([1.1, 0.1]),), "F": (np.array([1.0]),)}), None)
    second = ArcCurve("coast", Curve(BREAKS[1:], {"x": (np.array([1.4, 0.2]),)}),
                      Curve(BREAKS[1:], {"x": (np.array([0.5]),)}))  # fmt: skip
    solution = replace(SOLVED, curve=None, costates=None, arcs=(first, second))
    found = result_document(DOCUMENT, PROBLEM, solution, {}, {})
    assert [arc["name"] for arc in found["curve"]["arcs"]] == ["burn", "coast"]
    assert [arc["breaks"] for arc in found["curve"]["arcs"]] == [[0, 100], [100, 300]]
    assert found["curve"]["units"] == {"x": "mm", "F": "N"}
    assert found["curve"]["arcs"][1]["functions"]["x"][0] == pytest.approx([1400, 200])
    assert "F" not in found["curve"]["arcs"][1]["functions"]
    assert [arc["name"] for arc in found["multipliers"]["costates"]["arcs"]] == ["coast"]
    assert found["multipliers"]["costates"]["units"] == {"x": "mJ/mm"}
    assert read_trajectory(found).end == 300
    altered = replace(solution, changes=(Change("k", None, arcs=(first, second)),))
    (change,) = result_document(DOCUMENT, PROBLEM, altered, {}, {})["band"]["curve"]
    assert change == {"constant": "k", "arcs": found["curve"]["arcs"]}
