"""The layouts of packed rows in the database: which channels a site had, each with its step."""

from __future__ import annotations

import math
from collections.abc import Mapping

from sqlalchemy import Connection, insert, select

from daemon.errors import StoreError
from daemon.store.packing import Layout
from daemon.store.tables import layout_channels, layouts
from sensors.reading import Channel


def read_layouts(connection: Connection) -> dict[int, Layout]:
    """Every layout in the database, by its version."""
    columns: dict[int, list[tuple[str, float]]] = {
        version: [] for version in connection.execute(select(layouts.c.layout)).scalars()
    }
    rows = select(layout_channels).order_by(layout_channels.c.layout, layout_channels.c.position)
    for version, _, channel, step in connection.execute(rows):
        columns[version].append((channel, step))
    return {version: Layout.of(version, pairs) for version, pairs in columns.items()}


def layout_for(
    connection: Connection, known: dict[int, Layout], channels: Mapping[str, Channel]
) -> Layout:
    """The layout of these channels: the newest one when it is the same, else a new one."""
    columns = tuple((channel.name, channel.step) for channel in channels.values())
    for name, step in columns:
        if not 0.0 < step < math.inf:
            raise StoreError(f"channel {name!r} has the step {step:g}: it must be above 0")
    newest = max(known, default=0)
    if known and known[newest].columns == columns:
        return known[newest]
    layout = known[newest + 1] = Layout.of(newest + 1, columns)
    connection.execute(insert(layouts).values(layout=layout.version))
    for position, (name, step) in enumerate(columns):
        connection.execute(
            insert(layout_channels).values(
                layout=layout.version, position=position, channel=name, step=step
            )
        )
    return layout
