"""What the caller asks for in `Accept` (RFC 9110, section 12.5.1) and in `Prefer` (RFC 7240)."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

JSON = "application/json"
HTML = "text/html"

_PREFERENCE = re.compile(r'\s*([\w!#$%&\'*+.^`|~-]+)\s*(?:=\s*("(?:[^"\\]|\\.)*"|[^;,\s]*))?[^,]*(?:,|$)')


def best(accept: str, offers: Sequence[str]) -> str | None:
    """The offer that the caller likes best, the earlier one where it is all the same; None where none will do."""
    ranges = _ranges(accept)
    qualities = [_quality(ranges, offer) for offer in offers]
    top = max(qualities)
    return offers[qualities.index(top)] if top > 0 else None


def wants_page(accept: str) -> bool:
    """True for a browser: it names HTML and likes it at least as much as JSON."""
    ranges = _ranges(accept)
    named = any(kind == HTML for kind, _ in ranges)
    return named and _quality(ranges, HTML) >= max(_quality(ranges, JSON), 1e-9)


def _ranges(accept: str) -> list[tuple[str, float]]:
    ranges = []
    for part in (accept or "*/*").split(","):
        kind, *parameters = (piece.strip().lower() for piece in part.split(";"))
        quality = 1.0
        for parameter in parameters:
            if parameter.startswith("q="):
                try:
                    quality = min(1.0, max(0.0, float(parameter[2:])))
                except ValueError:
                    quality = 0.0
        ranges.append((kind, quality if math.isfinite(quality) else 0.0))
    return ranges


def _quality(ranges: list[tuple[str, float]], offer: str) -> float:
    """The most exact range decides."""
    for kind in (offer, offer.partition("/")[0] + "/*", "*/*"):
        matching = [quality for name, quality in ranges if name == kind]
        if matching:
            return max(matching)
    return 0.0


@dataclass(frozen=True, slots=True)
class Preferences:
    """`wait` seconds (None where not asked for), `whole` for `return=representation`.

    `respond-async` together with `wait` asks for an answer at hand only after that time (RFC 7240, section 4.3).
    """

    wait: float | None = None
    respond_async: bool = False
    whole: bool = False

    def applied(self, *, ended: bool) -> str:
        """The value of `Preference-Applied`, "" where none was honoured; `ended`: the run did in time."""
        honoured = {
            f"wait={self.wait or 0:g}": self.wait is not None,
            "respond-async": self.respond_async and not ended,
            "return=representation": self.whole and ended,
        }
        return ", ".join(text for text, done in honoured.items() if done)


def preferences(prefer: str, longest: float) -> Preferences:
    """Read `Prefer`; what is unknown or cannot be read is ignored, as RFC 7240 asks; `wait` is cut at `longest`."""
    found: dict[str, str] = {}
    for name, value in _PREFERENCE.findall(prefer):
        found.setdefault(name.lower(), value.strip('"'))
    wait = found.get("wait", "")
    return Preferences(
        wait=min(float(wait), longest) if wait.isascii() and wait.isdigit() and len(wait) < 10 else None,
        respond_async="respond-async" in found,
        whole=found.get("return", "").lower() == "representation",
    )
