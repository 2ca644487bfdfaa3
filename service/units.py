"""What units mean: dimension and size in coherent SI units, and values written with a unit and a tolerance.

The units of the SI and the most usual others are known here; the rest is looked up in Pint: by bare name only, since
Pint evaluates what it is given, and only when one is used, since loading it takes half a second and 14 MB.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

from service.complaints import closest
from solvers.unit_text import Exponent, Symbols, UnitTextError, merged, raised, read_symbols, write_symbols
from solvers.units import Unit

Dimension = tuple[Exponent, ...]
"""Exponents of m, kg, s, A, K, mol, cd."""

BASE = ("m", "kg", "s", "A", "K", "mol", "cd")
PURE: Dimension = (0,) * len(BASE)


def _dimension(**exponents: int) -> Dimension:
    return tuple(exponents.get(name, 0) for name in BASE)


# BIPM (2019), The International System of Units, 9th edition, tables 2, 4, 7 and 8 (from memory).
_PREFIXES = {
    "Q": 1e30, "R": 1e27, "Y": 1e24, "Z": 1e21, "E": 1e18, "P": 1e15, "T": 1e12, "G": 1e9, "M": 1e6, "k": 1e3,
    "h": 1e2, "da": 1e1, "d": 1e-1, "c": 1e-2, "m": 1e-3, "µ": 1e-6, "μ": 1e-6, "u": 1e-6, "n": 1e-9, "p": 1e-12,
    "f": 1e-15, "a": 1e-18, "z": 1e-21, "y": 1e-24, "r": 1e-27, "q": 1e-30,
}  # fmt: skip
_WITH_PREFIX: dict[str, tuple[float, Dimension]] = {
    "m": (1.0, _dimension(m=1)), "g": (1e-3, _dimension(kg=1)), "s": (1.0, _dimension(s=1)),
    "A": (1.0, _dimension(A=1)), "K": (1.0, _dimension(K=1)), "mol": (1.0, _dimension(mol=1)),
    "cd": (1.0, _dimension(cd=1)), "rad": (1.0, PURE), "sr": (1.0, PURE), "Hz": (1.0, _dimension(s=-1)),
    "N": (1.0, _dimension(kg=1, m=1, s=-2)), "Pa": (1.0, _dimension(kg=1, m=-1, s=-2)),
    "J": (1.0, _dimension(kg=1, m=2, s=-2)), "W": (1.0, _dimension(kg=1, m=2, s=-3)),
    "C": (1.0, _dimension(A=1, s=1)), "V": (1.0, _dimension(kg=1, m=2, s=-3, A=-1)),
    "F": (1.0, _dimension(kg=-1, m=-2, s=4, A=2)), "Ω": (1.0, _dimension(kg=1, m=2, s=-3, A=-2)),
    "S": (1.0, _dimension(kg=-1, m=-2, s=3, A=2)), "Wb": (1.0, _dimension(kg=1, m=2, s=-2, A=-1)),
    "T": (1.0, _dimension(kg=1, s=-2, A=-1)), "H": (1.0, _dimension(kg=1, m=2, s=-2, A=-2)),
    "lm": (1.0, _dimension(cd=1)), "lx": (1.0, _dimension(cd=1, m=-2)), "Bq": (1.0, _dimension(s=-1)),
    "Gy": (1.0, _dimension(m=2, s=-2)), "Sv": (1.0, _dimension(m=2, s=-2)), "kat": (1.0, _dimension(mol=1, s=-1)),
    "l": (1e-3, _dimension(m=3)), "L": (1e-3, _dimension(m=3)), "bar": (1e5, _dimension(kg=1, m=-1, s=-2)),
    "eV": (1.602176634e-19, _dimension(kg=1, m=2, s=-2)),
}  # fmt: skip
_ALONE: dict[str, tuple[float, Dimension]] = {
    "min": (60.0, _dimension(s=1)), "h": (3600.0, _dimension(s=1)), "d": (86400.0, _dimension(s=1)),
    "deg": (math.pi / 180, PURE), "°": (math.pi / 180, PURE), "%": (1e-2, PURE), "‰": (1e-3, PURE),
    "in": (0.0254, _dimension(m=1)), "ft": (0.3048, _dimension(m=1)), "rpm": (math.pi / 30, _dimension(s=-1)),
    "lb": (0.45359237, _dimension(kg=1)), "atm": (101325.0, _dimension(kg=1, m=-1, s=-2)),
    "Wh": (3600.0, _dimension(kg=1, m=2, s=-2)), "kWh": (3.6e6, _dimension(kg=1, m=2, s=-2)),
    "t": (1e3, _dimension(kg=1)), "ha": (1e4, _dimension(m=2)), "Å": (1e-10, _dimension(m=1)),
    "Ohm": (1.0, _WITH_PREFIX["Ω"][1]),
}  # fmt: skip
_PINT_BASE = {"meter": 0, "kilogram": 1, "second": 2, "ampere": 3, "kelvin": 4, "mole": 5, "candela": 6}


@dataclass(frozen=True, slots=True)
class Measure:
    """A unit understood: its symbols as written, its dimension, its size in coherent SI units."""

    symbols: Symbols = ()
    dimension: Dimension = PURE
    factor: float = 1.0

    def times(self, other: Measure, exponent: Exponent = 1) -> Measure:
        """The unit of a product with the other to some power."""
        if not other.symbols and other.dimension == PURE and other.factor == 1:
            return self
        return _product(self, other, exponent)

    def power(self, exponent: Exponent) -> Measure:
        """The unit of a power."""
        return ONE.times(self, exponent)

    @property
    def computable(self) -> bool:
        """Whether numbers in this unit stay within the range of double precision."""
        return 1e-100 < self.factor < 1e100

    @property
    def text(self) -> str:
        """As one writes it: `kg*m/s^2`, or `1` for a pure number."""
        return write_symbols(self.symbols) or "1"

    @property
    def unit(self) -> Unit:
        """As the solver's records carry it."""
        return Unit(write_symbols(self.symbols), self.factor)

    @property
    def coherent(self) -> Measure:
        """The SI unit of the same dimension, written in base units."""
        powers = sorted(zip(BASE, self.dimension, strict=True), key=lambda pair: pair[0] != "kg")
        return Measure(tuple((name, power) for name, power in powers if power), self.dimension, 1.0)

    @property
    def without_angles(self) -> Measure:
        """Without deg and the like beside other units (`m*deg` is told in m), but for angles per time."""
        return _without_angles(self)

    @property
    def ambiguous(self) -> bool:
        """Whether two symbols measure the same thing, as in mm/m: nobody can tell what a bare number would be in."""
        kinds = [dimension for _, dimension in (_meaning(name) for name, _ in self.symbols) if dimension != PURE]
        return len(set(kinds)) < len(kinds)


