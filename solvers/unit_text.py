"""The text of a unit, read into symbols with their exponents and written again; what they mean is not said here."""

from __future__ import annotations

import re
from collections.abc import Iterable
from fractions import Fraction
from functools import lru_cache

Exponent = int | Fraction
"""Mostly whole, and whole numbers are much cheaper to add, compare and look up."""

Symbols = tuple[tuple[str, Exponent], ...]
"""Names of units with their exponents, in the order written: `kg*m/s^2` is kg 1, m 1, s -2."""

LARGEST_EXPONENT = 12
"""Also the largest denominator of one."""

_TOKEN = re.compile(r"\s*(?:(?P<name>[^\W\d_]+|°[CFR]?|%|‰)|(?P<number>\d+(?:\.\d+)?)|(?P<sign>[*/^()·⋅×−-]))")
_SAME = {"·": "*", "⋅": "*", "×": "*", "−": "-"}


_POWERS = "write powers as in m^2, s^-1 or m^(1/2)"


class UnitTextError(ValueError):
    """A text that is no unit: `message` says what is wrong, `hint` what would be right."""

    def __init__(self, message: str, hint: str) -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint


def read_symbols(text: str) -> Symbols:
    """The symbols of a unit text; "" and "1" have none.  Raises UnitTextError."""
    return _Reader(text).whole() if text.strip() else ()


def merged(symbols: Iterable[tuple[str, Exponent]]) -> Symbols:
    """Each symbol once, with the sum of its exponents; what cancels is gone."""
    total: dict[str, Exponent] = {}
    for name, exponent in symbols:
        total[name] = total.get(name, 0) + exponent
    return tuple((name, exponent) for name, exponent in total.items() if exponent)


def raised(symbols: Symbols, exponent: Exponent) -> Symbols:
    """The symbols of a power."""
    return tuple((name, power * exponent) for name, power in symbols if exponent)


@lru_cache(maxsize=1024)
def write_symbols(symbols: Symbols) -> str:
    """`kg*m/s^2`; "" for no symbols.  Divisors follow one by one, as the reader takes them."""
    above = [_power(name, exponent) for name, exponent in symbols if exponent > 0]
    below = [_power(name, -exponent) for name, exponent in symbols if exponent < 0]
    return "/".join(["*".join(above) or "1", *below]) if symbols else ""


def _power(name: str, exponent: Exponent) -> str:
    if exponent == 1:
        return name
    return f"{name}^{exponent}" if exponent.denominator == 1 else f"{name}^({exponent})"


class _Reader:
    """Recursive descent over the few signs that units need; depth is bounded by the length of the text."""

    def __init__(self, text: str) -> None:
        if len(text) > 100:
            raise UnitTextError(f"a unit has {len(text)} characters; at most 100 are read", "write it shorter")
        self.text = text
        self.tokens = self.split(text.replace("²", "^2").replace("³", "^3"))
        self.place = 0

    def split(self, text: str) -> list[str]:
        tokens, place = [], 0
        text = text.rstrip()
        while place < len(text):
            match = _TOKEN.match(text, place)
            if match is None:
                strange = text[place:].lstrip()[0]
                raise UnitTextError(f"“{strange}” cannot stand in a unit", "write units as in m/s^2 or kg*m/s^2")
            tokens.append(_SAME.get(match[match.lastgroup or 0], match[match.lastgroup or 0]))
            place = match.end()
        return tokens

    @property
    def next(self) -> str:
        return self.tokens[self.place] if self.place < len(self.tokens) else ""

    def take(self) -> str:
        token = self.next
        self.place += 1
        return token

    def whole(self) -> Symbols:
        """whole = product end"""
        symbols = self.product()
        if self.next == ")":
            raise UnitTextError(f"a ')' closes nothing in “{self.text}”", "remove it")
        if self.next:
            hint = "write units as in kg*m/s^2, with one power on each"
            raise UnitTextError(f"“{self.next}” follows without a sign in “{self.text}”", hint)
        return merged(symbols)

    def product(self) -> Symbols:
        """product = power (('*' | '/') power)*"""
        symbols = self.power()
        while self.next in ("*", "/"):
            sign = -1 if self.take() == "/" else 1
            symbols += raised(self.power(), sign)
        return symbols

    def power(self) -> Symbols:
        """power = primary ['^' ['-'] number | '^' '(' ['-'] number ['/' integer] ')']"""
        symbols = self.primary()
        if self.next != "^":
            return symbols
        self.take()
        bracket = self.next == "(" and bool(self.take())
        minus = self.next == "-" and bool(self.take())
        exponent = self.number()
        if bracket and self.next == "/":
            self.take()
            divisor = self.number()
            exponent = exponent / divisor if divisor else Fraction(LARGEST_EXPONENT + 1)
        if bracket and self.take() != ")":
            raise UnitTextError(f"an exponent in “{self.text}” is no number", _POWERS)
        if exponent > LARGEST_EXPONENT or exponent.denominator > LARGEST_EXPONENT:
            limit = f"an exponent in “{self.text}” is too large or too fine; the limit of both its parts is"
            raise UnitTextError(f"{limit} {LARGEST_EXPONENT}", _POWERS)
        exact = int(exponent) if exponent.denominator == 1 else exponent
        return raised(symbols, -exact if minus else exact)

    def number(self) -> Fraction:
        """number = digits ['.' digits]"""
        token = self.take()
        if not token[:1].isdecimal() or len(token) > 9:
            raise UnitTextError(f"an exponent in “{self.text}” is no number", _POWERS)
        return Fraction(token)

    def primary(self) -> Symbols:
        """primary = name | '1' | '(' product ')'"""
        token = self.take()
        if token == "(":
            symbols = self.product()
            if self.take() != ")":
                raise UnitTextError(f"a '(' is never closed in “{self.text}”", "add the missing ')'")
            return symbols
        if token == "1":
            return ()
        if token[:1].isdecimal():
            hint = "a unit has names only, as in m/s^2 or 1/s"
            raise UnitTextError(f"the number {token} cannot stand in a unit", hint)
        if not token or token in "*/^)-":
            where = f"“{token}”" if token else "the end"
            raise UnitTextError(f"a unit is missing before {where} in “{self.text}”", "write units as in m/s^2 or 1/s")
        return ((token, 1),)
