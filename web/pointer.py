"""JSON pointers (RFC 6901): writing their parts, and following them."""

from __future__ import annotations

from typing import Any


def token(name: str) -> str:
    """A name as a part of a JSON pointer."""
    return name.replace("~", "~0").replace("/", "~1")


def at(document: Any, pointer: str) -> Any:
    """What a pointer leads to in a document; None where it leads nowhere."""
    for part in pointer.split("/")[1:]:
        name = part.replace("~1", "/").replace("~0", "~")
        if isinstance(document, dict):
            document = document.get(name)
        elif isinstance(document, list) and name.isascii() and name.isdigit() and int(name) < len(document):
            document = document[int(name)]
        else:
            return None
    return document
