"""Problems with tables against closed forms: what was measured of a known law leads to the known curve.

Every promise of the catalogue holds here too, as far as the table itself is exact: value, honest error, verdict.
"""

from math import acosh, asin, cos, hypot, sin, sqrt

import numpy as np
import pytest
from scipy.interpolate import PchipInterpolator

from solvers.solution import Status, Verdict
from solvers.solve import solve
from tests.unit.service.assemble.stating import stated

MINIMUM = {Verdict.LOCAL_MINIMUM, Verdict.GLOBAL_MINIMUM}


def minimised(**members):
    solution = solve(stated(**{"dynamics": None} | members))
    assert solution.verdict in MINIMUM, (solution.verdict, solution.diagnosis)
    assert not [check for check in solution.checks if check.status is Status.FAILED]
    return solution


# ---- a rod of parabolic index ----

INDEX, REACH = 1.62, 8.3  # on the axis; where it would vanish, in mm
START, END, LENGTH = 0.8, -0.5, 12.0


def index(r):
    """n^2 = n0^2 (1 - (r/f)^2): the self-focusing rod."""
    return INDEX * np.sqrt(1 - (np.asarray(r) / REACH) ** 2)


def sinusoid():
    """Amplitude, frequency and phase of the ray.

    In a medium of this law meridional rays are exactly sinusoidal, with the frequency n0/(f beta) where beta = n cos of
    the slope is constant along the ray: Marchand (1978), Gradient Index Optics, section 4.2 (from memory).
    """
    beta = INDEX
    for _ in range(100):
        k = INDEX / (REACH * beta)
        slope = k * (END - START * cos(k * LENGTH)) / sin(k * LENGTH)
        beta = float(index(START)) / sqrt(1 + slope**2)
    amplitude = hypot(START, slope / k)
    return amplitude, k, asin(START / amplitude) if slope > 0 else np.pi - asin(START / amplitude), beta


def optical_length():
    """The integral of n ds = n^2 dz / beta along the sinusoid, in mm."""
    amplitude, k, phase, beta = sinusoid()
    turned = sin(2 * (k * LENGTH + phase)) - sin(2 * phase)
    squares = amplitude**2 * (LENGTH / 2 - turned / (4 * k))
    return INDEX**2 / beta * (LENGTH - squares / REACH**2)


def rod(points, **more):
    radii = np.linspace(-2, 2, points)
    table = {"of": {"r": "mm"}, "points": [[float(r), float(n)] for r, n in zip(radii, index(radii), strict=True)]}
    return minimised(
        independent={"name": "z", "unit": "mm", "from": 0, "to": LENGTH},
        unknowns={"r": {"unit": "mm"}},
        tables={"n": table | more},
        functional={"seek": "minimum", "integrand": "n(r)*sqrt(1 + r'^2)"},
        endpoints=[f"r(0) = {START}", f"r({LENGTH:g}) = {END}"],
    )


@pytest.mark.parametrize(
    ("between", "points", "tolerance"),
    [
        ("smooth", 21, 1e-8),  # of fourth order
        ("smooth", 201, 1e-12),
        ("monotone", 201, 1e-7),  # of second order where the index has its maximum, else of third
        ("linear", 201, 1e-6),  # of second order
    ],
)
def test_the_ray_in_a_rod_of_parabolic_index_is_sinusoidal(between, points, tolerance):
    solution = rod(points, between=between)
    value = optical_length() * 1e-3
    assert abs(solution.value - value) <= tolerance * value + solution.value_error
    amplitude, k, phase, _ = sinusoid()
    z = np.linspace(0, LENGTH, 50)
    ray = solution.curve.evaluate("r", z * 1e-3) * 1e3
    np.testing.assert_allclose(ray, amplitude * np.sin(k * z + phase), atol=max(1e-6, 2e3 * tolerance) * START)


# ---- speeds that grow linearly: circular rays ----


def travel_time(start, end, gradient, speeds):
    """The least time between two points where the speed grows linearly: rays are arcs of circles.

    The metric is that of the hyperbolic plane; Slotnick (1959), Lessons in Seismic Computing (from memory), and case
    A05 of the catalogue.
    """
    distance = np.subtract(end, start) @ np.subtract(end, start)
    return acosh(1 + distance * gradient**2 / (2 * speeds[0] * speeds[1])) / gradient


@pytest.mark.parametrize("between", ["smooth", "monotone", "linear"])
def test_a_speed_that_grows_with_the_height_bends_rays_to_circles(between):
    heights = [0.3, 0.6, 1.0, 1.3, 1.6]
    solution = minimised(
        independent={"name": "x", "from": 0, "to": 1},
        unknowns={"y": {}},
        tables={"v": {"of": {"y": ""}, "points": [[y, y] for y in heights], "between": between}},
        functional={"seek": "minimum", "integrand": "sqrt(1 + y'^2)/v(y)"},
        endpoints=["y(0) = 1", "y(1) = 1"],
    )
    assert abs(solution.value - travel_time((0, 1), (1, 1), 1.0, (1, 1))) <= solution.value_error
    assert solution.value == pytest.approx(0.9624236501192069, rel=1e-9)  # arccosh(3/2)
    x = np.linspace(0, 1, 30)
    np.testing.assert_allclose(solution.curve.evaluate("y", x), np.sqrt(5 / 4 - (x - 0.5) ** 2), atol=1e-6)


