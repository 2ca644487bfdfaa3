"""What is wrong with the choice of a table."""

from __future__ import annotations


class TableError(ValueError):
    """A table that cannot be made: `message` says why, `hint` what would do, `code` is stable."""

    def __init__(self, message: str, hint: str, code: str) -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint
        self.code = code
