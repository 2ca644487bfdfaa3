"""What units mean: checked against Pint, the SI brochure's relations, and the rules of values with tolerances."""

import math
from contextlib import suppress
from fractions import Fraction

import pint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.units import _ALONE, _PREFIXES, _WITH_PREFIX, BASE, PURE, parse_quantity, parse_unit
from solvers.unit_text import UnitTextError, merged, raised, read_symbols, write_symbols

REGISTRY = pint.UnitRegistry()
NAMES = {"Ω": "ohm", "Ohm": "ohm", "°": "degree", "%": "percent", "‰": "permille", "d": "day", "t": "metric_ton",
         "Å": "angstrom"}  # fmt: skip
PURE_BASES = ("radian", "count")
LONG = {"m": "meter", "kg": "kilogram", "s": "second", "A": "ampere", "K": "kelvin", "mol": "mole", "cd": "candela"}


@pytest.mark.parametrize("name", [*_ALONE, *_WITH_PREFIX])
def test_our_table_agrees_with_pint(name):
    ours = parse_unit(name)
    theirs = REGISTRY.Quantity(1.0, NAMES.get(name, name)).to_base_units()
    assert ours.factor == pytest.approx(theirs.magnitude, rel=1e-12)
    powers = {str(unit): power for unit, power in theirs.unit_items() if str(unit) not in PURE_BASES}
    assert powers == {LONG[base]: power for base, power in zip(BASE, ours.dimension, strict=True) if power}


@pytest.mark.parametrize("prefix", [prefix for prefix in _PREFIXES if prefix not in ("μ",)])
def test_our_prefixes_agree_with_pint(prefix):
    assert parse_unit(prefix + "m").factor == pytest.approx(REGISTRY(f"1 {prefix}m").to_base_units().magnitude)


@pytest.mark.parametrize(
    ("text", "factor", "dimension"),
    [
        ("m/s^2", 1.0, (1, 0, -2)),
        ("mm/s^3", 1e-3, (1, 0, -3)),
        ("kg*m/(s^2*K)", 1.0, (1, 1, -2, 0, -1)),
        ("kg*m/s^2/K", 1.0, (1, 1, -2, 0, -1)),
        ("1/s", 1.0, (0, 0, -1)),
        ("s^-1", 1.0, (0, 0, -1)),
        ("m^(-2)", 1.0, (-2,)),
        ("(m/s)^2", 1.0, (2, 0, -2)),
        ("m²/s³", 1.0, (2, 0, -3)),
        ("N·m", 1.0, (2, 1, -2)),
        ("km/h", 1 / 3.6, (1, 0, -1)),
        ("min", 60.0, (0, 0, 1)),  # the minute, not a milli-inch
        ("cd", 1.0, (0, 0, 0, 0, 0, 0, 1)),  # the candela, not a hundredth of a day
        ("deg", math.pi / 180, ()),
        ("rad", 1.0, ()),
        ("%", 0.01, ()),
        ("1", 1.0, ()),
        ("", 1.0, ()),
        ("inch", 0.0254, (1,)),  # by Pint
        ("lbf", 4.4482216152605, (1, 1, -2)),  # by Pint
        ("rpm", math.pi / 30, (0, 0, -1)),
        ("MPa*m^(1/2)", 1e6, (Fraction(-1, 2), 1, -2)),  # fracture toughness
        ("m^-1.5", 1.0, (Fraction(-3, 2),)),
        ("Å", 1e-10, (1,)),
        ("\N{ANGSTROM SIGN}", 1e-10, (1,)),
    ],
)
def test_units_mean_what_they_say(text, factor, dimension):
    measure = parse_unit(text)
    assert measure.factor == pytest.approx(factor, rel=1e-12)
    assert measure.dimension == tuple(Fraction(power) for power in (*dimension, *[0] * (7 - len(dimension))))


@pytest.mark.parametrize(
    "text",
    [
        "degC",
        "°C",
        "degF",
        "dB",
        "bit",
        "m s",
        "m^1.",
        "m^(1/0)",
        "m^(1/13)",
        "m^0.123",
        "m^(1",
        "m^/2",
        "3 m",
        "m/",
        "_",
        "m^99",
        "(" * 90,
    ],
)
def test_what_is_no_unit_is_refused(text):
    with pytest.raises(UnitTextError) as error:
        parse_unit(text)
    assert error.value.message
    assert error.value.hint


@settings(deadline=None)
@given(st.text(max_size=30))
def test_any_text_is_a_unit_or_refused(text):
    with suppress(UnitTextError):
        assert parse_unit(text).computable


SYMBOLS = st.lists(
    st.tuples(st.sampled_from(["m", "s", "kg", "deg", "N"]), st.fractions(-2, 2, max_denominator=4)), max_size=3
).map(merged)


@settings(deadline=None)
@given(SYMBOLS)
def test_writing_and_reading_are_inverse(symbols):
    assert sorted(read_symbols(write_symbols(symbols))) == sorted(symbols)


@settings(deadline=None)
@given(SYMBOLS, SYMBOLS)
def test_the_unit_of_a_product_is_the_product_of_units(one, other):
    together = parse_unit(write_symbols(merged(one + other)))
    first, second = parse_unit(write_symbols(one)), parse_unit(write_symbols(other))
    assert together.factor == pytest.approx(first.factor * second.factor)
    assert together.dimension == first.times(second).dimension
    assert parse_unit(write_symbols(raised(one, Fraction(-2)))).dimension == first.power(Fraction(-2)).dimension


@pytest.mark.parametrize(
    ("text", "value", "tolerance", "unit"),
    [
        ("9.80665 m/s^2", 9.80665, None, "m/s^2"),
        ("0.80 m +/- 0.01 m", 0.8, 0.01, "m"),
        ("0.80 m +/- 0.01", 0.8, 0.01, "m"),  # a bare tolerance has the unit of the value
        ("0.8 m ± 5 mm", 0.8, 0.005, "m"),
        ("80 cm +/- 1 cm", 0.8, 0.01, "cm"),
        ("0.8 m +/- 1 %", 0.8, 0.008, "m"),
        ("1.62 +/- 0.002", 1.62, 0.002, None),
        ("5 %", 0.05, None, "%"),
        ("30 deg", math.pi / 6, None, "deg"),
        ("-3e2mm", -0.3, None, "mm"),
        ("0.2", 0.2, None, None),
        ("0.2 1", 0.2, None, "1"),  # a pure number that is checked
    ],
)
def test_values_with_units_and_tolerances(text, value, tolerance, unit):
    quantity = parse_quantity(text)
    assert quantity.value == pytest.approx(value)
    assert quantity.tolerance == (None if tolerance is None else pytest.approx(tolerance))
    assert (quantity.measure and quantity.measure.text) == unit


def test_pure_numbers_have_no_dimension():
    assert parse_unit("mm/m").dimension == PURE
    assert parse_unit("mm/m").factor == pytest.approx(1e-3)
    assert parse_unit("mm/m").ambiguous
    assert not parse_unit("kg*m/s^2").ambiguous
