"""What MQTT is told once a week's log is made: retained on the topic `weekly`."""

from __future__ import annotations

from typing import Any

from daemon.clock import format_rfc3339
from daemon.outbox import Message, Topics, encode
from daemon.payloads import millilitres
from daemon.site.types import Site
from daemon.views import Interval
from daemon.weekly.records import WeekLog
from daemon.weekly.sheet import sheet


def week_message(topics: Topics, site: Site, log: WeekLog) -> Message:
    """The newest week's log in short: for the outbox, so that it is not lost."""
    return Message(topics.weekly, encode(week_payload(site, log)), retain=True)


def week_payload(site: Site, log: WeekLog) -> dict[str, Any]:
    """The log in short: volumes in whole millilitres, hours with one decimal; null: not known.

    `page` is where the daemon's own pages show it; `text` is in the site's units.
    """
    watched = log.watched
    return {
        "week": log.week,
        "begins": format_rfc3339(log.from_us),
        "ends": format_rfc3339(log.to_us),
        "recorded_h": _hours(watched.of_s),
        "watched_h": _hours(watched.watched_s),
        "water_in_ml": _ml(log.water_in_kg),
        "traps": [
            {
                "trap": trap.trap,
                "shed_ml": _ml(trap.shed_kg),
                "measured_ml": millilitres(trap.measured_kg) if trap.measured else None,
                "drains": trap.drains,
                "late": trap.late,
            }
            for trap in log.traps
        ],
        "outlets": [
            {
                "outlet": outlet.outlet,
                "unfit_h": _hours(outlet.unfit_s),
                "not_known_h": _hours(
                    sum(outlet.verdict_s.get(name, 0.0) for name in ("unknown", "not watched"))
                ),
            }
            for outlet in log.outlets
        ],
        "page": f"/week/{log.week}",
        "text": sheet(site, log).lead,
    }


def _hours(seconds: float) -> float:
    return round(seconds / 3600.0, 1)


def _ml(found: Interval | None) -> dict[str, int] | None:
    if found is None:
        return None
    low, middle, high = (millilitres(each) for each in found.values)
    return {"p05": low, "p50": middle, "p95": high}
