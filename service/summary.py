"""What the command line prints for people: complaints with a marker under the place, and the summary of a result."""

from __future__ import annotations

import json
import unicodedata
from collections import Counter
from collections.abc import Iterator, Mapping
from typing import Any

from service.complaints import Complaint, Refused, Stage
from web import display
from web.caution import CAUTION

_WIDEST = 100
_FIRST_COLUMN = 14
_CHECK_COLUMN = 16


def refusal_text(refused: Refused, body: bytes) -> str:
    """All complaints, each with its pointer, the formula it is about, and a marker under the characters meant."""
    text = body.decode("utf-8", "replace").removeprefix("\ufeff")
    source = None if refused.stage is Stage.JSON else json.loads(text)
    count = len(refused.complaints)
    head = f"The document is refused ({refused.stage.value}): {count} complaint{'s' if count > 1 else ''}."
    return "\n\n".join([head, *(_complaint(complaint, text, source) for complaint in refused.complaints)])


def _complaint(complaint: Complaint, text: str, source: Any) -> str:
    lines = [f"{complaint.pointer or '(document)'}: {complaint.message}"]
    subject = text if source is None else _at(source, complaint.pointer)
    if complaint.span is not None and isinstance(subject, str):
        lines += _marked(subject, *complaint.span)
    if complaint.hint:
        lines.append(f"  {complaint.hint}")
    return "\n".join(lines)


def _at(source: Any, pointer: str) -> Any:
    """What a JSON pointer (RFC 6901) means, None where it leads nowhere."""
    for token in pointer.split("/")[1:]:
        step = token.replace("~1", "/").replace("~0", "~")
        if isinstance(source, dict):
            source = source.get(step)
        elif isinstance(source, list) and step.isdigit() and int(step) < len(source):
            source = source[int(step)]
        else:
            return None
    return source


