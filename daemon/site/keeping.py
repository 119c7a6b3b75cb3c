"""Reads `[store]`: for how long readings are kept."""

from __future__ import annotations

from daemon.site.notes import Notes
from daemon.site.table import Table
from daemon.site.types import Keeping
from daemon.units import parse, show_duration

STORE_KEYS = ("keep_readings",)
FOR_EVER = "for ever"
YEAR_S = 31_557_600.0  # 365.25 days
LEAST_S, MOST_S = 30 * 86_400.0, 100 * YEAR_S  # a late entry goes back eight days
BECAUSE = "a channel that is read every 10 s takes about 3 MB a year"


def read_store(notes: Notes, raw: object) -> Keeping:
    """The `[store]` table."""
    table = Table(notes, "store", {} if raw is None else raw, STORE_KEYS)
    usual = Keeping()
    kept = table.value("keep_readings", _kept, usual.readings_s, kept_words(usual), BECAUSE)
    return Keeping(kept)


def _kept(raw: object) -> float | None:
    if raw == FOR_EVER:
        return None
    length_s = parse(raw, "duration")
    if not LEAST_S <= length_s <= MOST_S:
        raise ValueError(
            f'is not possible here: from "30 days", since late entries reach back, to "100 years", '
            f'or "{FOR_EVER}"'
        )
    return length_s


def kept_words(keeping: Keeping) -> str:
    """For how long readings are kept, as the site file says it: "2 years"."""
    if keeping.readings_s is None:
        return FOR_EVER
    years = keeping.readings_s / YEAR_S
    if years.is_integer():
        return "1 year" if years == 1.0 else f"{years:g} years"
    return show_duration(keeping.readings_s)
