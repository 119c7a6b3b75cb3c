"""Reads the small tables: site, cup, model, mqtt, api."""

from __future__ import annotations

import re
from dataclasses import dataclass
from ipaddress import ip_address
from pathlib import Path
from typing import cast
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError, available_timezones

from daemon.addresses import is_loopback
from daemon.site.notes import Notes, suggestion
from daemon.site.table import Table
from daemon.site.types import Api, Cup, Mqtt, Units
from daemon.site.values import choice, flag, identifier, quantity, text, whole
from daemon.units import parse, show_duration

SITE_KEYS = ("id", "name", "timezone", "units", "sample_every")
CUP_KEYS = ("reads_low_by", "give_or_take", "each_time")
MODEL_KEYS = ("members", "seed")
MQTT_KEYS = ("host", "port", "user", "password", "password_file", "tls", "ca_file", "prefix")
API_KEYS = ("host", "port", "open_reading")
SAMPLE_EVERY_S = 10.0


@dataclass(frozen=True, slots=True)
class Basics:
    """What `[site]` says."""

    id: str
    name: str
    timezone: str
    units: Units
    sample_every_s: float


def read_site_table(notes: Notes, raw: object) -> Basics:
    """The `[site]` table. Sets the units in which the notes are written."""
    table = Table(notes, "site", raw, SITE_KEYS)
    units = table.read("units", choice(("metric", "us"), "system of units"), "metric")
    notes.units = cast(Units, units)
    if not table.said("units"):
        table.default("units", '"metric"', "what people are shown")
    name = table.value("id", identifier, "shop", '"shop"', "in topics and files")
    return Basics(
        id=name,
        name=table.read("name", text, name),
        timezone=table.value("timezone", timezone, "UTC", '"UTC"', "no clock but the world's"),
        units=notes.units,
        sample_every_s=table.value(
            "sample_every",
            quantity("duration", 1.0, 600.0, "from 1 s to 10 min"),
            SAMPLE_EVERY_S,
            show_duration(SAMPLE_EVERY_S),
            "quick enough for a compressor's cycle",
        ),
    )


def timezone(raw: object) -> str:
    """A zone of the time zone database."""
    name = text(raw)
    try:
        ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        known = sorted(available_timezones())
        end = suggestion(name, known) if len(name) > 2 else ""
        end = end if "did you mean" in end else '; write a place, like "Europe/Lisbon", or "UTC"'
        raise ValueError(f"is no time zone{end}") from None
    return name


def read_cup(notes: Notes, raw: object) -> Cup:
    """The `[cup]` table: how drained water is measured."""
    table = Table(notes, "cup", raw, CUP_KEYS)
    usual = Cup()
    share = quantity("fraction", 0.0, 0.5, "from 0 to 50 %")
    each, each_kg = table.read("each_time", _each_time, (usual.each_time, usual.each_time_kg))
    return Cup(
        reads_low_by=table.read("reads_low_by", share, usual.reads_low_by),
        give_or_take=table.read("give_or_take", share, usual.give_or_take),
        each_time=each,
        each_time_kg=each_kg,
    )


def _each_time(raw: object) -> tuple[float, float]:
    """ "5 % + 5 ml", either part alone too: a fraction, and kg."""
    share, volume_m3 = 0.0, 0.0
    for part in text(raw).split("+"):
        if part.strip().endswith("%"):
            share += parse(part, "fraction")
        else:
            volume_m3 += parse(part, "volume")
    if not (0.0 <= share <= 0.5 and 0.0 <= volume_m3 <= 1e-3):
        raise ValueError('is no error of a cup: at most 50 % and 1 L, like "5 % + 5 ml"')
    return share, volume_m3 * 1000.0


def read_model(notes: Notes, raw: object) -> tuple[int, int]:
    """Members and seed of the `[model]` table."""
    table = Table(notes, "model", raw, MODEL_KEYS)
    members = table.value(
        "members", whole(16, 4096, 128), 128, "128", "enough for a 5-95 % interval on a Pi"
    )
    return members, table.value("seed", whole(0, 2**31, 1), 1, "1", "any number will do")


def read_mqtt(notes: Notes, raw: object, folder: Path) -> Mqtt | None:
    """The `[mqtt]` table; None without one. Paths are taken from the site file's folder."""
    if raw is None:
        return None
    table = Table(notes, "mqtt", raw, MQTT_KEYS)
    tls = table.read("tls", flag, "ca_file" in table.values)
    port = 8883 if tls else 1883
    mqtt = Mqtt(
        host=table.value("host", host, "127.0.0.1", '"127.0.0.1"', "a broker on this machine"),
        port=table.value("port", PORT, port, str(port), "MQTT's own port"),
        user=table.read("user", text, ""),
        password=table.read("password", text, ""),
        password_file=_path(table, "password_file", folder),
        tls=tls,
        ca_file=_path(table, "ca_file", folder),
        prefix=table.read("prefix", _prefix, "dripleg"),
    )
    _check_login(table, tls)
    return mqtt


def _check_login(table: Table, tls: bool) -> None:
    if "password" in table.values and "password_file" in table.values:
        table.wrong("password_file", "says the password twice; keep password or password_file")
    elif "user" not in table.values and table.ok("user", "password", "password_file"):
        for key in ("password", "password_file"):
            if key in table.values:
                table.wrong(key, "a password needs a user; write user as well")
    if "ca_file" in table.values and not tls and table.ok("tls", "ca_file"):
        table.wrong("ca_file", "is for TLS, but tls = false; write tls = true or take it out")


def _path(table: Table, key: str, folder: Path) -> str:
    name = table.read(key, text, "")
    return str(folder / Path(name).expanduser()) if name else ""


def _prefix(raw: object) -> str:
    name = text(raw)
    if not re.fullmatch(r"[A-Za-z0-9_-]+(/[A-Za-z0-9_-]+)*", name):
        raise ValueError('is no beginning of a topic; write it like "dripleg" or "shop/dripleg"')
    return name


def host(raw: object) -> str:
    """A name or an address of a machine."""
    name = text(raw)
    if not re.fullmatch(r"[A-Za-z0-9._:-]+", name) or "//" in name:
        raise ValueError('is no machine\'s name or address; write it like "127.0.0.1"')
    if re.fullmatch(r"[0-9.]+", name):
        try:
            ip_address(name)
        except ValueError:
            raise ValueError('is no address; four numbers to 255, like "127.0.0.1"') from None
    return name


PORT = whole(1, 65535, 8080)


def read_api(notes: Notes, raw: object) -> Api:
    """The `[api]` table."""
    table = Table(notes, "api", raw, API_KEYS)
    api = Api(
        host=table.value("host", host, "127.0.0.1", '"127.0.0.1"', "this machine only"),
        port=table.value("port", PORT, 8080, "8080", "a port for pages"),
        open_reading=table.value(
            "open_reading", flag, False, "false", "on the network, reading needs a key too"
        ),
    )
    if api.open_reading and is_loopback(api.host):
        notes.no_effect(
            f'[api] open_reading = true: host = "{api.host}" is for this machine alone, which is '
            "asked for no key anyway"
        )
    return api
