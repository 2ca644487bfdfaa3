"""Made-up problems of families whose answers are known: random numbers, and everything that is claimed is checked.

Regulators against the Riccati equation, shortest paths of curved spaces, eigenvalues, splines of least jerk, and
problems whose active limits were chosen first.  Value, curve, stated error and verdict; all from the default guess.
"""

import json
from itertools import pairwise

import numpy as np
import pytest
from numpy.polynomial import Polynomial
from scipy.integrate import quad, solve_ivp
from scipy.interpolate import make_interp_spline

from service.assemble import assemble
from service.spec import read
from solvers.solution import Verdict
from solvers.solve import solve

BEST = (Verdict.GLOBAL_MINIMUM,)
LEAST = (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM)


def solved(integrand, endpoints, start, end, unknowns, variable="x", **more):
    document = {
        "format": 1,
        "independent": {"name": variable, "from": float(start), "to": float(end)},
        "unknowns": unknowns if isinstance(unknowns, dict) else {name: {} for name in unknowns},
        "functional": {"seek": "minimum"}
        | ({"integrand": integrand} if integrand else {})
        | more.pop("functional", {}),
        "endpoints": endpoints,
    }
    return solve(assemble(read(json.dumps(document | more).encode())))


def keeps_its_word(found, value, verdicts, known_to=0.0, tight=1e-6):
    """Value, stated error and verdict."""
    assert found.verdict in verdicts
    assert abs(found.value - value) <= found.value_error + known_to
    assert found.value_error <= tight * max(abs(value), 1e-3)


def written(coefficients, names):
    return " + ".join(f"({float(c)!r})*{name}" for c, name in zip(coefficients, names, strict=True))


@pytest.mark.parametrize("seed", range(6))
def test_a_regulator_follows_the_riccati_equation(seed):
    """The least cost is x0' P(0) x0 where -P' = A'P + PA - P B B' P + Q, P(T) = F.

    Kalman (1960), Contributions to the theory of optimal control (from memory); integrated by SciPy to 1e-11.
    """
    random = np.random.default_rng(seed)
    n, m = (2, 1) if seed % 2 else (3, 2)
    a, b, x0 = random.normal(size=(n, n)), random.normal(size=(n, m)), random.normal(size=n)
    q, f = (np.diag(random.uniform(0, 3, n)) for _ in range(2))
    span = float(random.uniform(0.5, 3))
    states, controls = [f"x{k}" for k in range(n)], [f"u{k}" for k in range(m)]
    names = (*states, *controls)
    squares = [f"{name}^2" for name in states]
    found = solved(
        f"{written(np.diag(q), squares)} + {' + '.join(f'{u}^2' for u in controls)}",
        [f"{name}(0) = {float(v)!r}" for name, v in zip(states, x0, strict=True)],
        0, span, names, "t",
        functional={"endpoint": written(np.diag(f), [f"{name}({span!r})^2" for name in states])},
        dynamics=[f"x{k}' = {written([*a[k], *b[k]], names)}" for k in range(n)],
    )  # fmt: skip

    def backwards(_, flat):
        p = flat.reshape(n, n)
        return (a.T @ p + p @ a - p @ b @ b.T @ p + q).ravel()

    precise = {"rtol": 1e-12, "atol": 1e-12, "dense_output": True, "method": "DOP853"}
    riccati = solve_ivp(backwards, (0, span), f.ravel(), **precise).sol
    value = float(x0 @ riccati(span).reshape(n, n) @ x0)
    keeps_its_word(found, value, BEST, known_to=1e-9 * value)
    closed = solve_ivp(lambda t, x: (a - b @ b.T @ riccati(span - t).reshape(n, n)) @ x, (0, span), x0, **precise).sol
    at = np.linspace(0, span, 20)
    for k, name in enumerate(states):
        size = np.abs(closed(at)[k]).max()
        np.testing.assert_allclose(found.curve.evaluate(name, at), closed(at)[k], atol=1e-5 * size)


