"""The checkout, for tests that look at the project's own files."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
PACKAGES = ("daemon", "sensors", "api")
FOLDERS = (*PACKAGES, "tests", "deploy", ".ci")


def text_files() -> Iterator[Path]:
    """Every file of the project that people read: sources, scripts, documents, settings."""
    yield from (path for path in ROOT.iterdir() if path.is_file() and path.name != ".coverage")
    for folder in FOLDERS:
        for path in (ROOT / folder).rglob("*"):
            inside = path.relative_to(ROOT / folder).parts
            if path.is_file() and not any(part.startswith((".", "__pycache__")) for part in inside):
                yield path
