"""The text of a derived unit: `m` per `s` twice is `m/s^2`."""

from __future__ import annotations

from functools import lru_cache

from solvers.unit_text import UnitTextError, merged, raised, read_symbols, write_symbols


@lru_cache(maxsize=1024)
def per(unit: str, divisor: str, power: int = 1) -> str:
    """The unit of a quantity in `unit` divided `power` times by one in `divisor`; "" where nothing is left."""
    if not divisor or not power:
        return unit
    try:
        return write_symbols(merged(read_symbols(unit) + raised(read_symbols(divisor), -power)))
    except UnitTextError:  # of an older document: shown as it is
        return f"({unit or '1'})/({divisor})" + (f"^{power}" if power > 1 else "")


def bracketed(name: str, unit: str) -> str:
    """A heading as tables and axes write it: `x [m]`, or the bare name where there is no unit."""
    return f"{name} [{unit}]" if unit else name