def sphere(p, q):
    """Distance of (longitude, colatitude) on the unit sphere."""
    return np.arccos(np.cos(p[1]) * np.cos(q[1]) + np.sin(p[1]) * np.sin(q[1]) * np.cos(p[0] - q[0]))


def half_space(p, q):
    """Distance in the upper half space of curvature -1; the last coordinate is the height."""
    difference = np.subtract(p, q)
    return np.arccosh(1 + difference @ difference / (2 * p[-1] * q[-1]))


SPACES = {
    "sphere": ("sqrt(q'^2 + sin(q)^2)", ["q"], sphere, [(0.5, 2.6)], {"q": {"within": [0.05, 3.09]}}),
    "hyperbolic plane": ("sqrt(1 + y'^2)/y", ["y"], half_space, [(0.3, 3.0)], {"y": {"within": [0.01, None]}}),
    "hyperbolic space": (
        "sqrt(1 + y'^2 + z'^2)/z", ["y", "z"], half_space, [(-2, 2), (0.3, 3.0)],
        {"y": {}, "z": {"within": [0.01, None]}},
    ),
    "sphere x line": (
        "sqrt(q'^2 + sin(q)^2 + h'^2)", ["q", "h"], lambda p, q: np.hypot(sphere(p[:2], q[:2]), p[2] - q[2]),
        [(0.5, 2.6), (-2, 2)], {"q": {"within": [0.05, 3.09]}, "h": {}},
    ),
}  # fmt: skip
"""By name: length of a curve over its first coordinate, the other coordinates, distance, ranges of these, unknowns.

Closed forms: do Carmo (1992), Riemannian Geometry, chapters 3 and 8 (from memory).
"""


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("name", SPACES)
def test_the_shortest_path_of_a_curved_space(name, seed):
    """Its length is the distance, and so are both parts of it together at every place between."""
    integrand, names, distance, ranges, unknowns = SPACES[name]
    random = np.random.default_rng(seed)
    ends = [np.array([x, *(random.uniform(*r) for r in ranges)]) for x in (0.0, float(random.uniform(0.3, 2.2)))]
    endpoints = [f"{n}({float(p[0])!r}) = {float(v)!r}" for p in ends for n, v in zip(names, p[1:], strict=True)]
    found = solved(integrand, endpoints, ends[0][0], ends[1][0], unknowns)
    keeps_its_word(found, float(distance(*ends)), LEAST)
    for share in (0.2, 0.5, 0.8):
        x = share * ends[1][0]
        between = np.array([x, *(found.curve.evaluate(n, [x])[0] for n in names)])
        assert distance(ends[0], between) + distance(between, ends[1]) == pytest.approx(distance(*ends), rel=1e-7)


@pytest.mark.parametrize("free", [False, True], ids=["fixed", "free"])
@pytest.mark.parametrize("seed", range(3))
def test_the_least_eigenvalue(seed, free):
    """Least integral of p y'^2 + q y^2 with that of w y^2 = N: N (p k^2 + q)/w, k = pi/L, or half that with a free end.

    Courant, Hilbert (1953), Methods of Mathematical Physics, chapter VI (from memory).
    """
    random = np.random.default_rng(seed)
    p, w, span, norm = (float(v) for v in 10 ** random.uniform(-2, 2, 4))
    q = float(random.uniform(-1, 1)) * p / span**2
    ends = ["y(0) = 0"] if free else ["y(0) = 0", f"y({span!r}) = 0"]
    found = solved(f"{p!r}*y'^2 + {q!r}*y^2", ends, 0, span, {"y": {}},
                   constraints=[f"integral({w!r}*y^2) = {norm!r}"])  # fmt: skip
    k = np.pi / span / (2 if free else 1)
    keeps_its_word(found, norm * (p * k**2 + q) / w, LEAST)
    at = span * np.linspace(0, 1, 9)
    wave = np.sqrt(2 * norm / (w * span)) * np.sin(k * at)
    values = found.curve.evaluate("y", at)
    np.testing.assert_allclose(np.sign(values[4]) * values, wave, atol=1e-5 * wave.max())


