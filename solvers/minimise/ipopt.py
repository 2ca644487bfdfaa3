"""The minimiser: one program and a start in, values and multipliers out.  Ipopt by way of CasADi.

Reference: Waechter, Biegler (2006), On the implementation of an interior-point filter line-search algorithm for
large-scale nonlinear programming, Mathematical Programming 106 (from memory).
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import Enum
from itertools import count
from typing import Any, Protocol

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from solvers.deadline import FOREVER, Deadline
from solvers.transcription.entries import Pattern

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
    convex: bool = False  # the last system had the inertia of a minimum without being changed for it


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
    "ipopt.constr_mult_init_max": 0.0,  # first multipliers by least squares cost a factorization and save no iteration
    "ipopt.mu_strategy": "adaptive",
    "ipopt.adaptive_mu_globalization": "kkt-error",  # a fifth fewer iterations than by the filter, over the catalogue
    "ipopt.fixed_variable_treatment": "make_parameter",
    "print_time": False,
    "show_eval_warnings": False,
    "no_nlp_grad": True,
    "calc_lam_x": False,
    "calc_lam_p": False,
    "calc_f": False,
    "calc_g": False,
    "error_on_fail": False,
}

LEAST_SQUARES_MULTIPLIERS: dict[str, Any] = {"ipopt.constr_mult_init_max": 1000.0}
"""First multipliers by least squares: another try where those of zero lead nowhere."""

FLOOR = 1e-9
"""What the minimiser itself leaves open, relative to the size of the value."""

WIDE: dict[str, Any] = {"ipopt.mumps_scaling": 0}
"""For many states at each node (arcs beside each other): by the matching that MUMPS else scales with, its factors grow
without bounds.  Measured on ten arcs of seven states: 11 s for two steps instead of 0.05 s."""

LARGE = 20_000
"""Variables from which on the rows of a linear system are ordered as below."""
MINIMUM_DEGREE: dict[str, Any] = {"ipopt.mumps_pivot_order": 0}
"""Approximate minimum degree: a tenth faster than what MUMPS chooses for 96,000 unknowns, alike for 10,000.  Small
systems keep its choice, as another one can lead a hard start elsewhere."""

LEAST_SECONDS = 0.05
"""Ipopt wants a positive limit."""

WARM: dict[str, Any] = {
    "ipopt.warm_start_init_point": "yes",
    "ipopt.mu_strategy": "monotone",
    "ipopt.mu_init": 1e-5,
    "ipopt.warm_start_bound_push": 1e-6,
    "ipopt.warm_start_bound_frac": 1e-6,
    "ipopt.warm_start_slack_bound_push": 1e-6,
    "ipopt.warm_start_slack_bound_frac": 1e-6,
    "ipopt.warm_start_mult_bound_push": 1e-6,
    "ipopt.accept_every_trial_step": "yes",
}
"""A warm start is near its end, where Newton's own steps are the best ones: a line search would cut them short wherever
the value hardly depends on the variables (Maratos, 1978; from memory).  Measured on places at which a state leaves its
limit smoothly: 26 iterations instead of more than 100."""


CLOSE: dict[str, Any] = {
    "ipopt.mu_init": 1e-9,
    "ipopt.warm_start_bound_push": 1e-9,
    "ipopt.warm_start_bound_frac": 1e-9,
    "ipopt.warm_start_slack_bound_push": 1e-9,
    "ipopt.warm_start_slack_bound_frac": 1e-9,
    "ipopt.warm_start_mult_bound_push": 1e-9,
    "ipopt.max_iter": 60,
}
"""Options for a warm start that is nearly the end: the solution for a neighbouring value of a constant."""


BARRIER = (1e-9, 1e-5)
"""The least and the greatest barrier parameter of a warm start."""
PUSHING = 1e-8
"""Multipliers, scaled, that count as a push."""
ROOM = 1e-5
"""Distance from limits that push, scaled, at which a warm start begins."""


def barrier(program: Bounded, start: Start) -> float:
    """The barrier parameter of a warm start: what keeps the limits that push at a distance of `ROOM`.

    A limit stays as far away as this parameter over its multiplier: from a curved limit that pushes a little at each of
    many points the curve would first go far away, only to come back.  Where no such limit pushes, many curves may do
    equally well, and a large parameter keeps to their middle.
    """
    assert start.multipliers is not None
    pushes = np.abs(start.multipliers[program.row_lower < program.row_upper])
    pushes = pushes[pushes > PUSHING]
    return float(np.clip(ROOM * np.median(pushes), *BARRIER)) if len(pushes) else BARRIER[1]


class Numbers(Protocol):
    """f, g and their derivatives; the nonzeros of matrices are in the order of their patterns."""

    @property
    def jacobian_pattern(self) -> Pattern: ...
    @property
    def hessian_pattern(self) -> Pattern: ...
    def value(self, z: Array, /) -> float: ...
    def constraints(self, z: Array, /) -> Array: ...
    def gradient(self, z: Array, /) -> Array: ...
    def jacobian(self, z: Array, /) -> Array: ...
    def hessian(self, z: Array, weight_f: float, weight_g: Array, /) -> Array: ...


class Bounded(Protocol):
    """A program: minimise f subject to bounds on z and g."""

    @property
    def lower(self) -> Array: ...
    @property
    def upper(self) -> Array: ...
    @property
    def row_lower(self) -> Array: ...
    @property
    def row_upper(self) -> Array: ...
    @property
    def numbers(self) -> Numbers: ...


class _Called(ca.Callback):
    """Numbers of a program as the function that CasADi calls; both sides are CasADi's own memory."""

    def __init__(
        self,
        name: str,
        inputs: dict[str, ca.Sparsity],
        outputs: dict[str, tuple[ca.Sparsity, Callable[..., Any]]],
        errors: list[Exception],
    ) -> None:
        ca.Callback.__init__(self)
        self._inputs, self._errors = list(inputs.items()), errors
        self._outputs = [(name, pattern) for name, (pattern, _) in outputs.items()]
        self._makers = [make for _, make in outputs.values()]
        self.construct(name, {})

    def get_n_in(self) -> int:
        return len(self._inputs)

    def get_n_out(self) -> int:
        return len(self._outputs)

    def get_name_in(self, index: int) -> str:
        return self._inputs[index][0]

    def get_name_out(self, index: int) -> str:
        return self._outputs[index][0]

    def get_sparsity_in(self, index: int) -> ca.Sparsity:
        return self._inputs[index][1]

    def get_sparsity_out(self, index: int) -> ca.Sparsity:
        return self._outputs[index][1]

    def has_eval_buffer(self) -> bool:
        return True

    def eval_buffer(self, arguments: Sequence[Any], results: Sequence[Any]) -> int:
        given = [np.frombuffer(argument) if argument is not None else np.empty(0) for argument in arguments]
        try:
            for result, make in zip(results, self._makers, strict=True):
                if result is not None:
                    np.frombuffer(result)[:] = make(*given)
        except Exception as error:  # CasADi would only say that something failed
            self._errors.append(error)
            return 1
        return 0


