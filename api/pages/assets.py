"""The pages' style, script and sign: read once, and asked for again only when they have changed."""

from __future__ import annotations

from hashlib import blake2b
from pathlib import Path

from fastapi import APIRouter, Request
from starlette.responses import Response

from api.problems import Problem

STATIC = Path(__file__).resolve().parent.parent / "static"
_TYPES = {".css": "text/css", ".js": "text/javascript", ".svg": "image/svg+xml"}

router = APIRouter(include_in_schema=False)


class _Asset:
    def __init__(self, path: Path) -> None:
        self.content = path.read_bytes()
        self.media_type = _TYPES[path.suffix]
        tag = blake2b(self.content, digest_size=8).hexdigest()
        # kept, and asked for each time: after an update no page meets an old script
        self.headers = {"etag": f'"{tag}"', "cache-control": "no-cache"}


ASSETS = {path.name: _Asset(path) for path in sorted(STATIC.iterdir()) if path.suffix in _TYPES}


@router.get("/static/{name}")
async def asset(name: str, request: Request) -> Response:
    """One file; 304 while the browser has it as it is."""
    found = ASSETS.get(name)
    if found is None:
        raise Problem("not-found", f"nothing is at /static/{name[:60]}")
    if request.headers.get("if-none-match") == found.headers["etag"]:
        return Response(status_code=304, headers=found.headers)
    return Response(found.content, media_type=found.media_type, headers=found.headers)
