"""The pages' style, script and sign: read once, and asked for again only when they have changed."""

from __future__ import annotations

import re
from hashlib import blake2b
from pathlib import Path

from fastapi import APIRouter, Request
from starlette.responses import Response

from api.problems import Problem

STATIC = Path(__file__).resolve().parent.parent / "static"
_TYPES = {".css": "text/css", ".js": "text/javascript", ".svg": "image/svg+xml"}

router = APIRouter(include_in_schema=False)


def slim(text: str) -> str:
    """Without what is for the maintainer alone: indents, empty lines, lines that are a comment."""
    lines = (line.strip() for line in re.sub(r"/\*.*?\*/", "", text, flags=re.DOTALL).splitlines())
    return "\n".join(line for line in lines if line and not line.startswith("//")) + "\n"


class _Asset:
    def __init__(self, path: Path) -> None:
        self.content = slim(path.read_text("utf-8")).encode()
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
