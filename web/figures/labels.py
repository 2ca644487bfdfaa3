"""Labels of axes and identifiers of figures."""

from __future__ import annotations

from web.display import unit as printed


def bracketed(name: str, unit: str) -> str:
    """A label as print has it: `v [m/s²]`."""
    return f"{name} [{printed(unit)}]" if unit else name


def identifier(text: str) -> str:
    """Letters, digits and hyphens only, so that it can stand in an address and in a style rule."""
    return "".join(c if c.isalnum() and c.isascii() else f"-{ord(c):x}-" if c != "-" else c for c in text)