@pytest.mark.parametrize("seed", range(3))
def test_an_eigenvalue_with_coefficients_that_vary(seed):
    """-(x^2 y')' = lambda y between zeros at 1 and e^a: lambda = 1/4 + (pi/a)^2 (Euler's equation; closed form)."""
    a = float(np.random.default_rng(seed).uniform(0.5, 3))
    end = float(np.exp(a))
    found = solved("x^2*y'^2", ["y(1) = 0", f"y({end!r}) = 0"], 1, end, {"y": {}}, constraints=["integral(y^2) = 1"])
    keeps_its_word(found, 1 / 4 + (np.pi / a) ** 2, LEAST)


@pytest.mark.parametrize("seed", range(4))
def test_way_points_with_least_jerk(seed):
    """The least integral of x'''^2 through given points, at rest at both ends, has the quintic spline.

    Schoenberg (1964), Spline functions and the problem of graduation (from memory); the spline by SciPy.
    """
    random = np.random.default_rng(seed)
    places = np.cumsum([0.0, *random.uniform(0.4, 1.5, int(random.integers(2, 5)))])
    heights = random.normal(size=len(places)) * 10.0 ** random.integers(-3, 4)
    spline = make_interp_spline(places, heights, k=5, bc_type=([(1, 0.0), (2, 0.0)], [(1, 0.0), (2, 0.0)]))
    rest = [f"x{prime}({float(t)!r}) = 0" for t in places[[0, -1]] for prime in ("'", "''")]
    points = [f"x({float(t)!r}) = {float(x)!r}" for t, x in zip(places, heights, strict=True)]
    found = solved("x'''^2", [*points, *rest], places[0], places[-1], {"x": {}}, "t")
    nodes, weights = np.polynomial.legendre.leggauss(4)
    value = sum(
        (right - left) / 2 * weights @ spline.derivative(3)((left + right) / 2 + (right - left) / 2 * nodes) ** 2
        for left, right in pairwise(places)
    )
    keeps_its_word(found, float(value), BEST)
    at = np.linspace(places[0], places[-1], 30)
    np.testing.assert_allclose(found.curve.evaluate("x", at), spline(at), atol=1e-7 * np.abs(heights).max())


@pytest.mark.parametrize("seed", range(4))
def test_a_string_that_is_pressed_against_a_ceiling(seed):
    """y'' = -k up to the ceiling c, which it touches smoothly at s = sqrt(2 c/k) from both ends; closed form."""
    random = np.random.default_rng(seed)
    k, share = float(10 ** random.uniform(-3, 3)), float(random.uniform(0.1, 0.45))
    c = k * share**2 / 2
    found = solved(f"y'^2 - 2*{k!r}*y", ["y(0) = 0", "y(1) = 0"], 0, 1, {"y": {"within": [None, c]}})
    arcs = 2 * (k**2 * share**3 / 3 - 2 * k * (c * share - k * share**3 / 6))
    keeps_its_word(found, arcs - 2 * k * c * (1 - 2 * share), BEST)
    at = np.linspace(0, 0.5, 20)
    exact = np.where(at < share, c - k / 2 * (at - share) ** 2, c)
    np.testing.assert_allclose(found.curve.evaluate("y", at), exact, atol=1e-4 * c)


