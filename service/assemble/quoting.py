"""Formulas inside sentences: quoted, and shortened where they are long."""

from __future__ import annotations

from solvers.formula.nodes import Node
from solvers.formula.printer import text

LONGEST = 60


def quoted(formula: Node | str) -> str:
    """“y'^2 + 1”, shortened."""
    shown = formula if isinstance(formula, str) else text(formula)
    return f"“{shown}”" if len(shown) <= LONGEST else f"“{shown[: LONGEST - 1]}…”"
