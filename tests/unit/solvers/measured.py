"""Tables for tests: a measured function of one argument, and one of two."""

import numpy as np

from solvers.tables.table import Between, Outside, Table


def curve(knots, values, between=Between.SMOOTH, outside=Outside.EXTEND, name="f"):
    """A table f(u)."""
    knots = np.asarray(knots, dtype=float)
    return Table(name, ("u",), (knots,), np.asarray(values, dtype=float), between, outside)


def surface(across, up, values, between=Between.SMOOTH, outside=Outside.EXTEND, name="g"):
    """A table g(u, v)."""
    knots = (np.asarray(across, dtype=float), np.asarray(up, dtype=float))
    return Table(name, ("u", "v"), knots, np.asarray(values, dtype=float), between, outside)


_U, _V = np.linspace(0, 2, 9), np.linspace(-0.5, 1, 7)

TABLES = {
    "f": curve(_U, np.exp(-_U) + _U**2),
    "g": surface(_U, _V, np.cos(_U)[:, None] * (2 + _V)[None, :] ** 2),
}
"""f(u) and g(u, v), by name as formulas take them."""
