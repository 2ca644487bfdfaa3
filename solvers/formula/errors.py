"""The one exception of this package: a formula that cannot be read."""

from __future__ import annotations

import unicodedata

from solvers.formula.nodes import Span

_WINDOW = 50  # characters shown on either side of the place


class FormulaError(ValueError):
    """What is wrong, where, and what would be right.

    `message` and `hint` are for people, `code` is a stable word, `span` are the characters of `text` concerned.
    Printed, it shows the text with a line of markers below the place.
    """

    def __init__(self, message: str, *, text: str, span: Span, code: str, hint: str = "") -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint
        self.span = span
        self.text = text
        self.code = code

    def __str__(self) -> str:
        lines = [self.message, *self._marked()]
        if self.hint:
            lines.append(self.hint)
        return "\n".join(lines)

    def _marked(self) -> tuple[str, str]:
        """The text around the place on one line, and the markers below it."""
        first = max(self.span.start - _WINDOW, 0)
        last = min(max(self.span.end, self.span.start + 1) + _WINDOW, len(self.text))
        before = "…" * (first > 0) + self.text[first : self.span.start]
        inside = self.text[self.span.start : min(self.span.end, last)]
        after = self.text[min(self.span.end, last) : last] + "…" * (last < len(self.text))
        shown = "".join(" " if unicodedata.category(c)[0] in "CZ" else c for c in before + inside + after)
        return shown, " " * _columns(before) + "^" * max(_columns(inside), 1)


def _columns(text: str) -> int:
    """How many columns the text takes on a terminal: marks stand on the letter before them, some letters are wide."""
    narrow = sum(not unicodedata.combining(c) for c in text)
    return narrow + sum(unicodedata.east_asian_width(c) in "WF" for c in text)
