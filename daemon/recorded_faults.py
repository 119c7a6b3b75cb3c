"""Recorded faults: what parts said when they gave no value, as `dripleg export` writes it."""

from __future__ import annotations

import math
from pathlib import Path

from daemon.clock import parse_rfc3339
from daemon.csv_rows import BadRow, Rows, shown
from daemon.export_rows import FAULTS_HEADER
from daemon.site.types import Site
from sensors.reading import Reading


def read_faults(
    site: Site, path: Path, skip_bad: bool = False
) -> tuple[list[Reading], list[BadRow]]:
    """Bad readings from a CSV of `time,channel,reason,value,unit`, in order of time.

    A row with a value is passed over: its reading stands among the others, and is judged again.
    ReplayError at the first bad row.
    """
    rows = Rows(path, FAULTS_HEADER, skip_bad)
    found: list[Reading] = []
    for time, channel, reason, value, _ in rows:
        if value.strip():
            continue
        try:
            time_us = parse_rfc3339(time)
        except ValueError as error:
            rows.refuse("time", str(error))
            continue
        if channel.strip() not in site.channels:
            known = ", ".join(sorted(site.channels)) or "none: the site file has no sensors"
            rows.refuse(
                "channel", f"{shown(channel)} is not a channel of this site (known: {known})"
            )
        elif not reason.strip():
            rows.refuse("reason", "is empty; say why there is no value, like no answer")
        else:
            found.append(Reading(channel.strip(), math.nan, time_us, reason))
    found.sort(key=lambda one: one.time_us)
    return found, rows.bad