@pytest.mark.parametrize(("between", "tolerance"), [("smooth", 1e-6), ("monotone", 2e-4), ("linear", 1e-3)])
def test_a_slowness_measured_on_a_grid_bends_rays_to_circles(between, tolerance):
    """The speed is 1 + 0.3 x + 0.4 y: along the grid's diagonals, so that both arguments matter."""
    x, y = np.linspace(0, 2, 21), np.linspace(-1, 2, 31)
    slowness = 1 / (1 + 0.3 * x[:, None] + 0.4 * y[None, :])
    rows = [[None, *y.tolist()], *([at, *row] for at, row in zip(x.tolist(), slowness.tolist(), strict=True))]
    solution = minimised(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {}},
        tables={"w": {"of": {"x": "", "y": ""}, "points": rows, "between": between}},
        functional={"seek": "minimum", "integrand": "w(x, y)*sqrt(1 + y'^2)"},
        endpoints=["y(0) = 0", "y(2) = 0.5"],
    )
    value = travel_time((0, 0), (2, 0.5), 0.5, (1, 1.8))
    assert abs(solution.value - value) <= tolerance * value + solution.value_error


# ---- the range ----

FALLING = {"of": {"y": ""}, "points": [[-1, 1.0], [0, 0.0], [0.1, -0.1]], "between": "linear"}


def test_a_curve_stays_where_its_table_was_measured():
    """y'' = -1/2 would lead to the height 1/4; the table ends at 0.1, and the curve rests there (Euler's equation)."""
    solution = minimised(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {}},
        tables={"w": FALLING},
        functional={"seek": "minimum", "integrand": "y'^2 + w(y)"},
        endpoints=["y(0) = 0", "y(2) = 0"],
    )
    heights = solution.curve.evaluate("y", np.linspace(0, 2, 99))
    assert heights.max() == pytest.approx(0.1, abs=1e-7)
    x = sqrt(0.4)  # it comes to rest without a corner: y = (x0^2 - (x0 - x)^2)/4
    assert solution.curve.evaluate("y", [x / 2])[0] == pytest.approx(0.1 * 0.75, abs=1e-6)


@pytest.mark.parametrize(("outside", "end", "price"), [("refuse", 0.1, -0.9), ("extend", 1.0, None)])
def test_a_range_that_binds_has_its_price(outside, end, price):
    """Least h^2/2 - h: at the end h of the range the value changes by h - 1 per unit of it."""
    solution = minimised(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {}},
        tables={"w": FALLING | {"outside": outside}},
        functional={"seek": "minimum", "integrand": "y'^2", "endpoint": "w(y(2))"},
        endpoints=["y(0) = 0"],
    )
    assert solution.curve.evaluate("y", [2.0])[0] == pytest.approx(end, abs=1e-7)
    prices = [one.price for one in solution.prices if one.label == "y(2) in the range of w"]
    assert prices == ([] if price is None else [pytest.approx(price, abs=1e-6)])


def test_a_path_beyond_the_range_is_said():
    solution = minimised(
        independent={"name": "x", "from": 0, "to": 2},
        unknowns={"y": {}},
        tables={"w": FALLING | {"outside": "extend"}},
        functional={"seek": "minimum", "integrand": "y'^2 + w(y)"},
        endpoints=["y(0) = 0", "y(2) = 0"],
    )
    used = "w is used for y from 0 to 0.25, but it was measured from -1 to 0.1"
    assert f"{used}: beyond that it goes on along its tangent." in solution.notes


@pytest.mark.parametrize("between", ["monotone", "linear"])
def test_a_disturbance_with_corners_is_met_exactly(between):
    """x' = u - d(t), least integral of u^2: u is constant (Cauchy and Schwarz), 1 + the integral of d."""
    knots, heights = [0.0, 0.2, 0.4, 0.6, 1.0], [0.0, 1.0, 0.2, 1.5, 0.0]
    solution = minimised(
        tables={"d": {"of": {"t": ""}, "points": [list(p) for p in zip(knots, heights, strict=True)],
                      "between": between}},
        dynamics=["x' = u - d(t)"],
    )  # fmt: skip
    # SciPy's monotone interpolant; the trapezoidal rule but for the corners that are rounded off.
    integral = 0.69 if between == "linear" else float(PchipInterpolator(knots, heights).integrate(0, 1))
    assert solution.value == pytest.approx((1 + integral) ** 2, rel=2e-7)
    assert len(solution.meshes) <= 4
