"""Problems of the catalogue as their author would write them for the script: by id, from the mathematics of each.

An isoperimetric condition is a further state; a derivative of higher order is a chain of states.
"""

from __future__ import annotations

from math import inf, pi

from casadi import cos, exp, sin, sqrt

from tests.benchmarks.scripted import Script

SCRIPTS: dict[str, Script] = {
    "A02": Script(lambda t, x, u: u, [pi / 3], [pi / 4], [0.0], lambda t, x, u: sqrt(u[0] ** 2 + sin(x[0]) ** 2),
                  end=pi / 2),
    "A05": Script(lambda t, x, u: u, [1], [1], [0.0], lambda t, x, u: sqrt(1 + u[0] ** 2) / x[0],
                  state_limits={0: (0, inf)}),
    "A06": Script(lambda t, x, u: [x[2] * cos(u[0]), x[2] * sin(u[0]), 9.81 * sin(u[0])], [0, 0, 0], [1, 1, None],
                  [0.8], last=lambda x, end: end, end=None, sketch=lambda s: ([s, s, 4 * s], [0.8])),
    "A08": Script(lambda t, x, u: [sqrt(1 + 2 * 9.81 * x[1]) * f(u[0]) for f in (cos, sin)], [0, 0], [1, 1], [0.8],
                  last=lambda x, end: end, end=None, state_limits={1: (0, inf)}),
    "A13": Script(lambda t, x, u: [u[0], sqrt(1 + u[0] ** 2)], [0, 0], [0, 1.5], [0.0],
                  lambda t, x, u: x[0] * sqrt(1 + u[0] ** 2),
                  sketch=lambda s: ([-2 * s * (1 - s), 1.5 * s], [4 * s - 2])),
    "A14": Script(lambda t, x, u: u, [1], [1], [0.0], lambda t, x, u: 2 * pi * x[0] * sqrt(1 + u[0] ** 2),
                  begin=-0.5, end=0.5, state_limits={0: (0, inf)}),
    "A22": Script(lambda t, x, u: [u[0], x[0] ** 2], [0, 0], [None, 1], [1.0], lambda t, x, u: u[0] ** 2,
                  sketch=lambda s: ([s, s], [1])),
    "A29": Script(lambda t, x, u: [u[0], cos(x[0]), sin(x[0])], [0, 0, 0], [0, 0.8, 0], [0.0],
                  lambda t, x, u: u[0] ** 2 / 2,
                  sketch=lambda s: ([sin(2 * pi * s), 0.8 * s, 0], [2 * pi * cos(2 * pi * s)])),
    "A30b": Script(lambda t, x, u: [x[1], u[0]], [0, 0], [0, 0], [0.0], lambda t, x, u: u[0] ** 2 / 2 - x[0]),
    "A37": Script(lambda t, x, u: u, [0], [0], [0.0], lambda t, x, u: u[0] ** 2 / 2, begin=-1,
                  path=lambda t, x, u: [x[0] - 1 / 2 + t**2], path_limits=[(0, inf)]),
    "A38b": Script(lambda t, x, u: [x[1], x[2], u[0]], [0, 0, 0], [1, 0, 0], [0.0], lambda t, x, u: u[0] ** 2),
    "A48": Script(lambda t, x, u: u, [0], [1], [0.5], lambda t, x, u: (u[0] ** 2 - x[0] ** 2) / 2, end=2),
    "B01": Script(lambda t, x, u: [x[1], u[0]], [0, 0], [1, 0], [0.0], lambda t, x, u: u[0] ** 2 / 2),
    "B02": Script(lambda t, x, u: [x[1], u[0]], [1, 1], [0, 0], [0.0], last=lambda x, end: end, end=None,
                  ends=(0.1, 100), end_guess=4, control_limits={0: (-1, 1)}),
    "B05": Script(lambda t, x, u: [x[1], u[0]], [0, 1], [0, -1], [0.0], lambda t, x, u: u[0] ** 2 / 2,
                  state_limits={0: (-inf, 0.2)}),
    "B10": Script(lambda t, x, u: [u[0] - x[0]], [1], [None], [0.0], lambda t, x, u: (x[0] ** 2 + u[0] ** 2) / 2),
    "B11": Script(lambda t, x, u: [x[1], u[0]], [1, 0], [None, None], [0.0],
                  lambda t, x, u: (x[0] ** 2 + x[1] ** 2 + u[0] ** 2) / 2, end=15),
    "B12": Script(lambda t, x, u: [x[1], u[0]], [0, 0], [1, 0], [0.0], lambda t, x, u: u[0] ** 2 / 2,
                  lambda x, end: end, end=None, ends=(0.1, 100)),
    "B13": Script(lambda t, x, u: [x[1], u[0]], [0, 0], [1, 0], [0.0], last=lambda x, end: end, end=None,
                  ends=(0.1, 100), control_limits={0: (-1, 1)}, state_limits={1: (-0.5, 0.5)}),
    "B14": Script(lambda t, x, u: [x[1], u[0] - 1.5], [10, -2], [0, 0], [1.5], lambda t, x, u: u[0], end=None,
                  ends=(0.1, 100), end_guess=10, control_limits={0: (0, 3)}),
    "B15": Script(lambda t, x, u: [x[1], 20000 * u[0] / x[2] - 1.63, -8 * u[0]], [2000, -60, 6000], [0, 0, None],
                  [0.5], last=lambda x, end: 6000 - x[2], end=None, ends=(1, 500), end_guess=60,
                  state_limits={2: (1000, 6000)}, control_limits={0: (0, 1)}),
    "B17": Script(lambda t, x, u: [cos(u[0]) + 0.5, sin(u[0])], [0, 0], [2, 2], [0.5], last=lambda x, end: end,
                  end=None, ends=(0.1, 100), end_guess=2),
    "B19": Script(lambda t, x, u: [cos(x[2]), sin(x[2]), u[0]], [0, 0, 0], [4, 4, pi / 2], [0.0],
                  last=lambda x, end: end, end=None, ends=(0.1, 100), end_guess=6, control_limits={0: (-1, 1)}),
    "B21": Script(lambda t, x, u: [x[0] * (1 - x[0]) - u[0]], [0.1], [0.5], [0.5], lambda t, x, u: -u[0], end=10,
                  control_limits={0: (0, 1)}),
    "B22": Script(lambda t, x, u: [x[1], 100 * cos(u[0]), x[3], 100 * sin(u[0])], [0, 0, 0, 0], [None, 45, 5, 0],
                  [0.0], last=lambda x, end: end, end=None, ends=(0.01, 100), control_limits={0: (-pi / 2, pi / 2)},
                  sketch=lambda s: ([20 * s, 45 * s, 5 * s, 0], [0])),
    "B23": Script(lambda t, x, u: [x[1], 3 * x[0] + 2 * x[3] + u[0], x[3], u[1] - 2 * x[1]], [1, 0, 0, 0],
                  [0, 0, 0, 0], [0.0, 0.0], lambda t, x, u: (u[0] ** 2 + u[1] ** 2) / 2, end=pi),
    "B24a": Script(lambda t, x, u: [u[0] - x[0] ** 3], [1], [1.5], [0.0],
                   lambda t, x, u: (x[0] ** 2 + u[0] ** 2) / 2, end=10000),
    "B25": Script(lambda t, x, u: [u[0] * (10 * x[1] - x[0]), u[0] * (x[0] - 10 * x[1]) - (1 - u[0]) * x[1]], [1, 0],
                  [None, None], [0.5], last=lambda x, end: x[0] + x[1] - 1, control_limits={0: (0, 1)}),
    "B27": Script(lambda t, x, u: [x[1], (u[0] - 5.49153484923381e-05 * x[1] ** 2 * exp(-x[0] / 23800)) / x[2] - 32.174,
                                   -u[0] / 1580.9425], [0, 0, 3], [None, None, 1], [100.0],
                  last=lambda x, end: -x[0], end=None, ends=(5, 200), end_guess=50, state_limits={2: (1, 3)},
                  control_limits={0: (0, 193.044)}, sketch=lambda s: ([18000 * s, 500, 3 - 2 * s], [100])),
    "B29a": Script(lambda t, x, u: [x[1], -x[0] + x[1] * (1.4 - 0.14 * x[1] ** 2) + 4 * u[0]], [-5, -5],
                   [None, None], [0.0], lambda t, x, u: x[0] ** 2 + u[0] ** 2, end=2.5),
    "B31": Script(lambda t, x, u: [(1 - x[1] ** 2) * x[0] - x[1] + u[0], x[0]], [0, 1], [None, None], [0.0],
                  lambda t, x, u: x[0] ** 2 + x[1] ** 2 + u[0] ** 2, end=5),
    "B36": Script(lambda t, x, u: [-(u[0] + u[0] ** 2 / 2) * x[0], u[0] * x[0]], [1, 0], [None, None], [1.0],
                  last=lambda x, end: -x[1], control_limits={0: (0, 5)}),
    "B37": Script(lambda t, x, u: [-4000 * exp(-2500 / u[0]) * x[0] ** 2,
                                   4000 * exp(-2500 / u[0]) * x[0] ** 2 - 620000 * exp(-5000 / u[0]) * x[1]], [1, 0],
                  [None, None], [348.0], last=lambda x, end: -x[1], control_limits={0: (298, 398)}),
    "C18": Script(lambda t, x, u: _robot(x, u), [0, 0, 0.5, 0], [0, 0, 0.5, 0.522], [0.0, 0.0],
                  last=lambda x, end: end, end=None, ends=(0.1, 100), end_guess=3,
                  control_limits={0: (-1, 1), 1: (-1, 1)}),
}  # fmt: skip


def _robot(x, u):
    s, c = sin(x[2]), cos(x[2])
    share = 31 / 36 + 9 / 4 * s**2
    return [
        (s * (9 / 4 * c * x[0] ** 2 + 2 * x[1] ** 2) + 4 / 3 * (u[0] - u[1]) - 3 / 2 * c * u[1]) / share,
        -(s * (7 / 2 * x[0] ** 2 + 9 / 4 * c * x[1] ** 2) - 7 / 3 * u[1] + 3 / 2 * c * (u[0] - u[1])) / share,
        x[1] - x[0],
        x[0],
    ]
