"""Style sheets, scripts, fonts: our own and those of installed packages, compressed once, kept by browsers for ever."""

from __future__ import annotations

import gzip
import mimetypes
from collections.abc import Callable
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import FileResponse, Response

from service.conditional import unchanged
from service.errors import Fault
from web.assets import asset

IMMUTABLE = "public, max-age=31536000, immutable"
_COMPRESSIBLE = {".css", ".js", ".mjs", ".json", ".map", ".svg", ".ttf", ".otf", ".txt", ".webmanifest"}
_MEDIA_TYPES = {".js": "text/javascript", ".mjs": "text/javascript", ".ttf": "font/ttf", ".woff2": "font/woff2"}


@dataclass(frozen=True, slots=True)
class _File:
    path: Path
    changed: int
    digest: str
    media_type: str
    compressed: bytes | None


def router() -> APIRouter:
    """The route of `/static/`; each router keeps its own compressed copies."""
    routes = APIRouter()
    load = _loader()

    @routes.get("/static/{path:path}", include_in_schema=False)
    def read_static(path: str, request: Request, v: str = "") -> Response:
        found = asset(path)
        if found is None:
            raise Fault("not-found", f"There is no file at {request.url.path}.")
        file = load(found)
        packed = file.compressed is not None and "gzip" in request.headers.get("accept-encoding", "")
        headers = {
            "etag": f'"{file.digest}{"-gzip" if packed else ""}"',
            "cache-control": IMMUTABLE if v and file.digest.startswith(v) else "no-cache",
            "vary": "Accept-Encoding",
        }
        if unchanged(request, headers["etag"]):
            return Response(status_code=304, headers=headers)
        if packed and file.compressed is not None:
            headers["content-encoding"] = "gzip"
            return Response(file.compressed, headers=headers, media_type=file.media_type)
        return FileResponse(file.path, headers=headers, media_type=file.media_type)

    return routes


def _loader() -> Callable[[Path], _File]:
    kept: dict[Path, _File] = {}

    def load(path: Path) -> _File:
        changed = path.stat().st_mtime_ns
        file = kept.get(path)
        if file is None or file.changed != changed:
            content = path.read_bytes()
            kind = _MEDIA_TYPES.get(path.suffix) or mimetypes.guess_type(path.name)[0] or "application/octet-stream"
            compressed = gzip.compress(content, 6, mtime=0) if path.suffix in _COMPRESSIBLE else None
            file = kept[path] = _File(path, changed, sha256(content).hexdigest(), kind, compressed)
        return file

    return load