def _marked(text: str, start: int, end: int) -> list[str]:
    """The line of `text` with the span, cut to the width of a page, and a line of carets below it."""
    first = text.rfind("\n", 0, start) + 1
    last = text.find("\n", start)
    line = text[first : last if last >= 0 else len(text)]
    start, end = start - first, min(end - first, len(line))
    cut = max(0, start - _WIDEST // 2)
    shown = line[cut : cut + _WIDEST].replace("\t", " ")
    carets = " " * _width(shown[: start - cut]) + "^" * max(1, _width(shown[start - cut : end - cut]))
    return [f"    {shown}", f"    {carets}"]


def _width(text: str) -> int:
    """Columns on a terminal: combining marks take none, wide letters two."""
    return sum(
        0 if unicodedata.combining(letter) else 2 if unicodedata.east_asian_width(letter) in "WF" else 1
        for letter in text
    )


def result_text(result: Mapping[str, Any]) -> str:
    """Title, verdict, value with its error, parameters, checks with figures, notes, diagnosis."""
    return "\n".join(_lines(result))


def _lines(result: Mapping[str, Any]) -> Iterator[str]:
    yield str(result["problem"].get("title") or "Untitled problem")
    yield ""
    yield _row("verdict", result["verdict"] or "none")
    if result["value"] is not None:
        value = display.with_error(result["value"], result["value_error"])
        yield _row("value", display.joined(value, result["value_unit"]))
    if result["band"] is not None:
        band = display.quantity(result["band"]["value"], result["value_unit"], 2)
        yield _row("one sigma", f"{band} from the tolerances of the constants")
    fit = result.get("observations")
    for name, parameter in result["parameters"].items():
        text = display.quantity(parameter["value"], parameter["unit"], 9)
        sigma = fit["parameters"][name]["sigma"] if fit else None
        yield _row(name, text if sigma is None else f"{text}, sigma {display.quantity(sigma, parameter['unit'], 4)}")
    if fit and fit["spread"] is not None:
        times = " times the sigmas" if fit["sigmas_known"] else ""
        spread = display.quantity(fit["spread"], fit["unit"], 4)
        yield _row("spread", f"{spread}{times} of {fit['points']} observations")
    yield from _diagnosis(result["diagnosis"])
    if result["checks"]:
        yield ""
        yield "Checks"
        for check in result["checks"]:
            yield from _check(check, result)
    yield from _stretches(result)
    if len(result.get("extremals") or ()) > 1:
        yield ""
        yield "Curves found from other starts"
        for found in result["extremals"]:
            value = display.joined(display.with_error(found["value"], found["value_error"]), result["value_unit"])
            count = len(found["starts"])
            yield f"  {found['verdict'] or 'no verdict':<16}{value}, {count} start{'s' if count > 1 else ''}"
    if prices := result["multipliers"]["prices"]:
        yield ""
        yield "Prices (change of the value per unit of the limit)"
        for price in prices:
            yield f"  {display.quantity(price['price'], price['unit'])}  {price['condition']}"
    if slopes := result["slopes"]:
        yield ""
        yield "Slopes (change of the value per unit of the constant)"
        for slope in slopes:
            yield f"  {display.quantity(slope['slope'], slope['unit'])}  {_constant(slope)}"
    yield from _sweep(result)
    if (branch := result["continuation"]) is not None:
        yield ""
        yield f"Continuation in {branch['constant']}: {len(branch['points'])} points. {branch['end']}"
        for fold in branch["folds"]:
            at, value = display.quantity(fold["at"], branch["unit"], 9), result["value_unit"]
            yield f"  fold at {branch['constant']} = {at}, value {display.quantity(fold['value'], value, 9)}"
    if loose := result["undetermined"]:
        yield ""
        yield "Undetermined (one choice of many is shown)"
        for one in loose:
            place = one["where"] and one["where"]["place"]
            at = (
                ""
                if place is None
                else f" Most at {result['reading']['independent']['name']} = {display.number(place, 4)}."
            )
            yield f"  {one['sentence']}{at}"
    if result["notes"]:
        yield ""
        yield "Notes"
        yield from (f"  {note}" for note in result["notes"])
    if result["curve"] is not None:
        yield ""
        yield CAUTION


def _row(name: str, text: str) -> str:
    return f"  {name:<{_FIRST_COLUMN}}{text}"


_MOST_SWEPT = 12


def _sweep(result: Mapping[str, Any]) -> Iterator[str]:
    """How many points were swept, how they ended, and some of them."""
    sweep = result["sweep"]
    if sweep is None:
        return
    points, names = sweep["points"], " and ".join(constant["name"] for constant in sweep["constants"])
    verdicts = Counter(point["verdict"] or "no result" for point in points)
    yield ""
    yield f"Sweep of {names}: {len(points)} points, " + ", ".join(f"{n} {verdict}" for verdict, n in verdicts.items())
    shown = sorted({round(k * (len(points) - 1) / (_MOST_SWEPT - 1)) for k in range(_MOST_SWEPT)})
    for point in (points[index] for index in shown):
        at = ", ".join(
            f"{constant['name']} = {display.quantity(value, constant['unit'])}"
            for constant, value in zip(sweep["constants"], point["at"], strict=True)
        )
        value = display.joined(display.with_error(point["value"], point["value_error"]), result["value_unit"])
        yield f"  {at:<28}{value:<32}{point['verdict'] or 'no result'}"


def _stretches(result: Mapping[str, Any]) -> Iterator[str]:
    """What lies between the switches."""
    if not result["stretches"]:
        return
    independent = result["curve"]["independent"]
    yield ""
    yield "From switch to switch"
    for one in result["stretches"]:
        of = f"{one['of']} on {one['arc']}" if one["arc"] else one["of"]
        start, end = (display.with_error(one[end], one[f"{end}_error"]) for end in ("from", "to"))
        ends = f"{start} to {display.joined(end, independent['unit'])}"
        yield f"  {of:<16}{independent['name']} = {ends:<28}{one['course']}"


def _constant(slope: Mapping[str, Any]) -> str:
    """The constant of a slope, and what its tolerance leaves open."""
    if slope["contribution"] is None:
        return str(slope["constant"])
    return f"{slope['constant']}, whose tolerance moves the value by {display.number(slope['contribution'], 2)}"


def _check(check: Mapping[str, Any], result: Mapping[str, Any]) -> Iterator[str]:
    figure = ""
    if check["figure"] is not None:
        figure = f"{check['figure']:.1e}"
        if check["threshold"] is not None:
            figure += f" (at most {check['threshold']:.0e})"
    yield f"  {check['status']:<16}{check['name']:<{_CHECK_COLUMN}}{figure}".rstrip()
    if check["status"] == "failed":
        yield f"{'':18}{check['sentence']}"
        where = check["where"]
        if where and where["place"] is not None and result["curve"] is not None:
            independent = result["curve"]["independent"]
            place = display.quantity(where["place"], independent["unit"])
            subject = f", {where['subject']}" if where["subject"] else ""
            yield f"{'':18}worst at {independent['name']} = {place}{subject}"


def _diagnosis(diagnosis: Mapping[str, Any] | None) -> Iterator[str]:
    if diagnosis is None:
        return
    yield ""
    yield f"Diagnosis: {diagnosis['sentence']}"
    for finding in diagnosis["findings"]:
        parts = [finding["condition"]]
        if finding["amount"] is not None:
            parts.append(f"by {display.quantity(finding['amount'], finding['unit'], 4)}")
        if finding["where"] and finding["where"]["place"] is not None:
            parts.append(f"at {display.number(finding['where']['place'], 4)}")
        if finding["note"]:
            parts.append(finding["note"])
        yield "  " + ", ".join(part for part in parts if part)


def reading_text(source: Mapping[str, Any], reading: Mapping[str, Any]) -> str:
    """How a document was understood, in lines."""
    independent = reading["independent"]
    way = f"{independent['name']} from {independent['from']} to {independent['to']}"
    lines = [
        str(source.get("title") or "Untitled problem"),
        "",
        _row("over", f"{way} [{independent['unit']}]" if independent["unit"] else way),
        *(_row("unknown", unknown["sentence"]) for unknown in reading["unknowns"]),
        _row("functional", reading["functional"]["sentence"]),
        _row("freedom", reading["freedom"]["sentence"]),
        *(_row("note", note) for note in reading["notes"]),
    ]
    return "\n".join(lines)