def _functions(program: Bounded, errors: list[Exception]) -> dict[str, _Called]:
    """What the minimiser calls: the program itself and its derivatives."""
    numbers, size, count = program.numbers, len(program.lower), len(program.row_lower)
    one, z, g = ca.Sparsity.dense(1, 1), ca.Sparsity.dense(size, 1), ca.Sparsity.dense(count, 1)
    where = {"x": z, "p": ca.Sparsity.dense(0, 1)}

    def value(z: Array, *_: Array) -> float:
        return numbers.value(z)

    def constraints(z: Array, *_: Array) -> Array:
        return numbers.constraints(z)

    f_and_g = {"f": (one, value), "g": (g, constraints)}
    gradient = (z, lambda z, _: numbers.gradient(z))
    jacobian = (_sparsity(numbers.jacobian_pattern), lambda z, _: numbers.jacobian(z))
    hessian = (_sparsity(numbers.hessian_pattern), lambda z, _, f, g: numbers.hessian(z, float(f[0]), g))
    return {
        "nlp": _Called("nlp", where, f_and_g, errors),
        "grad_f": _Called("grad_f", where, {"f": f_and_g["f"], "grad_f_x": gradient}, errors),
        "jac_g": _Called("jac_g", where, {"g": f_and_g["g"], "jac_g_x": jacobian}, errors),
        "hess_lag": _Called("hess_lag", where | {"lam_f": one, "lam_g": g}, {"hess_gamma_x_x": hessian}, errors),
    }


