"""The line's shape: what hangs on what, in the order in which the air meets it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from daemon.moisture.description import Like, RiseByDuty, Source
from daemon.site.stations import Draft
from daemon.site.table import Table


def tell_loops(drafts: Sequence[Draft]) -> bool:
    """Tell every circle of `after`, once each. Whether there is none."""
    hangs_on = {draft.id: draft.after for draft in drafts if draft.after}
    tables = {draft.id: draft.table for draft in drafts}
    loops = list(_circles(hangs_on))
    for circle in loops:
        tables[circle[0]].wrong(
            "after",
            f"goes round in a circle: {_way(circle)}; "
            "let one of them hang on a station nearer the intake",
        )
    return not loops


def in_order(drafts: Sequence[Draft]) -> list[Draft]:
    """Stations each after the one it hangs on, else in the file's order; what cannot be placed
    comes last."""
    placed: list[Draft] = []
    waiting = list(drafts)
    done = {""}
    while waiting:
        ready = next((draft for draft in waiting if draft.after in done), waiting[0])
        waiting.remove(ready)
        placed.append(ready)
        done.add(ready.id)
    return placed


def upstream(draft: Draft, by_id: Mapping[str, Draft]) -> Iterator[Draft]:
    """The stations before this one, the nearest first."""
    seen = {draft.id}
    above = by_id.get(draft.after or "")
    while above is not None and above.id not in seen:
        yield above
        seen.add(above.id)
        above = by_id.get(above.after or "")


def first_receiver_below(draft: Draft, drafts: Sequence[Draft]) -> Draft | None:
    """The receiver that air from here meets first, in the order of the stations."""
    by_id = {each.id: each for each in drafts}
    for each in drafts:
        if each.kind == "receiver" and any(above is draft for above in upstream(each, by_id)):
            return each
    return None


def ends(drafts: Sequence[Draft]) -> list[Draft]:
    """Stations on which no other hangs."""
    hung_on = {draft.after for draft in drafts}
    return [draft for draft in drafts if draft.id not in hung_on]


def tell_circular_rules(drafts: Sequence[Draft]) -> None:
    """Tell values that are like each other in a circle, once each."""
    for key in ("temperature", "pressure"):
        sources: dict[str, Source | None] = {each.id: getattr(each, key) for each in drafts}
        refers_to: dict[str, str | None] = {
            name: source.station
            for name, source in sources.items()
            if isinstance(source, Like | RiseByDuty)
        }
        tables: dict[str, Table] = {each.id: each.table for each in drafts}
        for circle in _circles(refers_to):
            said = [name for name in circle if tables[name].said(key)]
            if not said or not all(tables[name].ok(key) for name in said):
                continue
            table = tables[said[0]]
            table.wrong(
                key,
                f"goes round in a circle: {_way(circle)}; "
                "give one of them a channel or a value of its own",
            )


def _circles(refers_to: Mapping[str, str | None]) -> Iterator[list[str]]:
    """Every circle of names, beginning with the one that comes first."""
    done: set[str] = set()
    for start in refers_to:
        path: list[str] = []
        name = start
        while name in refers_to and name not in done and name not in path:
            path.append(name)
            name = refers_to[name] or ""
        if name in path:
            circle = path[path.index(name) :]
            first = min(circle, key=list(refers_to).index)
            at = circle.index(first)
            yield circle[at:] + circle[:at]
        done.update(path)


def _way(circle: Sequence[str]) -> str:
    return " -> ".join([*circle, circle[0]])
