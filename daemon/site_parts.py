"""What of a site file an old state hangs on, part by part: an edit loses no more than it must.

A checkpoint carries the line's fingerprint and one of each part. The same line: the state goes on.
Another one: what was learned of the parts that were not touched goes on, member by member.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from hashlib import blake2b

from daemon.moisture import beliefs
from daemon.moisture.description import Measured
from daemon.moisture.ensemble import Array
from daemon.moisture.plan import Plan
from daemon.site.types import Site


def fingerprint(site: Site, plan: Plan) -> str:
    """The line's and its parts', as one line of text."""
    parts = {part: _hash(described) for part, described in _parts(site, plan)}
    return json.dumps({"line": _hash(site.line), "parts": parts}, sort_keys=True)


def same_line(one: str, other: str) -> bool:
    """Whether two fingerprints are of one description of the line."""
    return _read(one)[0] == _read(other)[0]


def untouched(plan: Plan, now: str, before: str, known: Mapping[str, Array]) -> dict[str, Array]:
    """Those of the beliefs `known` under `before` that still speak of the same part."""
    _, mine = _read(now)
    _, theirs = _read(before)
    same = {part for part, said in mine.items() if theirs.get(part) == said}
    owners = dict(_owners(plan))
    return {
        name: values
        for name, values in known.items()
        if owners.get(name) in same and values.shape == (plan.line.members,)
    }


def _read(text: str) -> tuple[str, dict[str, str]]:
    try:
        found = json.loads(text)
        return str(found["line"]), dict(found["parts"])
    except (ValueError, KeyError, TypeError):  # written before parts were told apart
        return text, {}


def _hash(described: object) -> str:
    return blake2b(repr(described).encode(), digest_size=8).hexdigest()


def _parts(site: Site, plan: Plan) -> Iterator[tuple[str, object]]:
    """Each part by name, with all that gives its beliefs their meaning."""
    line = site.line
    for station in line.stations:
        yield f"station {station.id}", station
    for outlet in line.outlets:
        yield f"outlet {outlet.id}", outlet
    for name in plan.channels:
        yield f"channel {name}", (site.channels[name], sorted(_widths(plan, name)))
    yield "compressor", line.compressor
    yield "cup", site.cup
    yield "ensemble", (line.members, line.seed)


def _widths(plan: Plan, channel: str) -> Iterator[float]:
    """Every width that a channel's bias is scaled by."""
    for station in plan.stations:
        for source in (station.temperature, station.pressure, station.relative_humidity):
            if isinstance(source, Measured) and source.channel == channel:
                yield source.give_or_take
    for outlet in plan.line.outlets:
        yield from (s.give_or_take for s in outlet.sources if s.channel == channel)


def _owners(plan: Plan) -> Iterator[tuple[str, str]]:
    """Every belief with the part that it is about."""
    for channel in plan.channels:
        yield beliefs.bias_of(channel), f"channel {channel}"
    for station in plan.stations:
        for name in beliefs.own_names(station):
            yield name, f"station {station.id}"
    for outlet in plan.line.outlets:
        yield beliefs.slab_of(outlet.id), f"outlet {outlet.id}"
        yield beliefs.room_of(outlet.id), f"outlet {outlet.id}"
    yield beliefs.HUMIDITY, f"station {plan.stations[0].id}"
    yield beliefs.DELIVERED, "compressor"
    yield beliefs.DUTY, "compressor"
    yield beliefs.POOL, "ensemble"
    yield beliefs.CUP, "cup"