def _sparsity(pattern: Pattern) -> ca.Sparsity:
    """A pattern as CasADi's; lists are what it takes fastest."""
    return ca.Sparsity(*pattern.shape, pattern.starts.tolist(), pattern.rows.tolist())


def _watcher(program: Bounded, watch: Callable[[Iterate], bool], errors: list[Exception]) -> _Called:
    """Hears of every iteration, and can ask for a stop."""
    sizes = {"f": 1, "x": len(program.lower), "lam_x": len(program.lower), "g": len(program.row_lower),
             "lam_g": len(program.row_lower), "lam_p": 0}  # fmt: skip
    numbers = count()

    def hear(_: Array, f: Array, g: Array, *__: Array) -> float:
        worst = np.maximum(program.row_lower - g, g - program.row_upper).max(initial=0.0)
        return float(watch(Iterate(next(numbers), float(f[0]), float(worst))) or bool(errors))

    inputs = {name: ca.Sparsity.dense(sizes[name], 1) for name in ca.nlpsol_out()}
    return _Called("watcher", inputs, {"ret": (ca.Sparsity.dense(1, 1), hear)}, errors)


def minimise(
    program: Bounded,
    start: Start,
    *,
    deadline: Deadline = FOREVER,
    watch: Callable[[Iterate], bool] | None = None,
    options: dict[str, Any] | None = None,
) -> Minimum:
    """Minimise a program from a start; never raises for a numerical failure."""
    began = time.perf_counter()
    if np.any(program.lower > program.upper):  # CasADi would refuse it
        none = np.zeros(len(start.z)), np.zeros(len(program.row_lower))
        return Minimum(Outcome.INFEASIBLE, start.z, np.inf, *none, 0, 0.0, 0.0, "limits contradict each other")
    settings = dict(OPTIONS)
    warm = start.multipliers is not None
    if warm:
        settings |= WARM | {"ipopt.mu_init": barrier(program, start)}
    if len(program.lower) >= LARGE:
        settings |= MINIMUM_DEGREE
    settings |= options or {}
    for name, left in (("ipopt.max_wall_time", deadline.left), ("ipopt.max_cpu_time", deadline.work_left)):
        if np.isfinite(left):
            settings[name] = max(left, LEAST_SECONDS)
    errors: list[Exception] = []
    if watch is not None:
        settings["iteration_callback"] = _watcher(program, watch, errors)
    functions = _functions(program, errors)
    nlp = functions.pop("nlp")
    solver = ca.nlpsol("solver", "ipopt", nlp, settings | functions)
    arguments: dict[str, Any] = {
        "x0": np.clip(start.z, program.lower, program.upper),
        "lbx": program.lower,
        "ubx": program.upper,
        "lbg": program.row_lower,
        "ubg": program.row_upper,
    }
    if warm:
        arguments |= {"lam_x0": start.bound_multipliers, "lam_g0": start.multipliers}
    ready = time.perf_counter()
    answer = solver(**{name: values.tolist() for name, values in arguments.items()})
    done = time.perf_counter()
    if errors:
        raise errors[0]
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
        convex=(statistics.get("iterations") or {}).get("regularization_size", [1.0])[-1] == 0.0,
    )
