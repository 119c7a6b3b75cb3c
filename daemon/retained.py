"""Retained states of what the site file no longer has: a broker would show them for ever."""

from __future__ import annotations

import json
from collections.abc import Iterable

from daemon.outbox import Message, Topics
from daemon.site.types import Site
from daemon.store.store import Store

TOPICS_KEY = "mqtt.retained"  # every topic that was ever retained, in the database


def retained_topics(topics: Topics, site: Site, alarms: Iterable[str]) -> set[str]:
    """The topics on which this site file's daemon leaves a state with the broker."""
    return {
        topics.service,
        topics.weekly,
        *(topics.trap(name) for name in site.traps),
        *(topics.outlet(outlet.id) for outlet in site.outlets),
        *(topics.alarm(name) for name in alarms),
    }


def gone(store: Store, now: set[str]) -> list[Message]:
    """An empty retained message, which takes a state away, for each topic that is no longer used.

    They are remembered for good and sent after each start: whether a broker took one, nobody
    knows for sure.
    """
    before = set(json.loads(store.get_meta(TOPICS_KEY) or "[]"))
    if not now <= before:
        store.set_meta(TOPICS_KEY, json.dumps(sorted(before | now)))
    return [Message(topic, b"", retain=True) for topic in sorted(before - now)]
