"""Conditional requests (RFC 9110, section 13): an answer that the caller has already is not sent again."""

from __future__ import annotations

from hashlib import sha256

from starlette.requests import Request
from starlette.responses import Response


def etag(content: bytes) -> str:
    """A strong validator of exactly these bytes."""
    return f'"{sha256(content).hexdigest()[:32]}"'


def unchanged(request: Request, tag: str) -> bool:
    """True where `If-None-Match` names the tag; compared weakly, as section 13.1.2 asks."""
    header = request.headers.get("if-none-match")
    if header is None:
        return False
    known = [candidate.strip().removeprefix("W/") for candidate in header.split(",")]
    return "*" in known or tag.removeprefix("W/") in known


def answer(
    request: Request, content: bytes, media_type: str, *, cache: str = "no-cache", headers: dict[str, str] | None = None
) -> Response:
    """The content with its validator, or 304 without it."""
    tag = etag(content)
    known = {"etag": tag, "cache-control": cache, **(headers or {})}
    if unchanged(request, tag):
        return Response(status_code=304, headers=known)
    return Response(content, headers=known, media_type=media_type)
