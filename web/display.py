"""Numbers, units, durations, moments and verdicts as people read them."""

from __future__ import annotations

import math
import re
from datetime import UTC, datetime

_RAISED = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")

LEAST_PLAIN, MOST_PLAIN = 1e-3, 1e6
"""Between these a number is written without a power of ten."""

TONES = {
    "global minimum": "good",
    "global maximum": "good",
    "local minimum": "good",
    "local maximum": "good",
    "stationary": "fair",
    "best found": "fair",
    "not verified": "fair",
    "not a minimum": "bad",
    "not a maximum": "bad",
    "infeasible": "bad",
    "no optimum": "bad",
    "passed": "good",
    "failed": "bad",
    "stopped": "fair",
    "solving": "busy",
    "waiting": "busy",
}
"""Verdict, status of a check or state of a run -> the tag's class in `parts.css`; anything else is neutral ("")."""


def tone(word: str | None, seek: str = "") -> str:
    """The class of the tag for a verdict, a check or a state.  What was asked for is good, even "stationary"."""
    return "good" if word == seek == "stationary" else TONES.get(word or "", "")


def number(value: float | None, digits: int = 6) -> str:
    """`value` to so many significant digits: `0.58294`, `−1.5`, `2.1·10⁻⁹`; an em dash for None."""
    if value is None or math.isnan(value):
        return "—"
    if math.isinf(value):
        return "∞" if value > 0 else "−∞"
    if value == 0:
        return "0"
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    power = int(exponent)
    if LEAST_PLAIN <= abs(value) < MOST_PLAIN:
        text = f"{value:.{max(digits - 1 - power, 0)}f}"
        return _signed(_trimmed(text))
    return f"{_signed(_trimmed(mantissa))}·10{str(power).translate(_RAISED)}"


def with_error(value: float | None, error: float | None) -> str:
    """`value` with the digits that its error bound supports, and the bound: `0.582940 ± 0.000002`.

    The bound is rounded up to one digit, so it never looks smaller than it is.
    """
    if value is None or error is None or not math.isfinite(value) or not math.isfinite(error):
        return number(value)
    if error <= 0:
        return number(value, 12)
    place = math.floor(math.log10(error))
    lead = math.ceil(error / 10.0**place * (1 - 1e-12))
    if lead == 10:
        place, lead = place + 1, 1
    top = math.floor(math.log10(abs(value))) if value else place
    if not LEAST_PLAIN <= abs(value) < MOST_PLAIN and value:
        digits = max(min(top - place, 15), 0)
        mantissa = f"{value / 10.0**top:.{digits}f}"
        bound = f"{lead * 10.0 ** (place - top):.{digits}f}" if place <= top else number(lead * 10.0**place, 1)
        if place > top:
            return f"{number(value, 2)} ± {bound}"
        return f"({_signed(mantissa)} ± {bound})·10{str(top).translate(_RAISED)}"
    shown = max(-place, 0)
    if shown > 6:  # a wall of zeros reads worse than a power of ten
        return f"{_signed(f'{value:.{min(shown, 15)}f}')} ± {number(lead * 10.0**place, 1)}"
    if place > 0:
        return f"{_signed(f'{value:.0f}')} ± {lead * 10**place:.0f}"
    return f"{_signed(f'{value:.{shown}f}')} ± {lead * 10.0**place:.{shown}f}"


def unit(text: str) -> str:
    """A unit as print has it: `m/s^2` -> `m/s²`, `kg*m` -> `kg·m`."""
    raised = re.sub(r"(?:\^|\*\*)(-?\d+)", lambda match: match[1].translate(_RAISED), text)
    return raised.replace("*", "·")


def quantity(value: float | None, of: str, digits: int = 6) -> str:
    """A number with its unit, held together by a no-break space."""
    return joined(number(value, digits), of)


def joined(text: str, of: str) -> str:
    """A formatted number and its unit; no unit after a dash that stands for "none"."""
    return f"{text}\N{NO-BREAK SPACE}{unit(of)}" if of and text != "—" else text


def duration(seconds: float | None) -> str:
    """`12 ms`, `0.84 s`, `12.3 s`, `4 min 5 s`, `2 h 10 min`."""
    if seconds is None:
        return "—"
    if seconds < 0.0995:
        return f"{seconds * 1000:.0f}\N{NO-BREAK SPACE}ms"
    if seconds < 9.995:
        return f"{seconds:.2f}\N{NO-BREAK SPACE}s"
    if seconds < 59.95:
        return f"{seconds:.1f}\N{NO-BREAK SPACE}s"
    whole = round(seconds)
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


def moment(at: datetime, now: datetime) -> str:
    """A time of day where it is today, else the date too; in UTC and said so."""
    at, now = at.astimezone(UTC), now.astimezone(UTC)
    clock = f"{at:%H:%M} UTC"
    if at.date() == now.date():
        return f"today, {clock}"
    return f"{at.day} {at:%b %Y}, {clock}"


def _trimmed(text: str) -> str:
    return text.rstrip("0").rstrip(".") if "." in text else text


def _signed(text: str) -> str:
    return "−" + text[1:] if text.startswith("-") else text
