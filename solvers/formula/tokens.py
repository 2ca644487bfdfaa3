"""Formula text -> tokens: numbers, names, primes and signs, each with its place in the text."""

from __future__ import annotations

import math
import re
import unicodedata
from typing import NamedTuple

from solvers.formula.errors import FormulaError
from solvers.formula.nodes import Span

LENGTH_LIMIT = 2_000
"""Characters in one formula.  Each node takes at least one character, so this bounds the tree as well."""

NUMBER_LIMIT = 40
"""Characters in one number."""

SAME_SIGN = {"≤": "<=", "≥": ">=", "·": "*", "⋅": "*", "×": "*", "−": "-"}
"""Signs as they come from a word processor, and how we write them."""

REFUSED = {
    "**": ("'**' is not a sign here", "a power is written with '^'"),
    "==": ("'==' is not a sign here", "an equality is written with a single '='"),
    "!=": ("'!=' is not a condition", "conditions are written with '=', '<=' or '>='"),
    "<>": ("'<>' is not a condition", "conditions are written with '=', '<=' or '>='"),
    "≠": ("'≠' is not a condition", "conditions are written with '=', '<=' or '>='"),
    "=<": ("'=<' is not a sign here", "write '<='"),
    "=>": ("'=>' is not a sign here", "write '>='"),
    ":=": ("':=' is not a sign here", "formulas assign nothing; an abbreviation goes into 'where'"),
    "//": ("'//' is not a sign here", "a quotient is written with a single '/'"),
    "<": ("'<' is not a condition", "write '<=': a limit belongs to what is allowed"),
    ">": ("'>' is not a condition", "write '>=': a limit belongs to what is allowed"),
    "[": ("'[' is not used in formulas", "group with '(' and ')'"),
    "]": ("']' is not used in formulas", "group with '(' and ')'"),
    "{": ("'{' is not used in formulas", "group with '(' and ')'"),
    "}": ("'}' is not used in formulas", "group with '(' and ')'"),
    "|": ("'|' is not used in formulas", "an absolute value is written abs(…)"),
    "√": ("'√' is not used in formulas", "a square root is written sqrt(…)"),
    "∫": ("'∫' is not used in formulas", "an integral is written integral(…)"),
    "’": ("'’' is a quotation mark", "a derivative is written with the straight ' or the prime ′"),
    "÷": ("'÷' is not a sign here", "a quotient is written with '/'"),
    "%": ("'%' is not a sign here", "write the number itself: 0.05 for 5 percent"),
    ";": ("';' is not used in formulas", "arguments are separated by ','; each condition is an entry of its own"),
}  # fmt: skip
"""What people write from habit, what is wrong with it and what to write."""

_PATTERN = re.compile(
    r"(?P<space>\s+)"
    r"|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[^\W\d_][\w\u0300-\u036f]*)"
    r"|(?P<primes>['′″‴]+)"
    r"|(?P<same><=|>=)"
    rf"|(?P<refused>{'|'.join(map(re.escape, sorted(REFUSED, key=len, reverse=True)))})"
    r"|(?P<sign>[-+*/^(),=≤≥·⋅×−])"
)

_PRIMES = {"'": 1, "′": 1, "″": 2, "‴": 3}
_PRIME_LETTERS = "ʹʺʼˈ"
"""Letters to Unicode, primes to the eye."""

_LOOKALIKE = str.maketrans(
    "ΑΒΕΖΗΙΚΜΝΟΡΤΥΧοАВЕКМНОРСТХаеорсухіјѕ",
    "ABEZHIKMNOPTYXoABEKMHOPCTXaeopcyxijs",
)
_ALIAS = {"π": "pi"}
_NAME_RULE = "a name is a letter, then letters, digits and '_'"


class Token(NamedTuple):
    """`kind` is "number", "name", "primes", "sign" or "end"; `text` is in our own spelling."""

    kind: str
    text: str
    span: Span


def tokens(text: str) -> list[Token]:
    """All tokens of `text`, the last one of kind "end".  Raises FormulaError."""
    if len(text) > LENGTH_LIMIT:
        raise FormulaError(
            f"the formula has {len(text):,} characters; the limit is {LENGTH_LIMIT:,}",
            text=text, span=Span(LENGTH_LIMIT, len(text)), code="length-limit",
            hint="name parts of it in 'where'",
        )  # fmt: skip
    found: list[Token] = []
    place = 0
    while place < len(text):
        match = _PATTERN.match(text, place)
        if match is None:
            raise _strange(text, place)
        place = match.end()
        if match.lastgroup != "space":
            found.append(_token(match))
    found.append(Token("end", "", Span(place, place)))
    return found


