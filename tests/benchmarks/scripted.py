"""What an expert would write in an afternoon: direct collocation of any problem in one expression graph.

Radau points of degree 3 on a uniform mesh, Ipopt with its default options, the mesh doubled, each time from the curve
found before, until two values agree.  It shares nothing with the solver that it is compared with.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from math import inf, nan
from typing import Any

import casadi as ca
import numpy as np

DEGREE = 3
FIRST = 10
MOST = 1280
"""Intervals of the first mesh, and of the last one that is tried."""
PATIENCE = 20.0
"""Seconds of processor time that Ipopt may take for one mesh."""

Row = Sequence[Any]
Limits = Sequence[tuple[float, float]]


@dataclass(frozen=True)
class Script:
    """A problem in n states x and m controls u.  Values that are None are free.

    Minimise the integral of `cost(t, x, u)` plus `last(x, T)`, subject to x' = rates(t, x, u), given first and last
    states, `path(t, x, u)` and the states and controls within limits.  The range goes from `begin` to `end`; a free end
    lies within `ends`.  `guess` are the controls of the first guess, its states are lines between the ends, unless
    `sketch` says all of them.
    """

    rates: Callable[[Any, Row, Row], Row]
    start: Sequence[float | None]
    finish: Sequence[float | None]
    guess: Sequence[float]
    cost: Callable[[Any, Row, Row], Any] = lambda t, x, u: 0
    last: Callable[[Row, Any], Any] = lambda x, end: 0
    begin: float = 0.0
    end: float | None = 1.0
    ends: tuple[float, float] = (1e-3, inf)
    end_guess: float = 1.0
    path: Callable[[Any, Row, Row], Row] = lambda t, x, u: ()
    path_limits: Limits = ()
    state_limits: dict[int, tuple[float, float]] = field(default_factory=dict)
    control_limits: dict[int, tuple[float, float]] = field(default_factory=dict)
    sketch: Callable[[float], tuple[Row, Row]] | None = None  # states and controls at a share of the range


@dataclass(frozen=True)
class Found:
    """The last value, whether the last two agree, and the intervals of the last mesh."""

    value: float
    agreed: bool
    intervals: int


def solve(script: Script, tolerance: float, most: int = MOST) -> Found:
    """Double the mesh until two values agree to a relative tolerance."""
    before, curve, count = nan, None, FIRST
    while True:
        value, curve, solved = _on_mesh(script, count, curve)
        agreed = solved and abs(value - before) <= tolerance * abs(value)
        if agreed or not solved or 2 * count > most:
            return Found(value, agreed, count)
        before, count = value, 2 * count


Curve = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, float]
"""Shares of the range and states there, shares and controls, and the end."""


def _on_mesh(script: Script, count: int, before: Curve | None) -> tuple[float, Curve, bool]:
    n, m, points = len(script.start), len(script.guess), DEGREE * count
    taus = np.array(ca.collocation_points(DEGREE, "radau"))
    slopes, _, weights = ca.collocation_coeff(taus.tolist())  # (K+1) x K, and K
    shares = (np.arange(count)[:, None] + taus).ravel() / count
    at_states = np.append(0.0, shares)

    x, u, end = ca.SX.sym("x", n, points + 1), ca.SX.sym("u", m, points), ca.SX.sym("T")
    length = end - script.begin
    t = script.begin + length * ca.DM(shares).T

    one_t, one_x, one_u = ca.SX.sym("t"), ca.SX.sym("x", n), ca.SX.sym("u", m)
    given = one_t, ca.vertsplit(one_x), ca.vertsplit(one_u) if m else []
    path = ca.vertcat(*script.path(*given)) if script.path_limits else ca.SX(0, 1)
    one = ca.Function("one", [one_t, one_x, one_u], [ca.vertcat(*script.rates(*given)), script.cost(*given), path])
    rates, cost, path = one.map(points)(t, x[:, 1:], u)

    step = length / count
    defects = [
        x[:, DEGREE * k : DEGREE * (k + 1) + 1] @ slopes - step * rates[:, DEGREE * k : DEGREE * (k + 1)]
        for k in range(count)
    ]
    value = step * (cost @ ca.repmat(ca.DM(weights), count, 1)) + script.last(ca.vertsplit(x[:, -1]), end)
    g = ca.vertcat(*(ca.vec(defect) for defect in defects), ca.vec(path))
    z = ca.vertcat(ca.vec(x), ca.vec(u), end)

    low = {kind: np.full(shape, -inf) for kind, shape in (("x", (points + 1, n)), ("u", (points, m)))}
    high = {kind: -values for kind, values in low.items()}
    for kind, limits in (("x", script.state_limits), ("u", script.control_limits)):
        for column, (least, most) in limits.items():
            low[kind][:, column], high[kind][:, column] = least, most
    for row, values in ((0, script.start), (-1, script.finish)):
        for column, given_value in enumerate(values):
            if given_value is not None:
                low["x"][row, column] = high["x"][row, column] = given_value
    ends = script.ends if script.end is None else (script.end, script.end)
    on_path = np.array(script.path_limits).reshape(-1, 2)
    zeros = np.zeros(n * points)

    if before is None:
        first = *_sketch(script, at_states, shares), script.end or script.end_guess
    else:
        old_x, old_u = before[1], before[3]
        first = (
            np.column_stack([np.interp(at_states, before[0], column) for column in old_x.T]),
            np.column_stack([np.interp(shares, before[2], column) for column in old_u.T]) if m else old_u,
            before[4],
        )
    solver = ca.nlpsol("solver", "ipopt", {"x": z, "f": value, "g": g},
                       {"ipopt.print_level": 0, "ipopt.sb": "yes", "print_time": False, "show_eval_warnings": False,
                        "ipopt.max_cpu_time": PATIENCE})  # fmt: skip
    answer = solver(
        x0=np.concatenate([first[0].ravel(), first[1].ravel(), [first[2]]]),
        lbx=np.concatenate([low["x"].ravel(), low["u"].ravel(), [ends[0]]]),
        ubx=np.concatenate([high["x"].ravel(), high["u"].ravel(), [ends[1]]]),
        lbg=np.concatenate([zeros, np.tile(on_path[:, 0], points)]),
        ubg=np.concatenate([zeros, np.tile(on_path[:, 1], points)]),
    )
    solved = np.asarray(answer["x"]).ravel()
    states = solved[: n * (points + 1)].reshape(points + 1, n)
    controls = solved[n * (points + 1) : -1].reshape(points, m)
    curve = at_states, states, shares, controls, float(solved[-1])
    return float(answer["f"]), curve, bool(solver.stats()["success"])


def _sketch(script: Script, shares: np.ndarray, inner: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The first guess: lines between the given ends (level where one is free) and the given controls."""
    if script.sketch is not None:
        return np.array([script.sketch(s)[0] for s in shares]), np.array([script.sketch(s)[1] for s in inner])
    lines = []
    for left, right in zip(script.start, script.finish, strict=True):
        left, right = (right if left is None else left), (left if right is None else right)
        lines.append((left or 0.0) * (1 - shares) + (right or 0.0) * shares)
    return np.column_stack(lines), np.tile(script.guess, (len(inner), 1))
