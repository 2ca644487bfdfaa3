"""The page of a result: verdict and value first, nothing claimed beyond the checks, complete for every sort of end."""

from __future__ import annotations

import copy
import re
from html.parser import HTMLParser

import pytest

from solvers.search.record import End
from solvers.solution import Verdict
from web.caution import CAUTION
from web.pages.progress import progress_page
from web.pages.result import result_page
from web.render import render
from web.tables import TableError, table
from web.verdicts import reason_heading, verdict_sentence

BASE = "http://bench.example:8000/"


def page(document, **query):
    return result_page(document, base_url=BASE, query=query)


class Outline(HTMLParser):
    """Ids, headings and unclosed elements of a page."""

    VOID = frozenset(("meta", "link", "br", "hr", "input", "img", "path", "circle"))

    def __init__(self, text):
        super().__init__()
        self.ids, self.headings, self.open, self.labelled = [], [], [], []
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        given = dict(attributes)
        self.ids += [given["id"]] if "id" in given else []
        self.labelled += given.get("aria-labelledby", "").split()
        self.headings += [int(tag[1])] if re.fullmatch(r"h[1-6]", tag) else []
        if tag not in self.VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag not in self.VOID:
            assert self.open.pop() == tag


@pytest.mark.parametrize("name", ["hose", "stage", "vehicle", "infeasible", "out_of_time", "several", "fitted"])
def test_every_page_is_well_formed_with_unique_ids_and_headings_in_order(name, request):
    outline = Outline(render(page(request.getfixturevalue(name))))
    assert outline.open == []
    assert len(set(outline.ids)) == len(outline.ids)
    assert set(outline.labelled) <= set(outline.ids)
    assert outline.headings.count(1) == 1
    assert all(after <= before + 1 for before, after in zip(outline.headings, outline.headings[1:], strict=False))


def test_verdict_and_value_come_before_everything_else(hose):
    text = render(page(hose))
    order = [
        text.index(part) for part in ("local minimum", "5.912845592 ± 4", 'id="curve"', 'id="checks"', 'id="table"')
    ]
    assert order == sorted(order)
    assert "4·10<sup>−9</sup>" in text
    assert CAUTION in text


def test_no_bound_is_shown_where_none_is_known(out_of_time):
    made = page(out_of_time)
    assert "±" not in made.value and "no bound on its error" in made.value_about
    assert made.diagnosis.heading == "The time limit ended the search"
    assert made.main_figures  # the best curve so far


def test_a_value_is_called_least_only_where_that_was_shown(hose):
    assert page(hose).value_about.startswith("Least value")
    for verdict in ("stationary", "not verified", "best found", "not a minimum"):
        assert page(hose | {"verdict": verdict}).value_about.startswith("Value of")


@pytest.mark.parametrize("verdict", ["stationary", "not verified", "best found", "not a minimum", "infeasible", None])
def test_weak_verdicts_never_claim_an_optimum(verdict):
    sentence = verdict_sentence(verdict, [{"name": "motion", "status": "failed"}])
    assert "conditions hold" not in sentence and "No neighbouring curve" not in sentence
    assert ("motion" in sentence) == (verdict in ("not verified", "not a minimum"))


def test_a_diagnosis_says_the_reason_first_and_lists_the_findings(infeasible):
    made = page(infeasible)
    assert made.diagnosis.findings[0][:2] == ("integral(sqrt(1 + y'^2)) = 2.9", "0.127\N{NO-BREAK SPACE}m")
    assert made.diagnosis.findings[1][2] == "x = 3\N{NO-BREAK SPACE}m, y"
    assert made.preview is None and made.value == "" and not made.main_figures


def test_the_curve_of_least_violation_is_called_what_it_is(hose, infeasible):
    nearest = {**infeasible, "curve": {**hose["curve"], "error": None}}
    made = page(nearest)
    text = render(made)
    assert '<h2 id="curve">The curve that violates the conditions least</h2>' in text
    assert "<p>Relative error" not in text and "Limit report" not in text
    assert "The curve that violates" not in render(page(hose))
    with pytest.raises(TableError, match="Nothing was solved"):
        table(nearest, sigma=True)


@pytest.mark.parametrize(
    ("notes", "advice"),
    [
        (("", ""), "Loosen or drop one of these conditions and solve again."),
        (("conflict 1", "conflict 1"), "Loosen or drop one of these conditions and solve again."),
        (("conflict 1", "conflict 2"), "Loosen or drop one condition of each conflict and solve again."),
    ],
)
def test_every_conflict_needs_something_that_gives(infeasible, notes, advice):
    findings = [{**finding, "note": note}
                for finding, note in zip(infeasible["diagnosis"]["findings"], notes, strict=True)]  # fmt: skip
    made = page({**infeasible, "diagnosis": {**infeasible["diagnosis"], "findings": findings}})
    assert made.diagnosis.advice == advice


