"""Reads what is asked of the plant: limits of `[compressor]`, `[costs]`, `[reminders]`."""

from __future__ import annotations

import math

from daemon.moisture.description import Fixed
from daemon.site import defaults
from daemon.site.notes import Notes, written
from daemon.site.table import Table
from daemon.site.types import REMINDER_TIMES, Costs, Limits, ReminderTime
from daemon.site.values import choice, quantity, text
from daemon.units import parse, show_percent

LIMIT_KEYS = ("duty_limit", "leak_limit")
COSTS_KEYS = ("kwh_price", "currency", "specific_power")
REMINDERS_KEYS = ("at",)
DEAREST_KWH = 1e6  # of whatever currency
SPECIFIC_POWER_LIMITS_KW = (1.0, 50.0)  # for a m3/min


def read_limits(table: Table) -> Limits:
    """The limits in the `[compressor]` table."""
    usual = Limits()
    return Limits(
        duty=table.value(
            "duty_limit",
            quantity("fraction", 0.05, 1.0, "from 5 to 100 %"),
            usual.duty,
            show_percent(usual.duty),
            defaults.DUTY_LIMIT_BECAUSE,
        ),
        leak=table.value(
            "leak_limit",
            quantity("fraction", 0.01, 1.0, "from 1 to 100 %"),
            usual.leak,
            show_percent(usual.leak),
            defaults.LEAK_LIMIT_BECAUSE,
        ),
    )


def read_costs(notes: Notes, raw: object) -> Costs:
    """The `[costs]` table. Without a price only energy is reckoned."""
    table = Table(notes, "costs", {} if raw is None else raw, COSTS_KEYS)
    price = table.read("kwh_price", _price, None)
    currency = table.read("currency", _currency, "")
    if currency and price is None and table.ok("kwh_price"):
        table.wrong("currency", "says of what, but not how much: write kwh_price as well")
    return Costs(price, currency, _specific_power(table))


def _price(raw: object) -> float:
    if isinstance(raw, bool) or not isinstance(raw, int | float):
        raise ValueError("must be a number without quotes, like 0.30; its currency is a key beside")
    if not 0.0 < raw <= DEAREST_KWH:
        raise ValueError("is no price of a kilowatt-hour; write what one costs, like 0.30")
    return float(raw)


def _currency(raw: object) -> str:
    name = text(raw).strip()
    if len(name) > 12 or not name.isprintable():
        raise ValueError('is no currency; write it short, like "EUR"')
    return name


def _specific_power(table: Table) -> Fixed:
    usual = defaults.SPECIFIC_POWER
    if not table.said("specific_power"):
        shown = f"{usual.value:g} kW for a m3/min, give or take {show_percent(_share(usual))}"
        table.default("specific_power", shown, defaults.SPECIFIC_POWER_BECAUSE)
        return usual
    raw = table.values.get("specific_power")
    if not isinstance(raw, dict):
        value = table.read("specific_power", _kilowatts, usual.value)
        return Fixed(value, value * _share(usual))
    inner = table.sub("specific_power", ("value", "give_or_take"))
    value = inner.read("value", _kilowatts, math.nan)
    if math.isnan(value) and not inner.broken:
        table.wrong("specific_power", 'says no value; write { value = 6.5, give_or_take = "25 %" }')
    share = inner.read("give_or_take", _width, _share(usual))
    return Fixed(value, value * share)


def _share(fixed: Fixed) -> float:
    return fixed.give_or_take / fixed.value


def _kilowatts(raw: object) -> float:
    lowest, highest = SPECIFIC_POWER_LIMITS_KW
    if isinstance(raw, bool) or not isinstance(raw, int | float) or not lowest <= raw <= highest:
        raise ValueError(
            f"must be kW for each m3/min of free air, a number from {lowest:g} to {highest:g}, "
            "like 6.5"
        )
    return float(raw)


def _width(raw: object) -> float:
    share = parse(raw, "fraction")
    if not 0.0 <= share <= 1.0:
        raise ValueError('is a share of the value: from "0 %" to "100 %"')
    return share


def read_reminders(notes: Notes, raw: object) -> tuple[ReminderTime, ...]:
    """The `[reminders]` table: at which turns of the day a round is asked for."""
    table = Table(notes, "reminders", {} if raw is None else raw, REMINDERS_KEYS)
    return table.value(
        "at",
        _times,
        REMINDER_TIMES,
        ", ".join(f'"{each}"' for each in REMINDER_TIMES),
        "when hands are free (practice)",
    )


def _times(raw: object) -> tuple[ReminderTime, ...]:
    if isinstance(raw, str):
        raw = [raw]
    if not isinstance(raw, list):
        raise ValueError(f"must be a list, like {written(list(REMINDER_TIMES))}; [] for none")
    one = choice(REMINDER_TIMES, "turn of the day")
    named = [one(each) for each in raw]
    return tuple(each for each in REMINDER_TIMES if each in named)
