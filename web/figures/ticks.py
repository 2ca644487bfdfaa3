"""Round numbers along an axis."""

from __future__ import annotations

import math

from web.display import unit

_STEPS = (1.0, 2.0, 2.5, 5.0, 10.0)


def ticks(low: float, high: float, about: int = 5) -> tuple[float, ...]:
    """Round numbers from `low` to `high`, about so many, both ends included where they are round themselves."""
    rough = (high - low) / about
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in _STEPS if factor * power >= rough * (1 - 1e-9))
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return tuple(round(count * step, 12 - math.floor(math.log10(step))) + 0.0 for count in range(first, last + 1))


def decades(low: float, high: float, most: int = 6) -> tuple[float, ...]:
    """Powers of ten from `low` to `high` (both above 0), thinned to at most `most`."""
    first, last = math.ceil(math.log10(low) - 1e-9), math.floor(math.log10(high) + 1e-9)
    stride = max(1, math.ceil((last - first + 1) / most))
    return tuple(10.0**power for power in range(first, last + 1, stride))


def power_of_ten(mark: float) -> str:
    """`10⁻⁹` for 1e-9."""
    return unit(f"10^{round(math.log10(mark))}")
