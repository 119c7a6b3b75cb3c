"""What a person or a device may tell the daemon: checked before it is committed."""

from __future__ import annotations

import math
from typing import get_args

from daemon.alarms import SHELVED_LEAST_US, SHELVED_US
from daemon.clock import MINUTE_US, format_rfc3339
from daemon.due import volume_words
from daemon.errors import JournalError
from daemon.journal import (
    Acknowledge,
    Blotted,
    Blotter,
    Body,
    Confirm,
    Drain,
    Gauge,
    SaltCheck,
    Service,
    Serviced,
    Shelve,
    Undo,
    Unshelve,
)
from daemon.moisture.description import Trap
from daemon.service_entries import why_not
from daemon.site.types import Site
from daemon.units import show_difference, show_duration

AHEAD_US = 2 * MINUTE_US  # a phone's clock may be a little fast
LOOKS = ("", "clear", "milky", "oily", "rusty")
MOST_OF_CAPACITY = 2.0  # more than this from one trap is a slip of the pen
LONGEST_NAME, LONGEST_KEY = 40, 200
MOST_OFF_SALT = 0.10  # of relative humidity: three times the widest that a part's data sheet allows
GAUGE_SPREAD_K = (-20.0, 60.0)
GAUGE_VALID_S = (60.0, 8 * 3600.0)


def check(site: Site, body: Body, at_us: int, now_us: int, begun_us: int) -> None:
    """Raise JournalError, saying what is wrong and what to do, unless the entry can be taken."""
    if at_us > now_us + AHEAD_US:
        raise JournalError(
            f"{format_rfc3339(at_us)} is ahead of the daemon's clock ({format_rfc3339(now_us)}): "
            "leave the time out for now, or set the clock"
        )
    if at_us < begun_us:
        raise JournalError(
            f"{format_rfc3339(at_us)} is before the record begins ({format_rfc3339(begun_us)}): "
            "nothing is known of that time"
        )
    match body:
        case Drain():
            _check_drain(site, body)
        case Acknowledge(by=by) | Unshelve(by=by):
            _check_by(by)
        case Shelve() as shelve:
            _check_shelve(shelve)
        case Confirm(trap=trap, by=by) | Undo(trap=trap, by=by):
            _check_trap(site, trap)
            _check_by(by)
        case Service() as service:
            _check_service(site, service)
        case Gauge() as gauge:
            _check_gauge(site, gauge)
        case SaltCheck() as check:
            _check_salt(site, check)
        case Blotter() as blotter:
            _check_outlet(site, blotter.outlet)
            if blotter.result not in get_args(Blotted):
                known = ", ".join(get_args(Blotted))
                raise JournalError(f'"{blotter.result}" is no blotter\'s result (known: {known})')
            _check_by(blotter.by)


def _check_trap(site: Site, name: str) -> Trap:
    traps = {s.id: s.trap for s in site.line.stations if s.trap is not None}
    if name not in traps:
        known = ", ".join(traps) or "none"
        raise JournalError(f'"{name}" is not a trap of this site (known: {known})')
    return traps[name]


def _check_drain(site: Site, drain: Drain) -> None:
    trap = _check_trap(site, drain.trap)
    if drain.look not in LOOKS:
        raise JournalError(f'look "{drain.look}" is not one of {", ".join(LOOKS[1:])}')
    _check_by(drain.by)
    volume_kg = drain.volume_kg
    if volume_kg is None:
        return
    if not (math.isfinite(volume_kg) and volume_kg >= 0.0):
        raise JournalError(
            f"a volume of {volume_kg * 1000:g} ml cannot be: leave it out if it was not measured"
        )
    if drain.outcome == "empty" and volume_kg > 0.0:
        raise JournalError(
            f'"empty" with {volume_words(site, volume_kg)} contradicts itself: say "emptied", or '
            "leave the volume out"
        )
    capacity_kg = trap.capacity.value
    if volume_kg > MOST_OF_CAPACITY * capacity_kg:
        raise JournalError(
            f"{volume_words(site, volume_kg)} is more than twice what {drain.trap} can hold "
            f"({volume_words(site, capacity_kg)}): look at the figure and its unit again"
        )


