"""Running text with code in backquotes, as descriptions of an interface have it, made into HTML."""

from __future__ import annotations

from markupsafe import Markup, escape


def with_code(text: str) -> Markup:
    """Escape the text and set what stands between backquotes as code; a last quote without a partner stays."""
    parts = text.split("`")
    if len(parts) % 2 == 0:
        parts[-2:] = ["`".join(parts[-2:])]
    pieces = [Markup("<code>{}</code>").format(part) if place % 2 else escape(part) for place, part in enumerate(parts)]
    return Markup("").join(pieces)
