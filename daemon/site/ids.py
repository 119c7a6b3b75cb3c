"""Reads the ids by which tables name each other."""

from __future__ import annotations

from daemon.site.notes import Explains
from daemon.site.table import Table
from daemon.site.values import identifier


def label(what: str, number: int, raw: object) -> str:
    """How a message names a table of a list: by its id, else by its place in the file."""
    name = raw.get("id") if isinstance(raw, dict) else None
    return f'{what} "{name}"' if isinstance(name, str) and name else f"{what} {number}"


def read_id(table: Table, what: str, taken: list[str], explains: Explains) -> str:
    """The table's id as written, noted as taken; "" when there is none, or another one's.

    An id that breaks the rules is told, and still serves to keep other tables quiet. `explains`
    says which names elsewhere may mean a table without an id of its own.
    """
    raw = table.values.get("id")
    if raw is None:
        if table.ok("id"):
            table.wrong("id", f'every {what} needs an id; write id = "..."')
        table.notes.unnamed(what, None, explains)
        return ""
    table.read("id", identifier, "")
    if not isinstance(raw, str) or not raw:
        table.notes.unnamed(what, None, explains)
        return ""
    if not table.ok("id"):
        table.notes.unnamed(what, raw, explains)
    if raw in taken:
        table.wrong("id", f"another {what} has this id; give each its own")
        table.notes.unnamed(what, None, explains)
        return ""
    taken.append(raw)
    return raw
