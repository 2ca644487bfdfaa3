"""What people read must not say more than is known."""

import re
from datetime import UTC, datetime

import pytest
from hypothesis import given
from hypothesis import strategies as st

from web import display


@pytest.mark.parametrize(
    ("value", "text"),
    [
        pytest.param(None, "—", id="nothing known"),
        pytest.param(0.0, "0", id="zero"),
        pytest.param(-1.5, "−1.5", id="a real minus sign"),
        pytest.param(0.1, "0.1", id="no needless digits"),
        pytest.param(123456.7, "123457", id="six significant digits"),
        pytest.param(99999.99999, "100000", id="rounded up to one digit more"),
        pytest.param(1e6, "1·10⁶", id="large"),
        pytest.param(2.1e-9, "2.1·10⁻⁹", id="small"),
        pytest.param(float("inf"), "∞", id="without bound"),
        pytest.param(float("nan"), "—", id="no number"),
    ],
)
def test_numbers_are_short_and_plain(value, text):
    assert display.number(value) == text


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        pytest.param(0.58294012, 1.5e-6, "0.582940 ± 0.000002", id="as many digits as the bound supports"),
        pytest.param(0.58294012, 2e-9, "0.582940120 ± 2·10⁻⁹", id="no wall of zeros"),
        pytest.param(1500.0, 200.0, "1500 ± 200", id="bound above one"),
        pytest.param(3.2e-8, 1e-12, "(3.2000 ± 0.0001)·10⁻⁸", id="small value"),
        pytest.param(3.2e-8, 1e-3, "3.2·10⁻⁸ ± 0.001", id="bound above the value"),
        pytest.param(1.0, 0.95, "1 ± 1", id="bound rounded up"),
        pytest.param(1.0, None, "1", id="no bound known"),
    ],
)
def test_a_value_has_the_digits_that_its_error_supports(value, error, text):
    assert display.with_error(value, error) == text


@given(st.floats(1e-12, 1e12), st.floats(1e-12, 1.0))
def test_the_shown_interval_holds_the_true_one(value, relative):
    error = value * relative
    match = re.fullmatch(r"\(?(.+?) ± (.+?)(?:\)·10(.+))?", display.with_error(value, error))
    scale = 10.0 ** _power(match[3]) if match[3] else 1.0
    shown, bound = _read(match[1]) * scale, _read(match[2]) * scale
    assert bound >= error * (1 - 1e-9)
    assert abs(shown - value) <= bound + 1e-9 * value


def _read(text):
    mantissa, _, power = text.partition("·10")
    return float(mantissa.replace("−", "-")) * (10.0 ** _power(power) if power else 1.0)


def _power(raised):
    return int(raised.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")))


def test_units_are_set_as_in_print():
    assert display.unit("kg*m/s^2") == "kg·m/s²"
    assert display.quantity(2.5, "m^-1") == "2.5\N{NO-BREAK SPACE}m⁻¹"
    assert display.quantity(None, "m") == "—"


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.0123, "12 ms"), (0.84, "0.84 s"), (12.34, "12.3 s"), (245, "4 min 5 s"), (7800, "2 h 10 min"), (None, "—")],
)
def test_durations_have_the_unit_that_fits(seconds, text):
    assert display.duration(seconds).replace("\N{NO-BREAK SPACE}", " ") == text


def test_a_moment_of_today_needs_no_date():
    now = datetime(2026, 12, 1, 15, 0, tzinfo=UTC)
    assert display.moment(datetime(2026, 12, 1, 9, 5, tzinfo=UTC), now) == "today, 09:05 UTC"
    assert display.moment(datetime(2026, 11, 3, 9, 5, tzinfo=UTC), now) == "3 Nov 2026, 09:05 UTC"


def test_stationary_is_good_only_where_it_was_sought():
    assert display.tone("stationary", "stationary") == "good"
    assert display.tone("stationary", "minimum") == "fair"
    assert display.tone("waiting") == "busy"
    assert display.tone(None) == ""