@pytest.mark.parametrize("seed", range(4))
def test_a_control_between_limits_that_were_chosen(seed):
    """Least integral of (u - f)^2 for x' = u to the end that u = f + l, held between its limits, leads to.

    The costate is the constant 2 l; the multiplier l and the limits are chosen first.
    """
    random = np.random.default_rng(seed)
    size, speed, middle, push = random.uniform(0.5, 3), random.uniform(2, 9), random.normal(), random.normal()
    low, high = sorted(middle + push + size * random.uniform(-0.9, 0.9, 2))

    def wish(t):
        return middle + size * np.sin(speed * t)

    def control(t):
        return np.clip(wish(t) + push, low, high)

    def whole(function):
        corners = [t for bound in (low, high) for t in _times(speed, (bound - push - middle) / size)]
        return quad(function, 0, 1, points=corners, epsabs=1e-13, epsrel=1e-13, limit=200)[0]

    end, value = whole(control), whole(lambda t: (control(t) - wish(t)) ** 2)
    found = solved(
        f"(u - ({float(middle)!r} + {float(size)!r}*sin({float(speed)!r}*t)))^2",
        ["x(0) = 0", f"x(1) = {end!r}"], 0, 1,
        {"x": {}, "u": {"within": [float(low), float(high)]}}, "t", dynamics=["x' = u"],
    )  # fmt: skip
    keeps_its_word(found, value, BEST, known_to=1e-12)
    at = np.linspace(0, 1, 40)
    assert np.abs(found.curve.evaluate("u", at) - control(at)).mean() <= 1e-3 * size


def _times(speed, sine):
    """When sin(speed t) takes a value between 0 and 1."""
    turns = np.arange(4) * 2 * np.pi
    angles = np.concatenate([np.arcsin(sine) + turns, np.pi - np.arcsin(sine) + turns])
    return sorted(t for t in angles / speed if 0 < t < 1)


def polynomial(coefficients, variable):
    """A polynomial as a formula, by Horner's rule."""
    text = repr(float(coefficients[-1]))
    for c in coefficients[-2::-1]:
        text = f"({text}*{variable} + ({float(c)!r}))"
    return text


CONVEX = {
    "squares": (
        "y'^2/2 + y^2/2", lambda y, d: d**2 / 2 + y**2 / 2, "{d2} - {y}", lambda y, d, d2: d2 - y),
    "powers": (
        "y'^2/2 + y'^4/4 + y^4/4", lambda y, d: d**2 / 2 + d**4 / 4 + y**4 / 4,
        "(1 + 3*{d}^2)*{d2} - {y}^3", lambda y, d, d2: (1 + 3 * d**2) * d2 - y**3),
    "length": (
        "sqrt(1 + y'^2) + y^2/2", lambda y, d: np.sqrt(1 + d**2) + y**2 / 2,
        "{d2}/(1 + {d}^2)^1.5 - {y}", lambda y, d, d2: d2 / (1 + d**2) ** 1.5 - y),
    "hyperbolic": (
        "cosh(y') + cosh(y)", lambda y, d: np.cosh(d) + np.cosh(y),
        "cosh({d})*{d2} - sinh({y})", lambda y, d, d2: np.cosh(d) * d2 - np.sinh(y)),
    "exponential": (
        "exp(y') + exp(y)", lambda y, d: np.exp(d) + np.exp(y),
        "exp({d})*{d2} - exp({y})", lambda y, d, d2: np.exp(d) * d2 - np.exp(y)),
}  # fmt: skip
"""F(y') + G(y), and the force f = F''(y') y'' - G'(y) with which Euler's equation of F + G + f y holds; each twice."""


@pytest.mark.parametrize("seed", range(2))
@pytest.mark.parametrize("kind", CONVEX)
def test_a_curve_that_was_chosen_first(kind, seed):
    """A polynomial of degree four is made the extremal; as all is convex, it is the minimum."""
    random = np.random.default_rng(seed)
    text, density, pushed, push = CONVEX[kind]
    y = Polynomial(random.uniform(-1, 1, 5))
    start, end = float(random.uniform(-1, 0)), float(random.uniform(0.3, 1.2))
    d, d2 = y.deriv(), y.deriv(2)
    force = pushed.format(**{name: polynomial(p.coef, "x") for name, p in (("y", y), ("d", d), ("d2", d2))})
    found = solved(f"{text} + ({force})*y", [f"y({t!r}) = {float(y(t))!r}" for t in (start, end)], start, end, ["y"])

    def worth(x):
        return density(y(x), d(x)) + push(y(x), d(x), d2(x)) * y(x)

    value = quad(worth, start, end, epsabs=1e-13, epsrel=1e-13)[0]
    keeps_its_word(found, value, BEST, known_to=1e-12)
    at = np.linspace(start, end, 30)
    size = np.abs(y(at)).max()
    assert np.abs(found.curve.evaluate("y", at) - y(at)).max() <= (found.curve_error + 1e-14) * size


