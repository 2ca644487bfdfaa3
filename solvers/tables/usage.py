"""What a solved curve makes of the tables of its problem: which part of them it uses, and what they do beyond it."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from solvers.checks.sampling import Sampler
from solvers.forms.along import Along, lookups_along
from solvers.formula.printer import text
from solvers.tables.table import Between, Outside, Table
from solvers.transcription.trajectory import Trajectory

PLACES = np.linspace(0.0, 1.0, 9)
"""Places in every interval at which arguments are looked at."""

BEYOND = {Outside.HOLD: "holds its last value", Outside.EXTEND: "goes on along its tangent"}


def table_notes(path: Trajectory) -> Iterator[str]:
    """One sentence for every argument of a table along the curve, and one for tables with rounded corners."""
    lookups = tuple(lookups_along(path.program.compiled.lowered.problem))
    if not lookups:
        return
    sampler = Sampler(path)
    sample = sampler.grid(PLACES)
    n, m = sampler.point.states, sampler.point.controls
    along = Along(path.program.compiled, sample.places, sample.v[:, :n], sample.v[:, n : n + m], path.parameters)
    told: set[str] = set()
    for lookup in lookups:
        table = lookup.table
        for index, argument in enumerate(lookup.arguments):
            values = along.value(argument)
            if np.isfinite(values).all():
                told.add(_range(table, index, text(argument), float(values.min()), float(values.max())))
        if table.has_corners:
            which = (
                "is linear between its points: its corners" if table.between is Between.LINEAR else "holds: its ends"
            )
            told.add(f"{table.name} {which} are rounded off over {table.corner:g} of the steps beside them, so that "
                     "derivatives exist. What that may change of the value is part of its error.")  # fmt: skip
    yield from sorted(told)


def _range(table: Table, index: int, argument: str, least: float, most: float) -> str:
    (low, high), unit = table.ranges[index], table.argument_units[index]
    room = 1e-9 * (high - low)
    # What is lost in the rounding of the range is 0.
    shown = [f"{(number if abs(number) > room else 0.0) / unit.factor:.4g}" for number in (least, most, low, high)]
    in_unit = f" {unit.text}" if unit.text else ""
    used = f"{table.name} is used for {argument} from {shown[0]} to {shown[1]}{in_unit}"
    measured = f"it was measured from {shown[2]} to {shown[3]}{in_unit}"
    if table.outside is not Outside.REFUSE and (least < low - room or most > high + room):
        return f"{used}, but {measured}: beyond that it {BEYOND[table.outside]}."
    return f"{used}; {measured}."
