"""Group H: several arcs with jumps between them."""

from math import log

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
)  # fmt: skip
