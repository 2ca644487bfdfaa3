"""The matrix of the optimality system: second derivatives of the Lagrangian, bordered by the slopes of the conditions.

For F chosen variables and E chosen conditions of a program, symmetric, (F + E) x (F + E).
Reference: Nocedal, Wright (2006), Numerical Optimization, section 16.1 (from memory).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from solvers.transcription.entries import Pattern
from solvers.transcription.program import Program

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


class Optimality:
    """Where its nonzeros come from, for any point and any multipliers."""

    def __init__(self, program: Program, variables: Indices, conditions: Indices) -> None:
        numbers, first = program.numbers, len(variables)
        self.size = first + len(conditions)
        variable, condition = np.full(len(program.lower), -1), np.full(program.rows.count, -1)
        variable[variables] = np.arange(first)
        condition[conditions] = first + np.arange(len(conditions))
        hessian, jacobian = numbers.hessian_pattern, numbers.jacobian_pattern
        rows = np.concatenate([variable[hessian.rows], condition[jacobian.rows]])
        columns = np.concatenate([variable[hessian.columns()], variable[jacobian.columns()]])
        sources = np.flatnonzero((rows >= 0) & (columns >= 0))
        rows, columns = rows[sources], columns[sources]
        mirrored = rows != columns  # the Hessian is known by its upper triangle, the border by its lower half
        rows, columns = np.concatenate([rows, columns[mirrored]]), np.concatenate([columns, rows[mirrored]])
        order = np.argsort(columns * self.size + rows)
        starts = np.searchsorted(columns[order], np.arange(self.size + 1))
        self._pattern = Pattern((self.size, self.size), rows[order], starts)
        self._sources = np.concatenate([sources, sources[mirrored]])[order]

    def matrix(self, hessian: Array, jacobian: Array) -> Any:
        """The matrix, one of SciPy by compressed columns, from the nonzeros of both parts."""
        return self._pattern.filled(np.concatenate([hessian, jacobian])[self._sources])
