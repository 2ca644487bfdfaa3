"""What every page's context is: a frozen record that names its template and explains each of its fields."""

from __future__ import annotations

from dataclasses import MISSING, dataclass, field
from typing import Any, ClassVar


def told(help_text: str, default: Any = MISSING) -> Any:
    """A field of a context with the sentence that says what it holds."""
    if default is MISSING:
        return field(metadata={"help": help_text})
    return field(default=default, metadata={"help": help_text})


@dataclass(frozen=True, kw_only=True)
class Page:
    """Base of all contexts: the template sees exactly the fields of the record, and the links."""

    template: ClassVar[str]
    """File name under `templates/`."""

    here: ClassVar[str] = ""
    """Name of the entry in the main navigation that this page belongs to, or ""."""

    title: str = told("What the page is about; stands before the product's name in the window title.")