def read_name(name: str) -> str:
    """The name as formulas know it: composed characters (NFC), µ as μ, π as pi.

    Raises FormulaError where it is no name: a letter, then letters, digits and '_'; no letter that looks like
    another one of a different alphabet.
    """
    match = _PATTERN.match(name)
    if match is None:
        if not name:
            raise FormulaError("a name is empty", text=name, span=Span(0, 0), code="name")
        raise _strange(name, 0)
    if match.lastgroup != "name" or match.end() != len(name):
        start = 0 if match.lastgroup != "name" else match.end()
        raise FormulaError(
            f"'{name[start]}' cannot stand {'at this place' if start else 'at the start'} in a name",
            text=name, span=Span(start, start + 1), code="name", hint=_NAME_RULE,
        )  # fmt: skip
    return _checked_name(name, name, 0)


def _token(match: re.Match[str]) -> Token:
    text, span, written = match.string, Span(*match.span()), match.group()
    match match.lastgroup:
        case "sign" | "same":
            return Token("sign", SAME_SIGN.get(written, written), span)
        case "name":
            return Token("name", _checked_name(written, text, span.start), span)
        case "number":
            _check_number(written, text, span)
            return Token("number", written, span)
        case "primes":
            return Token("primes", "'" * sum(_PRIMES[c] for c in written), span)
        case _:
            message, hint = REFUSED[written]
            raise FormulaError(message, text=text, span=span, code="sign", hint=hint)


def _check_number(written: str, text: str, span: Span) -> None:
    if len(written) > NUMBER_LIMIT:
        raise FormulaError(
            f"the number has {len(written)} characters; the limit is {NUMBER_LIMIT}",
            text=text, span=span, code="number-limit", hint="17 digits say all that computation can use",
        )  # fmt: skip
    value = float(written)
    if math.isinf(value) or (value == 0 and re.match(r"[0.]*[1-9]", written)):
        raise FormulaError(
            f"the number is too {'large' if value else 'small'} to compute with",
            text=text, span=span, code="number-range", hint="numbers reach from 5e-324 to 1.79e308",
        )  # fmt: skip


def _checked_name(written: str, text: str, start: int) -> str:
    if written.isascii():
        return written
    name = unicodedata.normalize("NFC", written).replace("µ", "μ")
    for offset, letter in enumerate(written):
        kind = "digit"
        if letter in _PRIME_LETTERS:
            kind, hint = "prime", "a derivative is written with the straight ' or the prime ′"
        elif letter.isdecimal() and not letter.isascii():
            hint = f"write {unicodedata.decimal(letter)}"
        elif unicodedata.category(letter)[0] == "N" and not letter.isascii():
            digit = unicodedata.digit(letter, None)
            hint = f"a power is written ^{digit}" if digit is not None else "write it with the digits 0 to 9"
        else:
            continue
        raise FormulaError(
            f"'{letter}' is not a {kind} that formulas know",
            text=text, span=Span(start + offset, start + offset + 1), code="character", hint=hint,
        )  # fmt: skip
    span = Span(start, start + len(written))
    plain = unicodedata.normalize("NFKC", name)
    if plain != name:
        hint = f"write {plain}"
        raise FormulaError("the name has letters in a special style", text=text, span=span, code="name", hint=hint)
    if any(unicodedata.combining(c) for c in name):
        raise FormulaError(
            "the name has a mark that belongs to no letter",
            text=text, span=span, code="name", hint=_NAME_RULE,
        )  # fmt: skip
    _check_lookalikes(name, text, span)
    return _ALIAS.get(name, name)


def _check_lookalikes(name: str, text: str, span: Span) -> None:
    """Greek and Cyrillic letters are welcome, but not where they could be taken for a Latin letter."""
    letters = [c for c in name if c.isalpha()]
    alike = [c for c in letters if ord(c) in _LOOKALIKE]
    latin = any(c.isascii() for c in letters)
    if alike and (latin or len(alike) == len(letters)):
        raise FormulaError(
            f"'{alike[0]}' in this name is {unicodedata.name(alike[0]).capitalize()}, which looks like a Latin letter",
            text=text, span=span, code="confusable-name", hint=f"write {name.translate(_LOOKALIKE)} in Latin letters",
        )  # fmt: skip


def _strange(text: str, place: int) -> FormulaError:
    letter = text[place]
    span = Span(place, place + 1)
    title = f"U+{ord(letter):04X} {unicodedata.name(letter, '')}".rstrip()
    if unicodedata.category(letter)[0] == "C":
        return FormulaError(
            f"an invisible character ({title}) stands here",
            text=text, span=span, code="character", hint="delete it",
        )  # fmt: skip
    hint = "a name begins with a letter" if letter == "_" else ""
    return FormulaError(f"'{letter}' is not used in formulas", text=text, span=span, code="character", hint=hint)
