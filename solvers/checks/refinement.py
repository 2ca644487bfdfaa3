"""Did a finer mesh change the answer?  The stated errors of value and curve against the tolerance asked for.

At an extremum the value is flat: a curve that is off by e changes it by the order of e^2 only.  So a value known to the
tolerance goes with a curve known to its square root, and no refinement can be asked to do better where the value
stands still.  Such a result passes, and the sentence says how well each of both is known.
"""

from __future__ import annotations

import numpy as np

from solvers.solution import Check, Status

NAME = "refinement"


def check(value_error: float | None, value_size: float, curve_error: float | None, tolerance: float) -> Check:
    """The relative error of the value against the tolerance, that of the curve against its square root.

    `value_error` is the stated error of the value and `value_size` what it is relative to (both SI); `curve_error` is
    relative already.  None means that no second mesh was reached.  Figure and threshold are those of the one of both
    that is worse relative to what it may be.
    """
    if value_error is None or curve_error is None:
        return Check(NAME, Status.FAILED, "Only one mesh was solved: the error is not known.", None, tolerance)
    relative = value_error / value_size if value_size > 0 else (0.0 if value_error == 0 else np.inf)
    found = [(float(figure) if np.isfinite(figure) else float("inf"), allowed, subject)
             for figure, allowed, subject in ((relative, tolerance, "the value"),
                                              (curve_error, float(np.sqrt(tolerance)), "the curve"))]  # fmt: skip
    figure, threshold, subject = max(found, key=lambda one: one[0] / one[1])
    status = Status.PASSED if figure <= threshold else Status.FAILED
    sentence = f"The value is known to {relative:.1e} (relative), the curve to {curve_error:.1e}"
    if status is Status.PASSED and curve_error > tolerance:
        sentence += ": less exactly than the value, which hardly depends on it at an extremum"
    return Check(NAME, status, sentence + ".", figure, threshold, None, subject)