@lru_cache(maxsize=4096)
def _product(one: Measure, other: Measure, exponent: Exponent) -> Measure:
    dimension = tuple(a + b * exponent for a, b in zip(one.dimension, other.dimension, strict=True))
    symbols = merged(one.symbols + raised(other.symbols, exponent))
    try:
        factor = one.factor * other.factor ** float(exponent)
    except OverflowError:
        factor = math.inf
    return Measure(symbols, dimension, factor)


@lru_cache(maxsize=1024)
def _without_angles(measure: Measure) -> Measure:
    kept = ONE
    for name, exponent in measure.symbols:
        factor, dimension = _meaning(name)
        if dimension != PURE:
            kept = kept.times(Measure(((name, 1),), dimension, factor), exponent)
    rate = all(not power for name, power in zip(BASE, kept.dimension, strict=True) if name != "s")
    return measure if rate else kept


ONE = Measure()
"""The unit of pure numbers."""


def ratio(power: float, finest: int = 1000) -> Exponent:
    """The nearest ratio with a denominator up to `finest`."""
    return int(power) if power == int(power) else Fraction(power).limit_denominator(finest)


@lru_cache(maxsize=1024)
def parse_unit(text: str) -> Measure:
    """The unit that a text such as `kg*m/s^2`, `1/s` or `deg` means.  Raises UnitTextError."""
    total = ONE
    for name, exponent in read_symbols(text):
        factor, dimension = _meaning(name)
        total = total.times(Measure(((name, 1),), dimension, factor), exponent)
        if not total.computable:
            raise UnitTextError(f"the unit “{text}” is beyond the range of numbers", "choose smaller powers")
    return total


