"""What may stand in a formula, by example: for the reference page."""

from __future__ import annotations

from dataclasses import dataclass

from markupsafe import Markup

from web.form.understood import understood


@dataclass(frozen=True, slots=True)
class Example:
    """One thing that formulas can say, as it is written, as it is understood, and what it means."""

    written: str
    mathml: Markup
    meaning: str


_EXAMPLES = (
    ("1/2*rho*v^2", "Products are written out; `^` binds tightest and to the right."),
    ("-2 <= u <= 2", "A range. A bare number has the unit of the other side."),
    ("x'' = -k*x/m", "Primes are derivatives with respect to the independent variable."),
    ("y(0) = 1", "A value at a place: an end, or any place between."),
    ("x'(T) = 0", "A derivative at an end that is a parameter."),
    ("x(T)^2 + y(T)^2 = R^2", "An end that lies on a curve."),
    ("integral(sqrt(1 + y'^2)) = l", "An integral from end to end."),
    ("sqrt(x) + exp(-x) + log(x)", "`log` is the natural logarithm."),
    ("sin(q) + cos(q) + tan(q)", "Angles with the unit deg are converted."),
    ("asin(x) + acos(x) + atan(x) + atan2(y, x)", "Inverse functions; `atan2(y, x)` knows the quadrant."),
    ("sinh(x) + cosh(x) + tanh(x)", "Hyperbolic functions."),
    ("abs(x) + sign(x) + hypot(x, y)", "Where `abs` has to be smoothed, the result says so."),
    ("min(a, b) + max(a, b, c)", "The least and the greatest of two or more."),
    ("2*pi*r", "`pi` is the only name that is given."),
    ("n(r) + h(T, p)", "Measured tables of one or two arguments; a bare number is in the unit of its argument."),
    ("n'(r) + h_T(T, p)", "Their slopes: primes with one argument, the name of the argument with two."),
)


def language() -> tuple[Example, ...]:
    """All examples with their mathematics."""
    return tuple(Example(written, understood(written), meaning) for written, meaning in _EXAMPLES)
