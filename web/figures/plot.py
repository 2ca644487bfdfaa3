"""A plot before it is drawn: the still picture (SVG) and the living one (Plotly) are both made from it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from solvers.curve import Array
from web.palette import LINES, Line

NOTHING: Array = np.empty(0)


@dataclass(frozen=True, slots=True)
class Trace:
    """One line: `places` and `values` of the same length; NaN lifts the pen.  `number` picks colour and dash.

    `marked` puts a dot on each value, `joined` draws the line between them; `errors` are half lengths of error bars.
    `band` is how far the line may be off on either side (of the same length), or None.
    """

    label: str
    places: Array
    values: Array
    number: int = 0
    marked: bool = False
    joined: bool = True
    errors: Array = field(default_factory=lambda: NOTHING)
    band: Array | None = None

    def reach(self) -> tuple[Array, ...]:
        """The values, and the ends of their error bars."""
        return (self.values - self.errors, self.values + self.errors) if len(self.errors) else (self.values,)

    def edges(self, low: float, high: float) -> tuple[Array, Array]:
        """Lower and upper edge of the band within a range of values."""
        width = np.zeros_like(self.values) if self.band is None else self.band
        return np.clip(self.values - width, low, high), np.clip(self.values + width, low, high)

    @property
    def line(self) -> Line:
        """Its style out of the palette."""
        return LINES[self.number % len(LINES)]

    @property
    def colour(self) -> str:
        """Name of the style sheet's variable that holds its colour."""
        return f"--line-{self.number % len(LINES) + 1}"


@dataclass(frozen=True, slots=True)
class Span:
    """A stretch of the lower axis that is shaded in the colour of a line (its `number`)."""

    start: float
    end: float
    number: int

    @property
    def colour(self) -> str:
        """Name of the style sheet's variable that holds its colour."""
        return f"--line-{self.number % len(LINES) + 1}"


@dataclass(frozen=True, slots=True)
class Plot:
    """Lines over common axes.

    `finding` says in one sentence what is to be seen; `table` holds some values of it (rows, 1 + lines), NaN where
    there is none.  `rug` marks places on the lower axis, `spans` are shaded.  `equal` asks for one scale on both axes,
    `from_zero` for a linear axis that begins at 0, `whole_places` for whole numbers along the lower axis.
    """

    key: str
    heading: str
    finding: str
    across: str
    up: str
    traces: tuple[Trace, ...]
    table: Array
    table_headings: tuple[str, ...]
    logarithmic: bool = False
    equal: bool = False
    from_zero: bool = False
    whole_places: bool = False
    rug: Array = field(default_factory=lambda: NOTHING)
    spans: tuple[Span, ...] = ()

    def extent(self) -> tuple[float, float, float, float]:
        """Least and greatest place, least and greatest value over all lines; never of width zero."""
        places = np.concatenate([trace.places for trace in self.traces])
        values = np.concatenate([part for trace in self.traces for part in trace.reach()])
        low, high = _widened(np.concatenate([values, *_bands(self.traces, values)]))
        return (*_widened(places), 0.0 if self.from_zero and not self.logarithmic else low, high)


def _bands(traces: Sequence[Trace], values: Array) -> Iterator[Array]:
    """The edges of all bands, as far as they lie within half the extent of the lines: where a curve is vertical a band
    has no end."""
    low, high = _widened(values)
    for trace in traces:
        if trace.band is not None:
            yield from trace.edges(low - (high - low) / 2, high + (high - low) / 2)


def _widened(numbers: Array) -> tuple[float, float]:
    finite = numbers[np.isfinite(numbers)]
    if not len(finite):
        return 0.0, 1.0
    low, high = float(finite.min()), float(finite.max())
    if high - low <= 1e-12 * max(abs(low), abs(high)):
        reach = 0.5 * abs(low) or 1.0
        return low - reach, high + reach
    return low, high
