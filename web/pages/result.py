"""The page of a run that has ended: what came out, how far to trust it, and everything one can take along."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from markupsafe import Markup

from web import display, links, snippets
from web.caution import CAUTION_IN_FULL
from web.extremes import extremes
from web.figures import Figure, branch_figure, figures
from web.pages.evidence import (
    Check,
    Diagnosis,
    band_of,
    check_of,
    diagnosis_of,
    parameters_of,
    prices_of,
    reach_of,
    slopes_of,
    stretches_of,
    undetermined_of,
)
from web.pages.extremals import Found, found_by_starts
from web.pages.fit import FitView, fit_view
from web.pages.handover import Preview, citation_of, facts_of, meshes_of, preview_of
from web.pages.page import Page, told
from web.pages.reading import Reading, reading_view, understood
from web.pages.sweep import Sweep, sweep_of
from web.plotly_assets import GLOBAL_SHEET, SCRIPT, placeholder_ids
from web.tables import FILE_FORMATS, PARTS, read_choice
from web.verdicts import tally, verdict_sentence

EXPONENT_SIGNS = "⁰¹²³⁴⁵⁶⁷⁸⁹⁻"
MAIN_FIGURES = ("curve", "path")
EXTREMAL_FIGURES, FITTED_FIGURES = "extremals", "observed"
TABLE_FIGURES = "table-"
PLACED = (*MAIN_FIGURES, EXTREMAL_FIGURES, FITTED_FIGURES, TABLE_FIGURES)

Pairs = tuple[tuple[str, str], ...]
Rows = tuple[tuple[str, ...], ...]


@dataclass(frozen=True, kw_only=True)
class ResultPage(Page):
    """Verdict and value first, then the evidence, then what can be taken along."""

    template: ClassVar[str] = "result.html"
    here: ClassVar[str] = "runs"

    run_id: str = told("The run.")
    state: str = told("finished, failed or stopped.")
    state_tone: str = told("Class of the state's tag.")
    verdict: str = told("What the result may be called; empty where there is none.")
    verdict_tone: str = told("Class of the verdict's tag.")
    meaning: str = told("What the verdict means, in a sentence or two; empty where the diagnosis says it.")
    value: Markup = told("The value with its error bound; empty where there is none.")
    value_unit: str = told("Its unit.")
    value_about: str = told("What the value is, in a few words.")
    parameters: Rows = told("Name, value with unit, meaning of each parameter found.")
    diagnosis: Diagnosis | None = told("Why there is no full result; None where there is one.")
    undetermined: Rows = told("Name, sentence and place of what is free that nothing determines.")
    main_figures: tuple[Figure, ...] = told("The curve itself.")
    nearest: bool = told("Whether it is no solution, but the curve that violates the conditions least.")
    stretches: Rows = told("Quantity, begin, end and what it does there, from switch to switch.")
    fitted: FitView | None = told("The fit to observations; None where nothing was observed.")
    fitted_figures: tuple[Figure, ...] = told("The observations over the curve, and their residuals.")
    extremals: tuple[Found, ...] = told("What several starts led to; empty for one start.")
    extremal_figures: tuple[Figure, ...] = told("These curves over each other.")
    table_figures: tuple[Figure, ...] = told("Measured tables with the curves through their points.")
    further_figures: tuple[Figure, ...] = told("Derivatives, multipliers, mesh and error history.")
    costates: bool = told("Whether there are costates or multipliers along the curve.")
    plotly: str = told("Address of the plotting script; empty where there is no figure.")
    plotly_sheet: str = told("Id of the style sheet link that the plotting script writes its rules to.")
    plotly_placeholders: tuple[str, ...] = told("Ids of elements that must be there for the plotting script.")
    parts: Mapping[str, Pairs] = told("Format and address of the tables of each part that the result may have.")
    checks: tuple[Check, ...] = told("All checks.")
    checks_tally: str = told("How many passed, failed, do not apply.")
    curve_error: str = told("The relative error of the curve; empty where it is not known.")
    notes: tuple[str, ...] = told("What was done that the reader should know.")
    value_band: str = told("One standard deviation of the value from the tolerances; empty where there is none.")
    slopes: Rows = told("Constant, slope with unit, tolerance, what that moves the value by, in words.")
    prices: Rows = told("Condition, price with unit, what raising the limit does.")
    reach: Rows = told("Limit report: quantity, lowest, where, highest, where, largest absolute value.")
    branch: Figure | None = told("The branch of solutions that was followed in a constant; None where none was.")
    sweep: Sweep | None = told("The same problem for many values of a constant; None where none is swept.")
    reading: Reading | None = told("How the problem was understood.")
    relations: tuple[Markup, ...] = told("The conditions as MathML.")
    preview: Preview | None = told("The table; None where there is no curve.")
    facts: Pairs = told("Provenance: heading and text.")
    meshes: Rows = told("One row for each mesh of the refinement.")
    permalink: str = told("The full address of this page.")
    citation: str = told("How to cite the result.")
    curl: str = told("A shell command that solves the same problem again.")
    document: str = told("The problem document as JSON.")
    caution: str = told("The caution in full.")


def result_page(
    result: Mapping[str, Any], *, base_url: str, query: Mapping[str, str] | None = None, moment: str = ""
) -> ResultPage:
    """From a result document (see DEVELOPERS.md); members that are missing are left out of the page.

    `query` chooses the table (`rows`, `step`, `columns`, `derivatives`); `moment` says when the run ended.
    """
    problem = result.get("problem") or {}
    checks = result.get("checks") or []
    verdict = result.get("verdict") or ""
    seek = str((problem.get("functional") or {"seek": "minimum"}).get("seek") or "")
    drawn = figures(result)
    run_id = str(result.get("id") or "")
    sweep, branch = sweep_of(result), branch_figure(result)
    permalink = base_url.rstrip("/") + links.run(run_id)
    document = json.dumps(problem, ensure_ascii=False, indent=2)
    has_value = result.get("value") is not None
    untold = verdict in ("", "infeasible") or (verdict == "not verified" and not has_value)  # the diagnosis says it all
    return ResultPage(
        title=str(problem.get("title") or "Untitled problem"),
        run_id=run_id,
        state=str(result.get("state") or ""),
        state_tone=display.tone(result.get("state")),
        verdict=verdict,
        verdict_tone=display.tone(verdict, seek),
        meaning="" if result.get("diagnosis") and untold else verdict_sentence(verdict, checks),
        value=_raised(display.with_error(result["value"], result.get("value_error"))) if has_value else Markup(),
        value_unit=display.unit(result.get("value_unit") or "") if has_value else "",
        value_about=_value_about(result, seek),
        parameters=parameters_of(result),
        diagnosis=diagnosis_of(result),
        undetermined=undetermined_of(result),
        main_figures=tuple(figure for figure in drawn if figure.key.startswith(MAIN_FIGURES)),
        nearest=bool(result.get("curve")) and not has_value,
        stretches=stretches_of(result),
        fitted=fit_view(result, run_id),
        fitted_figures=tuple(figure for figure in drawn if figure.key.startswith(FITTED_FIGURES)),
        extremals=found_by_starts(result, run_id),
        extremal_figures=tuple(figure for figure in drawn if figure.key.startswith(EXTREMAL_FIGURES)),
        table_figures=tuple(figure for figure in drawn if figure.key.startswith(TABLE_FIGURES)),
        further_figures=tuple(figure for figure in drawn if not figure.key.startswith(PLACED)),
        costates=bool(result.get("curve") and ((result.get("multipliers") or {}).get("costates") or {}).get("arcs")),
        plotly=links.static(SCRIPT) if drawn or sweep or branch else "",
        plotly_sheet=GLOBAL_SHEET,
        plotly_placeholders=placeholder_ids() if drawn or sweep or branch else (),
        parts={
            part: tuple((file.name, links.part(run_id, part, suffix)) for suffix, file in FILE_FORMATS.items())
            for part in PARTS
        },
        checks=tuple(check_of(check, result) for check in checks),
        checks_tally=tally(checks),
        curve_error=display.number(error, 2) if (error := (result.get("curve") or {}).get("error")) is not None else "",
        notes=tuple(str(note) for note in result.get("notes") or ()),
        value_band=band_of(result),
        slopes=slopes_of(result),
        prices=prices_of(result),
        reach=tuple(reach_of(line, result) for line in extremes(result)) if has_value else (),
        branch=branch,
        sweep=sweep,
        reading=reading_view(result["reading"]) if result.get("reading") else None,
        relations=tuple(understood(result["reading"]).values()) if result.get("reading") else (),
        preview=preview_of(result, run_id, read_choice(query or {})),
        facts=facts_of(result, moment),
        meshes=meshes_of(result),
        permalink=permalink,
        citation=citation_of(result, permalink),
        curl=snippets.curl(document, base_url),
        document=document,
        caution=CAUTION_IN_FULL,
    )


def _raised(text: str) -> Markup:
    """Exponents as markup: in large type the characters for raised digits come out uneven."""
    parts = re.split(f"([{EXPONENT_SIGNS}]+)", text)
    plain = str.maketrans(EXPONENT_SIGNS, "0123456789\N{MINUS SIGN}")
    return Markup().join(
        Markup("<sup>{}</sup>").format(part.translate(plain)) if count % 2 else part for count, part in enumerate(parts)
    )


def _value_about(result: Mapping[str, Any], seek: str) -> str:
    sort = {"minimum": "Least value", "maximum": "Greatest value"}.get(seek, "Value")
    proven = result.get("verdict") in ("global minimum", "local minimum", "global maximum", "local maximum")
    about = f"{sort if proven else 'Value'} of the functional"
    if result.get("value_error") is None:
        return f"{about}; no bound on its error is known"
    return f"{about}, with the bound on its error"