def _check_service(site: Site, service: Service) -> None:
    _check_by(service.by)
    if service.what not in get_args(Serviced):
        known = ", ".join(get_args(Serviced))
        raise JournalError(f'"{service.what}" is not something that is recorded (known: {known})')
    stations = {station.id: station for station in site.line.stations}
    if service.what == "compressor serviced" and not service.of:
        return
    if service.what == "sensor replaced":  # the entry names the sensor, wherever it was noted
        known_ids = [sensor.id for sensor in site.sensors]
    else:
        known_ids = list(stations)
    if service.of not in known_ids:
        raise JournalError(
            f'{service.what}: "{service.of}" is not one of {", ".join(known_ids) or "none"}'
        )
    if service.what == "sensor replaced":
        return
    if reason := why_not(site, service.what, stations[service.of]):
        raise JournalError(f'"{service.what}" cannot be said of {service.of}: {reason}')


def _check_shelve(shelve: Shelve) -> None:
    least_s, most_s = (each / 1e6 for each in (SHELVED_LEAST_US, SHELVED_US))
    if not (math.isfinite(shelve.for_s) and least_s <= shelve.for_s <= most_s):
        raise JournalError(
            f"an alarm put off for {shelve.for_s:g} s: say from {show_duration(least_s)} to "
            f"{show_duration(most_s)}"
        )
    _check_by(shelve.by)


def _check_outlet(site: Site, name: str) -> None:
    known = [outlet.id for outlet in site.line.outlets]
    if name not in known:
        raise JournalError(f'"{name}" is not an outlet of this site (known: {", ".join(known)})')


def _check_gauge(site: Site, gauge: Gauge) -> None:
    _check_outlet(site, gauge.outlet)
    least_k, most_k = GAUGE_SPREAD_K
    if not (math.isfinite(gauge.spread_k) and least_k <= gauge.spread_k <= most_k):
        ends = " to ".join(show_difference(each, site.units) for each in GAUGE_SPREAD_K)
        raise JournalError(
            f"a spread of {gauge.spread_k:g} K cannot be: send how far the surface is above the "
            f"dew point of the air around, {ends}"
        )
    least_s, most_s = GAUGE_VALID_S
    if not (math.isfinite(gauge.valid_s) and least_s <= gauge.valid_s <= most_s):
        raise JournalError(
            f"a gauge's reading that speaks for {gauge.valid_s:g} s: say from "
            f"{show_duration(least_s)} to {show_duration(most_s)}"
        )
    _check_by(gauge.by)


def _check_salt(site: Site, check: SaltCheck) -> None:
    _check_by(check.by)
    humid = [c.sensor for c in site.channels.values() if c.quantity == "relative_humidity"]
    if check.sensor not in humid:
        known = ", ".join(humid) or "none"
        raise JournalError(f'"{check.sensor}" is not a humidity sensor of this site ({known})')
    if not (0.0 <= check.reads <= 1.0 and 0.0 < check.true < 1.0):
        raise JournalError(
            f"a salt check of {check.reads:.1%} beside {check.true:.1%} cannot be: relative "
            "humidities are fractions from 0 to 1"
        )
    if abs(check.reads - check.true) > MOST_OFF_SALT:
        raise JournalError(
            f"{check.sensor} reads {check.reads:.1%} where {check.true:.1%} is: so far off is no "
            "bias. Was it in the jar for some hours, closed? If it was, replace the sensor"
        )


def _check_by(by: str) -> None:
    if len(by) > LONGEST_NAME:
        raise JournalError(f"initials of {len(by)} characters: at most {LONGEST_NAME}")
