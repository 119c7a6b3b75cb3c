"""What a practitioner would say about a line, with what it costs not to heed it."""

from __future__ import annotations

from daemon.site.names import Names
from daemon.site.types import Site


def remarks(site: Site, names: Names) -> tuple[str, ...]:
    return ()
