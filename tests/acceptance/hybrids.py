"""Group H: several arcs with jumps between them."""

from collections.abc import Callable
from math import asin, cos, hypot, log, sin, sqrt

from tests.acceptance.records import Case, Sort, at, parameter

_SPEED, _GRAVITY = 2500.0, 9.81


def _burn(mass, rate, seconds):
    """Speed gained and way covered (from rest) without drag (Tsiolkovsky, 1903), with the last mass."""
    last = mass - rate * seconds
    gained = _SPEED * log(mass / last) - _GRAVITY * seconds
    way = _SPEED * (seconds - last / rate * log(mass / last)) - _GRAVITY * seconds**2 / 2
    return gained, way


def _height():
    """30 s at 20 kg/s from 1000 kg, 100 kg dropped, 40 s at 5 kg/s, then up to rest."""
    (first, up), (second, further) = _burn(1000.0, 20.0, 30.0), _burn(300.0, 5.0, 40.0)
    return up + first * 40 + further + (first + second) ** 2 / (2 * _GRAVITY)


def _root(function: Callable[[float], float], low: float, high: float) -> float:
    """Where a rising function passes zero."""
    for _ in range(200):
        middle = (low + high) / 2
        low, high = (low, middle) if function(middle) > 0 else (middle, high)
    return low


def _least(function: Callable[[float], float], low: float, high: float) -> tuple[float, float]:
    """The least value of a convex function and where it is."""
    for _ in range(200):
        first, second = low + (high - low) / 3, high - (high - low) / 3
        low, high = (low, second) if function(first) < function(second) else (first, high)
    return function(low), low


_LAYERS = ((0.4, 1.0), (0.6, 1.33), (0.3, 1.47), (0.7, 1.9))
"""Heights and indices."""
_BENT = _root(lambda c: sum(h * c / sqrt(n * n - c * c) for h, n in _LAYERS) - 2, 0.0, 1.0 - 1e-15)
"""n sin a, the same in all layers, for a ray that covers 2 sideways."""


def _falling():
    """Time from the origin to (1, 1) at the speed sqrt(y), one and a half times as long below 1/2: two cycloids."""

    def angles(c):
        return [2 * asin(c * sqrt(y) / n) for y, n in ((0.5, 1.0), (0.5, 1.5), (1.0, 1.5))]

    def way(c):
        first, second, third = angles(c)
        return ((first - sin(first)) + 2.25 * (third - sin(third) - second + sin(second))) / (2 * c * c)

    c = _root(lambda c: way(c) - 1, 1e-6, sqrt(2))
    first, second, third = angles(c)
    return (first + 2.25 * (third - second)) / c


def _leg(way, before, after, time):
    """The least integral of u^2 for x'' = u over a way with given speeds at its ends: a cubic."""
    return 12 * (way - (before + after) * time / 2) ** 2 / time**3 + (after - before) ** 2 / time


def _thrown(restitution, h):
    """The least effort to the wall and back when it is hit at h; over the speed it is a parabola."""
    at = [_leg(-1, 0, -v, h) + _leg(1, restitution * v, 0, 2 - h) for v in (0.0, 1.0, 2.0)]
    bend, slope = (at[2] - 2 * at[1] + at[0]) / 2, (4 * at[1] - at[2] - 3 * at[0]) / 2
    return at[0] - slope**2 / (4 * bend)


_EFFORT, _HIT = _least(lambda h: _thrown(0.5, h), 0.5, 1.5)


def _unequal(first):
    """Speed lost against none with so much propellant in the first stage (payload 40 kg of 1000, 1/10 structure)."""
    upper = 1000.0 - first / 0.9
    second = 0.9 * (upper - 40.0)
    return -2400.0 * log(1000.0 / (1000.0 - first)) - 3100.0 * log(upper / (upper - second))


_SLOWER, _FIRST = _least(_unequal, 100.0, 850.0)


