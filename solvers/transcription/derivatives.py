"""A function of a few symbols with its exact first and second derivatives, as CasADi functions."""

from __future__ import annotations

from functools import cached_property

import casadi as ca

from solvers.tables.lookups import Lookups


class Differentiated:
    """A function (v, d) -> outputs with its exact first and second derivatives by v, each made when first asked for.

    `inputs` is the length of v, `outputs` the number of outputs.
    `jacobian` (v, d) has the nonzeros of the Jacobian of all outputs at `jacobian_rows` and `jacobian_columns`,
    `hessian` (v, d, weights of the outputs) those of the upper triangle at `hessian_rows` and `hessian_columns`.
    """

    def __init__(self, name: str, v: ca.SX, d: ca.SX, outputs: ca.SX, lookups: Lookups) -> None:
        self._name, self._v, self._d, self._outputs, self._lookups = name, v, d, outputs, lookups
        self.inputs, self.outputs = int(v.size1()), int(outputs.size1())

    @cached_property
    def value(self) -> ca.Function:
        return self.beside(self._name, self._outputs)

    @property
    def expressions(self) -> ca.SX:
        """The outputs as expressions of the symbols."""
        return self._outputs

    @property
    def varied(self) -> ca.SX:
        """The symbols v, by which it is differentiated."""
        return self._v

    @property
    def lookups(self) -> Lookups:
        """What looks up the tables of the outputs."""
        return self._lookups

    def beside(self, name: str, expressions: ca.SX) -> ca.Function:
        """Another function of the same inputs."""
        return ca.Function(name, [self._v, self._d], self._lookups.settled([ca.densify(expressions)]))

    @cached_property
    def _slopes(self) -> ca.SX:
        return ca.jacobian(self._outputs, self._v)

    @cached_property
    def jacobian(self) -> ca.Function:
        made = self._lookups.settled([_column(self._slopes)])
        return ca.Function(self._name + "_jacobian", [self._v, self._d], made)

    @cached_property
    def _jacobian_places(self) -> tuple[list[int], list[int]]:
        return _places(self._slopes.sparsity())

    @property
    def jacobian_rows(self) -> list[int]:
        return self._jacobian_places[0]

    @property
    def jacobian_columns(self) -> list[int]:
        return self._jacobian_places[1]

    @cached_property
    def _bends(self) -> tuple[ca.SX, ca.SX]:
        """The weights, and the upper triangle."""
        weights = ca.SX.sym("w", self.outputs)
        return weights, ca.triu(ca.hessian(ca.dot(weights, self._outputs), self._v)[0])

    @cached_property
    def hessian(self) -> ca.Function:
        weights, bends = self._bends
        made = self._lookups.settled([_column(bends)])
        return ca.Function(self._name + "_hessian", [self._v, self._d, weights], made)

    @cached_property
    def _hessian_places(self) -> tuple[list[int], list[int]]:
        return _places(self._bends[1].sparsity())

    @property
    def hessian_rows(self) -> list[int]:
        return self._hessian_places[0]

    @property
    def hessian_columns(self) -> list[int]:
        return self._hessian_places[1]


def _column(matrix: ca.SX) -> ca.SX:
    """The nonzeros of a matrix as one column."""
    return ca.vec(matrix[matrix.sparsity().find()]) if matrix.nnz() else ca.SX(0, 1)


def _places(sparsity: ca.Sparsity) -> tuple[list[int], list[int]]:
    """Row and column of every nonzero, in CasADi's order."""
    rows, columns = sparsity.get_triplet()
    return list(rows), list(columns)