def places_keep_their_word(found, places):
    """As many switches as were chosen, each as near as its stated error says."""
    assert len(found.switches) == len(places)
    for switch, place in zip(found.switches, places, strict=True):
        assert abs(switch.place - place) <= switch.error <= 1e-3


@pytest.mark.parametrize("order", [1, 2, 3])
@pytest.mark.parametrize("seed", range(4))
def test_switches_that_were_chosen_first(order, seed):
    """Least integral of g x where the n-th derivative of x is u, |u| <= m, from rest: by parts that of +-Q u.

    Q = (t - T)^n times all (t - switch), and g its n-th derivative: u is m where +-Q < 0, and -m where it is above.
    """
    random = np.random.default_rng(10 * order + seed)
    end, most = float(random.uniform(1, 4)), float(random.uniform(0.5, 3))
    switches = end * (np.arange(1, 1 + random.integers(1, 4)) + random.uniform(-0.35, 0.35)) / 4
    q = float(10 ** random.uniform(-2, 2)) * Polynomial.fromroots([*switches, *[end] * order])
    whole = q.integ()
    value = -most * sum(abs(whole(b) - whole(a)) for a, b in pairwise([0.0, *switches, end]))
    primes = ["'" * k for k in range(order)]
    found = solved(
        f"{polynomial(q.deriv(order).coef, 't')}*x", [f"x{prime}(0) = 0" for prime in primes], 0, end,
        {"x": {}, "u": {"within": [-most, most]}}, "t", dynamics=[f"x{primes[-1]}' = u"],
    )  # fmt: skip
    keeps_its_word(found, value, BEST)
    places_keep_their_word(found, switches)


@pytest.mark.parametrize("seed", range(4))
def test_a_thread_over_a_hump(seed):
    """Least integral of y'^2 over h (1 - ((x - c)/w)^2): lines that touch it, the hump between; closed form."""
    random = np.random.default_rng(seed)
    c, w, h = (float(random.uniform(*room)) for room in ((0.35, 0.65), (0.15, 0.3), (0.2, 3)))
    hump = h * (1 - (Polynomial([-c, 1]) / w) ** 2)
    slope = hump.deriv()
    # a line from (x, 0) touches it at a distance sqrt((c - x)^2 - w^2) from x
    first, last = float(np.sqrt(c**2 - w**2)), 1 - float(np.sqrt((1 - c) ** 2 - w**2))
    along = (slope**2).integ()
    value = slope(first) ** 2 * first + slope(last) ** 2 * (1 - last) + along(last) - along(first)
    found = solved("y'^2", ["y(0) = 0", "y(1) = 0"], 0, 1, ["y"], constraints=[f"y >= {polynomial(hump.coef, 'x')}"])
    keeps_its_word(found, value, BEST, known_to=1e-13)


@pytest.mark.parametrize("seed", range(4))
def test_a_limit_of_speed(seed):
    """Least integral of u^2 for x'' = u from rest to rest under x' <= c: the speed comes to c smoothly; closed form.

    It rises as c (1 - (1 - t/s)^2) up to s = 3 (T - L/c)/2, and falls likewise: the value is 8 c^2/(3 s).
    """
    random = np.random.default_rng(seed)
    end, way = float(random.uniform(1, 4)), float(random.uniform(0.5, 3))
    limit = float(random.uniform(1.03, 1.45)) * way / end
    rise = 1.5 * (end - way / limit)
    found = solved(
        "u^2", ["x(0) = 0", "v(0) = 0", f"x({end!r}) = {way!r}", f"v({end!r}) = 0"], 0, end,
        {"x": {}, "v": {"within": [None, limit]}, "u": {}}, "t", dynamics=["x' = v", "v' = u"],
    )  # fmt: skip
    keeps_its_word(found, 8 * limit**2 / (3 * rise), BEST)
    places_keep_their_word(found, [rise, end - rise])
