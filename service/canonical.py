"""The fingerprint of a problem document: blind to spacing, to the order of members, and to `3.0` for `3`."""

from __future__ import annotations

import hashlib
import json
from typing import Any


def fingerprint(document: Any) -> str:
    """`sha256:` and the digest of the canonical text (sorted members, no spaces, whole numbers without a point).

    The text follows RFC 8785 in spirit; numbers are printed as Python prints them.
    """
    text = json.dumps(_plain(document), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    return "sha256:" + hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {str(name): _plain(member) for name, member in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(member) for member in value]
    if isinstance(value, float) and value.is_integer():
        return int(value)
    return value