@lru_cache(maxsize=1024)
def _meaning(name: str) -> tuple[float, Dimension]:
    """Size and dimension of one name.  Raises UnitTextError."""
    name = name.replace("\N{OHM SIGN}", "Ω").replace("\N{ANGSTROM SIGN}", "Å")
    if name in _ALONE:
        return _ALONE[name]
    if name in _WITH_PREFIX:
        return _WITH_PREFIX[name]
    for prefix, size in _PREFIXES.items():
        if name.startswith(prefix) and name[len(prefix) :] in _WITH_PREFIX:
            factor, dimension = _WITH_PREFIX[name[len(prefix) :]]
            return factor * size, dimension
    found = _in_pint(name) if len(name) > 1 else None
    if found is None:
        near = closest(name, (*_ALONE, *_WITH_PREFIX, "mm", "cm", "km", "kg", "ms", "kN", "MPa", "kW"))
        hint = f"did you mean “{near}”?" if near else "units are names such as m, mm, s, kg, N, deg with * / ^"
        raise UnitTextError(f"there is no unit “{name[:30]}”", hint)
    return found


def _in_pint(name: str) -> tuple[float, Dimension] | None:
    """What Pint knows of a bare name, or None.  Raises UnitTextError for scales that do not start at zero."""
    if name.startswith("°"):
        name = "deg" + name[1:]
    try:
        registry = _registry()
        factor, units = registry.get_base_units(name)
        powers = dict(registry.Unit(units)._units)
        offset = registry.Quantity(0.0, name).to_base_units().magnitude
    except Exception:  # Pint raises a dozen different exceptions on names that it does not know
        return None
    if offset:
        hint = "use K for temperatures, plain ratios for levels"
        raise UnitTextError(f"the scale “{name}” does not start at zero", hint)
    for pure in ("radian", "count"):
        powers.pop(pure, None)
    if not set(powers) <= set(_PINT_BASE) or not factor > 0:
        return None
    dimension = list(PURE)
    for base, power in powers.items():
        dimension[_PINT_BASE[base]] = ratio(power, 12)
    return float(factor), tuple(dimension)


@lru_cache(maxsize=1)
def _registry() -> Any:
    import pint

    return pint.UnitRegistry(cache_folder=None)


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value with its unit (None: none was given) and tolerance, both in SI."""

    value: float
    tolerance: float | None
    measure: Measure | None


_NUMBER = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_VALUE = re.compile(rf"\s*(?P<value>{_NUMBER})\s*(?P<unit>.*?)\s*", re.DOTALL | re.ASCII)
_PLUS_MINUS = re.compile(r"\+/-|±|\+-")


def parse_quantity(text: str) -> Quantity:
    """`0.80 m +/- 0.01 m`, `9.80665 m/s^2`, `1.62 +/- 0.002`, `0.8 m +/- 1 %`, `5 %`.  Raises UnitTextError.

    A bare tolerance has the unit of the value.
    """
    parts = _PLUS_MINUS.split(text)
    if len(parts) > 2:
        raise UnitTextError("there is more than one +/-", "write a value, a unit, and one tolerance")
    value, measure = _number_and_unit(parts[0])
    size = measure.factor if measure else 1.0
    tolerance = None
    if len(parts) == 2:
        tolerance, of_tolerance = _number_and_unit(parts[1])
        if of_tolerance is None:
            tolerance *= size
        elif of_tolerance.text == "%" and measure is not None and measure.dimension != PURE:
            tolerance *= abs(value) * size * of_tolerance.factor
        elif of_tolerance.dimension == (measure or ONE).dimension and (measure or not of_tolerance.symbols):
            tolerance *= of_tolerance.factor
        else:
            told = f"in “{of_tolerance.text}”, the value in '{measure.text if measure else 'no unit'}'"
            raise UnitTextError(f"the tolerance is {told}", "give both in units of the same kind")
        if tolerance <= 0:
            raise UnitTextError("the tolerance is not positive", "write one standard deviation after +/-")
    if not math.isfinite(value * size) or not math.isfinite(tolerance or 0.0):
        raise UnitTextError("the value is beyond the range of numbers", "stay below 1e308 in SI units")
    return Quantity(value * size, tolerance, measure)


def _number_and_unit(text: str) -> tuple[float, Measure | None]:
    if "," in text:
        raise UnitTextError(f"a ',' stands in “{text.strip()[:40]}”", "a decimal number has a point: 1.5 m")
    match = _VALUE.fullmatch(text)
    if match is None:
        hint = 'write "9.81 m/s^2" or "0.80 m +/- 0.01 m"'
        raise UnitTextError(f"“{text.strip()[:40]}” is no number with a unit", hint)
    return float(match["value"]), parse_unit(match["unit"]) if match["unit"] else None
