"""Bodies of requests: the size is limited while they stream in, the media type is judged before they are read."""

from __future__ import annotations

from email.message import Message

from starlette.requests import Request

from service.errors import Fault

JSON = "application/json"
FORM = "application/x-www-form-urlencoded"


async def read_body(request: Request, media_type: str, limit: int) -> bytes:
    """The whole body of a request of `media_type` in UTF-8; raises a fault 413 or 415."""
    _check_type(request, media_type)
    declared = request.headers.get("content-length", "")
    if declared.isdigit() and int(declared) > limit:
        raise _too_large(limit)
    parts: list[bytes] = []
    size = 0
    async for part in request.stream():
        size += len(part)
        if size > limit:
            raise _too_large(limit)
        parts.append(part)
    return b"".join(parts)


def _check_type(request: Request, media_type: str) -> None:
    header = request.headers.get("content-type", "")
    message = Message()
    message["content-type"] = header
    # A header that cannot be read counts as text/plain there (RFC 2045, section 5.2), so it is refused here.
    if not header or message.get_content_type() != media_type:
        sent = f"not {header!r}" if header else "and the request names no Content-Type"
        raise Fault("media-type", f"The body has to be {media_type}, {sent}.", headers={"accept": media_type})
    charset = message.get_param("charset", "utf-8")
    if not isinstance(charset, str) or charset.lower() not in ("utf-8", "utf8", "us-ascii"):
        raise Fault("media-type", "The body has to be in UTF-8.", headers={"accept": f"{media_type};charset=utf-8"})
    coding = request.headers.get("content-encoding", "identity").lower()
    if coding != "identity":
        raise Fault("media-type", f"A body coded as {coding!r} is not read.", headers={"accept-encoding": "identity"})


def _too_large(limit: int) -> Fault:
    return Fault("too-large", f"At most {limit:,} bytes are read.", members={"limit": limit})
