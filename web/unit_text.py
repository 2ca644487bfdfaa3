"""The text of a derivative's unit: `m` per `s` twice is `m/s^2`."""

from __future__ import annotations

import re

_FACTOR = re.compile(r"\s*([*/]?)\s*([^\W\d][\w%°]*|%|°|1)\s*(?:(?:\^|\*\*)\s*(-?\d+))?\s*")


def per(unit: str, divisor: str, power: int = 1) -> str:
    """The unit of a quantity in `unit` divided `power` times by one in `divisor`; "" where nothing is left.

    A text that is more than a chain of `*`, `/` and whole powers is kept as it is, in parentheses.
    """
    if not divisor or not power:
        return unit
    above, below = _factors(unit), _factors(divisor)
    if above is None or below is None:
        return f"({unit or '1'})/({divisor})" + (f"^{power}" if power > 1 else "")
    for name, exponent in below.items():
        above[name] = above.get(name, 0) - power * exponent
    return _text(above)


def bracketed(name: str, unit: str) -> str:
    """A heading as tables and axes write it: `x [m]`, or the bare name where there is no unit."""
    return f"{name} [{unit}]" if unit else name


def _factors(unit: str) -> dict[str, int] | None:
    """Names with their exponents, in the order written; None where the text is no plain chain."""
    factors: dict[str, int] = {}
    place = 0
    while place < len(unit):
        match = _FACTOR.match(unit, place)
        if match is None or bool(match[1]) != bool(place):
            return None
        if match[2] != "1":
            exponent = int(match[3] or 1)
            factors[match[2]] = factors.get(match[2], 0) + (-exponent if match[1] == "/" else exponent)
        place = match.end()
    return factors


def _text(factors: dict[str, int]) -> str:
    above = [_power(name, exponent) for name, exponent in factors.items() if exponent > 0]
    below = [_power(name, -exponent) for name, exponent in factors.items() if exponent < 0]
    if not above and not below:
        return ""
    return "/".join(["*".join(above) or "1", *below])


def _power(name: str, exponent: int) -> str:
    return name if exponent == 1 else f"{name}^{exponent}"