def test_what_nothing_determines_is_said_beside_the_verdict(hose):
    loose = [
        {"name": "a", "pointer": "/parameters/a", "where": None, "sentence": "Nothing determines a here."},
        {"name": "y", "pointer": "/unknowns/y", "where": {"place": 1.5, "subject": ""}, "sentence": "Nothing holds y."},
    ]
    text = render(page(hose | {"undetermined": loose}))
    assert '<h2 id="undetermined">Nothing determines <code>a</code> and <code>y</code></h2>' in text
    assert "Nothing determines a here.</li>" in text
    assert "Nothing holds y. Most at x = 1.5\N{NO-BREAK SPACE}m.</li>" in text
    assert 'id="undetermined"' not in render(page(hose))


def test_a_run_that_crashed_shows_its_problem_and_reason():
    bare = {
        "id": "abc",
        "state": "failed",
        "problem": {"title": "Hose"},
        "diagnosis": {"reason": "failed", "sentence": "The run failed: its worker died 3 times.", "findings": []},
    }
    text = render(page(bare))
    assert '<h2 id="diagnosis">The run failed</h2>' in text and "died 3 times" in text


def test_checks_say_their_outcome_in_words_with_figure_and_place(hose):
    made = page(hose)
    assert made.checks_tally == "Of 4 checks 2 passed, 1 failed, 1 does not apply."
    first = made.checks[0]
    assert (first.status, first.figure, first.threshold) == ("passed", "2.1·10⁻¹¹", "1·10⁻⁶")
    assert first.where == "x = 3\N{NO-BREAK SPACE}m, y(3) = 2.4"


def test_prices_are_read_with_their_sign(hose):
    (condition, _, effect), *_ = page(hose).prices
    assert condition == "integral(sqrt(1 + y'^2)) = 4.2" and effect == "raising the limit raises the value"
    falling = copy.deepcopy(hose)
    falling["multipliers"]["prices"][0]["price"] *= -1
    assert page(falling).prices[0][2] == "raising the limit lowers the value"


def test_the_chosen_table_is_shown_and_its_files_have_the_same_choice(hose):
    made = page(hose, step="0.5", derivatives="1").preview
    assert made.headings == ("x [m]", "y [m]", "y'")
    assert [row[0] for row in made.rows] == ["0", "0.5", "1", "1.5", "2", "2.5", "3"]
    assert made.last == () and made.total == "7" and made.error == ""
    assert dict(made.files)["CSV"].endswith("/hose-0001/table.csv?step=0.5&derivatives=1")


def test_a_choice_that_cannot_be_made_is_said_and_the_nodes_are_shown(hose):
    made = page(hose, rows="7", step="0.5").preview
    assert made.error.startswith("Both a number of rows and a step are given.")
    assert made.total == "97" and "?" not in dict(made.files)["CSV"]
    assert page(hose, rows="many").preview.error.startswith("rows: 'many' is no whole number.")


def test_dust_is_shown_as_zero_but_kept_in_the_files(hose):
    hose["curve"]["arcs"][0]["functions"]["y'"][0] = [1e-18]
    rows = page(hose, columns="y'", rows="9").preview.rows
    assert rows[0][1] == "0"


def test_the_problem_can_be_solved_again_from_the_page(hose):
    made = page(hose)
    assert made.permalink == "http://bench.example:8000/runs/hose-0001"
    assert "integral(sqrt(1 + y'^2)) = 4.2" in made.curl and "/api/v1/runs" in made.curl
    assert hose["problem_hash"] in made.citation
    assert 'href="/compose?run=hose-0001"' in render(made)


def test_hostile_texts_of_a_document_stay_text(hose):
    hostile = "<img src=x onerror=alert(1)>"
    hose["problem"]["title"] = hostile
    hose["notes"] = [hostile]
    hose["checks"][0]["sentence"] = hostile
    hose["multipliers"]["prices"][0]["condition"] = hostile
    hose["curve"]["independent"]["name"] = hostile
    assert "<img" not in render(page(hose))


def test_the_page_of_a_run_on_its_way_works_without_script():
    made = progress_page(
        {"id": "abc", "state": "waiting", "title": "Hose"},
        {"independent": {"name": "x", "unit": "m"}, "solve": {"time_limit": 90}},
    )
    text = render(made)
    assert '<noscript><meta http-equiv="refresh" content="3"></noscript>' in text
    assert 'method="post" action="/runs/abc/stop"' in text
    assert "Waiting for a free worker." in text and "1 min 30 s" in text and "along x [m]" in text
    assert Outline(text).open == []


def test_every_reason_of_the_solver_has_a_heading():
    ends = set(End) - {End.CONVERGED, End.SETTLED}
    assert all(not reason_heading(end.value)[0].startswith("No full result") for end in ends)


def test_every_verdict_has_a_meaning():
    empty = verdict_sentence(None, [])
    assert all(verdict_sentence(verdict.value, []) != empty for verdict in Verdict)


