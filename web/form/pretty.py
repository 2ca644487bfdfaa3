"""A problem document as text that people like to edit: small objects and lists on one line, large ones indented."""

from __future__ import annotations

import json
from typing import Any

WIDTH = 96


def pretty(value: Any, indent: int = 0) -> str:
    """`value` as JSON text; what fits into the width stands on one line, except the document itself."""
    flat = json.dumps(value, ensure_ascii=False, allow_nan=False)
    if not isinstance(value, dict | list) or not value or (indent and indent + len(flat) <= WIDTH):
        return flat
    inner = indent + 2
    if isinstance(value, dict):
        lines = [f"{json.dumps(name, ensure_ascii=False)}: {pretty(item, inner)}" for name, item in value.items()]
    else:
        lines = [pretty(item, inner) for item in value]
    opening, closing = "{}" if isinstance(value, dict) else "[]"
    space = " " * inner
    return f"{opening}\n{space}" + f",\n{space}".join(lines) + f"\n{' ' * indent}{closing}"
