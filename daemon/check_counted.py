"""For `dripleg check`: traps whose contents the running daemon counts without an earlier state."""

from __future__ import annotations

import textwrap
from pathlib import Path

from daemon.asking import ask, serves
from daemon.check import WIDTH, Section
from daemon.clock import parse_rfc3339
from daemon.counted import notice
from daemon.site.types import Site


def counted_section(site: Site, store_path: Path | None) -> Section | None:
    """None where no daemon of this site runs here, or every trap is settled."""
    if not serves(site, store_path):
        return None
    answer = ask(site, "traps", store_path=store_path)
    if answer is None or answer[0] != 200:
        return None
    unsettled = [
        (trap["trap"], parse_rfc3339(trap["counted_from"]))
        for trap in answer[1]
        if "counted_from" in trap
    ]
    if not (told := notice(site, unsettled)):
        return None
    lines = textwrap.wrap(told, WIDTH, initial_indent="  ", subsequent_indent="  ")
    return Section("What the traps hold", tuple(lines))