def test_what_several_starts_led_to_is_listed_and_drawn(several, hose):
    made = page(several)
    assert [found.verdict for found in made.extremals] == ["local minimum", "not a minimum"]
    assert [found.count for found in made.extremals] == [2, 1]
    assert made.extremals[0].starts == "default guess; y with 1 half wave down"
    assert made.extremals[1].parameters == (("k", "2.5\N{NO-BREAK SPACE}m"),)
    assert all("polyline" in found.picture for found in made.extremals)
    (overlay,) = made.extremal_figures
    assert overlay.key == "extremals-y"
    assert len(overlay.headings) == 3  # shares of the range, and both curves
    assert overlay.rows[0][1:] == ("2", "2") and overlay.rows[-1][1:] == ("2.4", "2.4")  # both hooks
    assert overlay.key not in [figure.key for figure in made.further_figures]
    text = render(made)
    assert text.index('id="checks"') < text.index('id="extremals"') < text.index('id="notes"')
    assert page(hose).extremals == () and 'id="extremals"' not in render(page(hose))


def test_from_switch_to_switch_the_page_says_what_controls_do(hose):
    told = [{"of": "u", "arc": "", "from": 0, "from_error": None, "to": 1.25, "to_error": 2e-4, "course": "singular"},
            {"of": "v", "arc": "burn", "from": 1.25, "to": 3, "course": "at its upper limit"}]  # fmt: skip
    shown = page({**hose, "stretches": told})
    plain = [tuple(cell.replace("\N{NO-BREAK SPACE}", " ") for cell in row) for row in shown.stretches]
    assert plain == [
        ("u", "0 m", "1.2500 ± 0.0002 m", "singular"),
        ("v on burn", "1.25 m", "3 m", "at its upper limit"),
    ]
    assert "From switch to switch" in render(shown)
    assert "From switch to switch" not in render(page(hose))


def test_slopes_say_what_each_constant_does_and_what_its_tolerance_leaves_open(hose):
    shown = page(hose)
    first, second = shown.slopes
    slope = hose["slopes"][0]["slope"]
    assert first[0] == "l"
    assert first[2].replace("\N{NO-BREAK SPACE}", " ") == "0.02 m"
    assert first[4] == f"a larger l {'raises' if slope > 0 else 'lowers'} the value"
    assert (second[2], second[3], second[4]) == ("", "", "no effect")
    text = render(shown)
    assert "What the value depends on" in text
    assert f"± {shown.value_band}" in text


def test_without_tolerances_there_is_no_band(hose):
    shown = page({**hose, "band": None, "slopes": hose["slopes"][1:]})
    assert shown.value_band == ""
    assert "one standard deviation" not in render(shown)
    assert "What the value depends on" not in render(page({**hose, "band": None, "slopes": []}))


def test_a_fit_is_told_with_sigmas_correlations_figures_and_files(fitted, hose):
    made = page(fitted)
    assert made.fitted.sentence == (
        "3 observations, sum of squares 6\N{NO-BREAK SPACE}cm² over 1.5 degrees of freedom: "
        "the residuals spread by 2\N{NO-BREAK SPACE}cm."
    )
    assert made.fitted.parameters[0] == ("a", "2\N{NO-BREAK SPACE}m", "0.1\N{NO-BREAK SPACE}m", "5 %")
    assert made.fitted.parameters[1][2:] == ("not known", "—")
    assert made.fitted.parameters[2][3] == "—"  # relative to nothing
    assert made.fitted.correlations[0] == ("a", "1", "—", "−0.5")
    assert "what is minimised" not in made.fitted.method and "all that is minimised" in made.fitted.method
    assert [figure.key for figure in made.fitted_figures] == [
        "observed-1", "observed-1-residuals", "observed-2", "observed-2-residuals",
    ]  # fmt: skip
    over = made.fitted_figures[0]
    assert over.still.count("<circle") == 3 + 1  # one in the legend
    assert "plot-bar" in over.still
    assert "−1 spreads, at x = 1.5" in made.fitted_figures[1].finding
    assert [address for _, files in made.fitted.files for _, address in files][::4] == [
        "/api/v1/runs/hose-0004/observations.csv", "/api/v1/runs/hose-0004/observations.csv?list=2",
    ]  # fmt: skip
    text = render(made)
    assert text.index('id="curve"') < text.index('id="observations"') < text.index('id="checks"')
    assert page(hose).fitted is None and page(hose).fitted_figures == ()


def test_what_leaves_something_open_is_told_without_sigmas(fitted):
    fit = fitted["observations"] | {"degrees_of_freedom": None, "spread": None, "covariance": None}
    fit["lists"] = [one | {"normalised": None, "fitted_sigma": None} for one in fit["lists"]]
    made = page(fitted | {"observations": fit})
    assert "leave something open" in made.fitted.sentence
    assert made.fitted.correlations == ()
    assert [figure.key for figure in made.fitted_figures] == ["observed-1", "observed-2"]
