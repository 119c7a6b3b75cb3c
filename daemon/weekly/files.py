"""Where weekly logs are kept: a folder beside the database, a PDF and a CSV a week."""

from __future__ import annotations

import os
from pathlib import Path

from daemon.errors import WeekError
from daemon.site.types import Site
from daemon.weekly.csv_out import csv_text
from daemon.weekly.pdf import pdf_of
from daemon.weekly.records import WeekLog
from daemon.weekly.sheet import sheet


def folder_of(store_path: Path) -> Path:
    """The folder beside a database: "alder-yard.weekly" beside "alder-yard.db"."""
    return store_path.with_name(f"{store_path.stem}.weekly")


def pdf_bytes(site: Site, log: WeekLog) -> bytes:
    """The log as a PDF."""
    return pdf_of(sheet(site, log), us_paper=site.units == "us")


def write(site: Site, log: WeekLog, folder: Path) -> tuple[Path, Path]:
    """Write both files, whole or not at all; WeekError says what stands in the way."""
    made = (
        (folder / f"{site.id}-{log.week}.pdf", pdf_bytes(site, log)),
        (folder / f"{site.id}-{log.week}.csv", csv_text(site, log).encode()),
    )
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for path, content in made:
            part = path.with_name(f"{path.name}.part")
            part.write_bytes(content)
            os.replace(part, path)
    except OSError as error:
        raise WeekError(
            f"{folder}: the week's files cannot be written ({error.strerror or error}): give "
            "another folder, or let the user that runs dripleg write there"
        ) from error
    return made[0][0], made[1][0]
