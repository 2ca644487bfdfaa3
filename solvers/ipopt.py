"""The minimiser: one program and a start in, values and multipliers out.  Ipopt by way of CasADi.

Reference: Waechter, Biegler (2006), On the implementation of an interior-point filter line-search algorithm for
large-scale nonlinear programming, Mathematical Programming 106 (from memory).
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import Enum
from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.transcription import Program

Array = NDArray[np.float64]


class Outcome(Enum):
    """How the minimiser ended."""

    SOLVED = "solved"
    ACCEPTABLE = "solved to a reduced accuracy"
    INFEASIBLE = "converged to a point of least violation"
    UNBOUNDED = "the values run away"
    UNDEFINED = "a formula is undefined at the start"
    ITERATIONS = "the iteration limit was reached"
    TIME = "the time limit was reached"
    STOPPED = "stopped from outside"
    FAILED = "no further progress was possible"


_OUTCOMES = {
    "Solve_Succeeded": Outcome.SOLVED,
    "Feasible_Point_Found": Outcome.SOLVED,
    "Solved_To_Acceptable_Level": Outcome.ACCEPTABLE,
    "Infeasible_Problem_Detected": Outcome.INFEASIBLE,
    "Diverging_Iterates": Outcome.UNBOUNDED,
    "Invalid_Number_Detected": Outcome.UNDEFINED,
    "Maximum_Iterations_Exceeded": Outcome.ITERATIONS,
    "Maximum_CpuTime_Exceeded": Outcome.TIME,
    "Maximum_WallTime_Exceeded": Outcome.TIME,
    "User_Requested_Stop": Outcome.STOPPED,
}


@dataclass(frozen=True, slots=True)
class Iterate:
    """One iteration: its number, f and the largest violation of g and the bounds (scaled)."""

    number: int
    value: float
    infeasibility: float


@dataclass(frozen=True, slots=True)
class Start:
    """Where to begin: scaled z and, for a warm start, the multipliers of its bounds and of g."""

    z: Array
    bound_multipliers: Array | None = None
    multipliers: Array | None = None


@dataclass(frozen=True, slots=True)
class Minimum:
    """The end of one minimisation, scaled.  The Lagrangian is f + multipliers.g + bound_multipliers.z."""

    outcome: Outcome
    z: Array
    value: float
    bound_multipliers: Array
    multipliers: Array
    iterations: int
    seconds: float
    set_up: float
    status: str


OPTIONS: dict[str, Any] = {
    "ipopt.print_level": 0,
    "ipopt.sb": "yes",
    "ipopt.linear_solver": "mumps",
    "ipopt.tol": 1e-12,
    "ipopt.constr_viol_tol": 1e-10,
    "ipopt.dual_inf_tol": 1e-6,
    "ipopt.compl_inf_tol": 1e-8,
    "ipopt.acceptable_tol": 1e-8,
    "ipopt.acceptable_iter": 5,
    "ipopt.acceptable_constr_viol_tol": 1e-8,
    "ipopt.acceptable_dual_inf_tol": 1e-4,
    "ipopt.acceptable_compl_inf_tol": 1e-6,
    "ipopt.bound_relax_factor": 0.0,
    "ipopt.max_iter": 600,
    "ipopt.nlp_scaling_method": "none",
    "ipopt.mu_strategy": "adaptive",
    "ipopt.fixed_variable_treatment": "make_parameter",
    "print_time": False,
    "show_eval_warnings": False,
    "calc_lam_x": False,
    "calc_lam_p": False,
    "calc_f": False,
    "calc_g": False,
    "error_on_fail": False,
}

WARM: dict[str, Any] = {
    "ipopt.warm_start_init_point": "yes",
    "ipopt.mu_strategy": "monotone",
    "ipopt.mu_init": 1e-5,
    "ipopt.warm_start_bound_push": 1e-6,
    "ipopt.warm_start_bound_frac": 1e-6,
    "ipopt.warm_start_slack_bound_push": 1e-6,
    "ipopt.warm_start_slack_bound_frac": 1e-6,
    "ipopt.warm_start_mult_bound_push": 1e-6,
}


class _Watcher(ca.Callback):
    """Hears of every iteration, keeps the best iterate, and can ask for a stop."""

    def __init__(self, program: Program, watch: Callable[[Iterate], bool]) -> None:
        ca.Callback.__init__(self)
        self.size, self.rows = program.layout.size, program.rows.count
        self.program = program
        self.watch = watch
        self.count = 0
        self.error: Exception | None = None
        self.construct("watcher", {})

    def get_n_in(self) -> int:
        return int(ca.nlpsol_n_out())

    def get_n_out(self) -> int:
        return 1

    def get_name_in(self, index: int) -> str:
        return str(ca.nlpsol_out(index))

    def get_sparsity_in(self, index: int) -> ca.Sparsity:
        sizes = {"f": 1, "x": self.size, "lam_x": self.size, "g": self.rows, "lam_g": self.rows}
        return ca.Sparsity.dense(sizes.get(ca.nlpsol_out(index), len(self.program.compiled.constants)), 1)

    def eval(self, arguments: Sequence[ca.DM]) -> list[float]:
        try:
            g = np.asarray(arguments[2]).ravel()
            violation = np.maximum(self.program.row_lower - g, g - self.program.row_upper)
            worst = float(np.max(violation, initial=0.0))
            stop = self.watch(Iterate(self.count, float(arguments[1]), max(worst, 0.0)))
            self.count += 1
        except Exception as error:  # CasADi would report it as a stop by the user
            self.error, stop = error, True
        return [1.0 if stop else 0.0]


def minimise(
    program: Program,
    start: Start,
    *,
    time_limit: float = np.inf,
    watch: Callable[[Iterate], bool] | None = None,
    options: dict[str, Any] | None = None,
) -> Minimum:
    """Minimise a program from a start; never raises for a numerical failure."""
    began = time.perf_counter()
    functions = program.functions
    settings = dict(OPTIONS)
    warm = start.multipliers is not None
    if warm:
        settings |= WARM
    settings |= options or {}
    if np.isfinite(time_limit):
        settings["ipopt.max_wall_time"] = max(time_limit, 0.05)
    watcher = _Watcher(program, watch) if watch is not None else None
    if watcher is not None:
        settings["iteration_callback"] = watcher
    settings |= {name: functions[name] for name in ("grad_f", "jac_g", "hess_lag")}
    solver = ca.nlpsol("solver", "ipopt", {"x": functions["z"], "p": functions["c"], "f": functions["f"],
                                           "g": functions["g"]}, settings)  # fmt: skip
    arguments: dict[str, Any] = {
        "x0": np.clip(start.z, program.lower, program.upper),
        "p": list(program.compiled.constants),
        "lbx": program.lower,
        "ubx": program.upper,
        "lbg": program.row_lower,
        "ubg": program.row_upper,
    }
    if warm:
        arguments |= {"lam_x0": start.bound_multipliers, "lam_g0": start.multipliers}
    ready = time.perf_counter()
    answer = solver(**arguments)
    done = time.perf_counter()
    if watcher is not None and watcher.error is not None:
        raise watcher.error
    statistics = solver.stats()
    status = str(statistics["return_status"])
    return Minimum(
        outcome=_OUTCOMES.get(status, Outcome.FAILED),
        z=np.asarray(answer["x"]).ravel(),
        value=float(answer["f"]),
        bound_multipliers=np.asarray(answer["lam_x"]).ravel(),
        multipliers=np.asarray(answer["lam_g"]).ravel(),
        iterations=int(statistics["iter_count"]),
        seconds=done - ready,
        set_up=ready - began,
        status=status,
    )
