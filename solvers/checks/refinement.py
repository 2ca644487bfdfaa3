"""Did a finer mesh change the answer?  The stated errors of value and curve against the tolerance asked for."""

from __future__ import annotations

import numpy as np

from solvers.solution import Check, Status

NAME = "refinement"


def check(value_error: float | None, value_size: float, curve_error: float | None, tolerance: float) -> Check:
    """The larger of both relative errors against the tolerance.

    `value_error` is the stated error of the value and `value_size` what it is relative to (both SI); `curve_error` is
    relative already.  None means that no second mesh was reached.
    """
    if value_error is None or curve_error is None:
        return Check(NAME, Status.FAILED, "Only one mesh was solved: the error is not known.", None, tolerance)
    relative = value_error / value_size if value_size > 0 else (0.0 if value_error == 0 else np.inf)
    figure, subject = max((float(relative), "the value"), (float(curve_error), "the curve"))
    if not np.isfinite(figure):
        figure = float("inf")
    status = Status.PASSED if figure <= tolerance else Status.FAILED
    sentence = f"The stated relative errors are {relative:.1e} for the value and {curve_error:.1e} for the curve."
    return Check(NAME, status, sentence, figure, tolerance, None, subject)