def _into_ball():
    """The least way from 4 before the centre to 1/2 beside it, entering the ball at an angle (in one plane)."""
    return _least(lambda a: hypot(4 - cos(a), sin(a)) + 1.5 * hypot(cos(a), 0.5 - sin(a)), 0.0, 1.0)[0]


_LIGHT = "Born, Wolf, Principles of Optics, sec. 3.2.2 (law of refraction), 3.3.2 (Fermat); from memory"

CASES = (
    Case(
        "H01", Sort.MAXIMUM, 2 * _SPEED * log(1 / 0.28), 1e-6,
        "closed form: stages of equal build have equal mass ratios R with ((1/R - 0.1)/0.9)^2 = payload/start; "
        "Malina, Summerfield (1947), The problem of escape from the Earth by rocket, J. Aeron. Sci. 14 (from memory)",
        ("arcs", "free time", "units"),
        figures=(parameter("first", 720.0, 1e-2), parameter("second", 144.0, 1e-2), at("m", "end", 56.0, 1e-2)),
    ),
    Case(
        "H02", Sort.MINIMUM, 6.0, 1e-6,
        "closed form: by symmetry the wall is hit at t = 1, at the speed 3/2 that is best from rest: twice 3/h^3; "
        "Bryson, Ho (1975), Applied Optimal Control, sec. 3.7, for the conditions at a jump of the state",
        ("arcs", "corner"), figures=(parameter("h", 1.0), at("x'", 1.0, -1.5), at("u", 0.5, -1.5)),
    ),
    Case(
        "H03", Sort.MAXIMUM, _height(), 1e-6,
        "closed form: two burns without drag and a free flight; Tsiolkovsky (1903) for the speeds",
        ("arcs", "free time", "units"), figures=(parameter("t1", 30.0), parameter("t2", 70.0), at("m", 30.0, 400.0)),
    ),
    Case(
        "H04", Sort.MINIMUM, sum(h * n * n / sqrt(n * n - _BENT**2) for h, n in _LAYERS), 1e-7,
        "closed form: n sin a is the same in all layers (Snell); " + _LIGHT, ("arcs", "corner"),
        figures=(parameter("a", 0.4 * _BENT / sqrt(1 - _BENT**2)),),
    ),
    Case(
        "H05", Sort.MINIMUM, _falling(), 1e-6,
        "closed form: a cycloid in each layer; Johann Bernoulli (1697), Acta Eruditorum, who takes the fall for light "
        "through layers (from memory)",
        ("arcs", "corner", "singular endpoint"),
    ),
    Case(
        "H06", Sort.MAXIMUM, 12.0**2 * 1.6 / 9.81, 1e-6,
        "closed form: (1 + e) s^2 sin(2 a)/g, greatest at 45 degrees; Newton (1687), Principia, scholium to the laws, "
        "for the speeds before and after an impact (from memory)",
        ("arcs", "free time", "units"),
        figures=(parameter("angle", 0.7853981634), parameter("T", 1.6 * 24 * sqrt(0.5) / 9.81)),
    ),
    Case(
        "H07", Sort.MINIMUM, _EFFORT, 1e-6,
        "closed form of both legs (cubics), the least over speed and time of the impact; Bryson, Ho (1975), Applied "
        "Optimal Control, sec. 3.7, for the conditions at a jump of the state (from memory)",
        ("arcs", "corner"), figures=(parameter("h", _HIT, 1e-4),),
    ),
    Case(
        "H08", Sort.MAXIMUM, -_SLOWER, 1e-6,
        "closed form of the speeds (Tsiolkovsky, 1903), the best share by a search; Vertregt (1956), A method for "
        "calculating the mass ratios of step-rockets, J. Brit. Interplan. Soc. 15 (from memory)",
        ("arcs", "free time", "units"), figures=(parameter("first", _FIRST, 1e-2),),
    ),
    Case(
        "H09", Sort.MINIMUM, _into_ball(), 1e-7,
        "closed form: two straight pieces in the plane of source, target and centre, by a search over the place of "
        "entry; " + _LIGHT,
        ("arcs", "corner", "guess given"),
    ),
)  # fmt: skip
