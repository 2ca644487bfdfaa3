"""One formula as mathematics, for the field it was typed in: read on its own, whatever is missing elsewhere."""

from __future__ import annotations

from typing import TYPE_CHECKING

from markupsafe import Markup

if TYPE_CHECKING:
    from solvers.formula.parser import Tables


def understood(formula: str, tables: Tables | None = None) -> Markup:
    """MathML of a formula; empty where it cannot be read (the check of the document then says why)."""
    if not formula.strip():
        return Markup("")
    # Here, so that a server is ready before it has loaded what reads formulas.
    from solvers.formula.errors import FormulaError
    from solvers.formula.mathml import mathml
    from solvers.formula.parser import parse_either

    try:
        return Markup(mathml(parse_either(formula, tables or {})))  # our own printer; it escapes every name
    except FormulaError:
        return Markup("")
