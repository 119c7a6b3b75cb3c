"""The defaults as Markdown tables, from the same tables that the reader uses."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import sensors.drivers  # noqa: F401  # fills DRIVERS
from daemon.moisture.description import Fixed, Share
from daemon.moisture.margin import ROOM_GIVE_OR_TAKE_K, SLAB_GIVE_OR_TAKE_K, SLAB_K
from daemon.site import defaults
from daemon.site.defaults import KindDefault, UsualTemperature
from daemon.site.fitting_words import default_rows
from daemon.site.keeping import BECAUSE as KEPT_BECAUSE
from daemon.site.keeping import kept_words
from daemon.site.notes import written
from daemon.site.types import REMINDER_TIMES, Api, Costs, Cup, Keeping, Limits, Signal
from daemon.units import (
    show_barometer,
    show_difference,
    show_duration,
    show_flow,
    show_percent,
    show_pressure,
    show_pressure_difference,
    show_temperature,
    show_volume,
)
from daemon.work import PROFILES
from sensors.registry import DRIVERS, REQUIRED, Driver

Row = Sequence[str]


def defaults_table(drivers: Mapping[str, Driver] = DRIVERS) -> str:
    """Every default, per table of the site file, per kind of station and per driver."""
    parts = [
        _table(("table", "key", "when not said", "because"), _general()),
        _table(("kind", "temperature", "pressure", "trap"), _kinds()),
        _table(
            ("kind", "trap's capacity", "drain at", "keeps of the liquid", "drained every"),
            _traps(),
        ),
        _table(("a value that is only said", "give or take"), _widths()),
        _table(("driver", "key", "when not said", "meaning"), _drivers(drivers)),
    ]
    return "\n\n".join(parts) + "\n"


def _table(head: Row, rows: Iterator[Row]) -> str:
    lines = [head, ["---"] * len(head), *rows]
    return "\n".join(f"| {' | '.join(cell.replace('|', '/') for cell in row)} |" for row in lines)


def _outlet_rows() -> Iterator[Row]:
    """What is asked of the air, by the work, and how cold the coldest thing is."""
    by_margin: dict[float, list[str]] = {}
    for profile in PROFILES.values():
        by_margin.setdefault(profile.line_margin_k, []).append(f"`{profile.name}`")
    for margin_k, works in sorted(by_margin.items(), reverse=True):
        names = ", ".join(name for name in works if name != "``")
        because = f"for {names}" + (", and where no `work` is said" if "``" in works else "")
        yield "", "`line_margin`", show_difference(margin_k, "metric"), because
    around = show_difference(ROOM_GIVE_OR_TAKE_K, "metric")
    room = f"as at its station, behind a tank or a cooler as at the intake, +- {around}"
    yield "", "`surroundings`", room, "the air around a hose; no surface margin without it"
    below, width = (show_difference(each, "metric") for each in (-SLAB_K, SLAB_GIVE_OR_TAKE_K))
    yield "", "`slab`", f"{below} colder than the air around +- {width}", "practice"


def _general() -> Iterator[Row]:
    cup, api = Cup(), Api()
    yield "`[site]`", "`id`", "`shop`", "in topics and files"
    yield "", "`name`", "the id", "what people read"
    yield "", "`timezone`", "`UTC`", "no clock but the world's"
    yield "", "`units`", "`metric`", "what people are shown"
    yield "", "`sample_every`", "10 s", "quick enough for a compressor's cycle"
    yield "`[hours]`", "", "always open", "a daily drain is then due at midnight"
    yield (
        "`[compressor]`",
        "`free_air_delivery`",
        _both(defaults.DELIVERED, lambda value: show_flow(value, "metric")),
        defaults.DELIVERED_BECAUSE,
    )
    share = defaults.OF_DISPLACEMENT
    yield "", "", f"{_share(share)} of `displacement`, where that is said", "practice"
    otherwise = "else the tank's pressure, read at least once in a pump-up"
    yield "", "`running`", "the only contact that nothing else uses", otherwise
    for key, value in (("`cut_in`", defaults.CUT_IN_PA), ("`cut_out`", defaults.CUT_OUT_PA)):
        yield "", key, show_pressure(value, "metric", gauge=True), defaults.CUT_BECAUSE
    yield "", "`off_when_closed`", "`true`", "switched off overnight (practice)"
    limits, costs = Limits(), Costs()
    yield "", "`duty_limit`", show_percent(limits.duty), defaults.DUTY_LIMIT_BECAUSE
    yield "", "`leak_limit`", show_percent(limits.leak), defaults.LEAK_LIMIT_BECAUSE
    yield "`[costs]`", "`kwh_price`, `currency`", "none: only energy is reckoned", ""
    power = costs.specific_power
    width = show_percent(power.give_or_take / power.value)
    shown = f"{power.value:g} kW for a m3/min +- {width}"
    yield "", "`specific_power`", shown, defaults.SPECIFIC_POWER_BECAUSE
    turns = ", ".join(f"`{each}`" for each in REMINDER_TIMES)
    yield "`[reminders]`", "`at`", turns, "when hands are free (practice)"
    yield "`[cup]`", "`reads_low_by`", show_percent(cup.reads_low_by), "mist and a heel stay behind"
    yield "", "`give_or_take`", show_percent(cup.give_or_take), "practice"
    each = f"{show_percent(cup.each_time)} + {show_volume(cup.each_time_kg / 1000, 'metric')}"
    yield "", "`each_time`", each, "practice"
    margin = show_difference(defaults.SURFACE_MARGIN_K, "metric")
    yield "`[[outlet]]`", "`share`", "an equal part of what the others leave", ""
    yield "", "`surface_margin`", margin, "as in ISO 8502-4"
    yield from _outlet_rows()
    yield "", "", "one outlet `line-end` at the line's end", "where none is declared"
    yield from default_rows()
    yield "`[model]`", "`members`", "128", "enough for a 5-95 % interval on a Pi"
    yield "", "`seed`", "1", "any number will do"
    yield "`[store]`", "`keep_readings`", kept_words(Keeping()), KEPT_BECAUSE
    yield "`[api]`", "`host`", f"`{api.host}`", "this machine only"
    yield "", "`port`", f"{api.port}", "a port for pages"
    reading = f"`{str(api.open_reading).lower()}`"
    yield "", "`open_reading`", reading, "on the network, reading needs a key too"
    yield "`[mqtt]`", "", "no broker", "nothing leaves the shop unasked"
    yield from _signal_rows()


def _signal_rows() -> Iterator[Row]:
    usual = Signal()
    yield "`[signal]`", "", "no lamp, no buzzer", ""
    yield "", "`line`", "must be said", "the line's number on the chip: GPIO 25 is 25"
    yield "", "`kind`", f"`{usual.kind}`", "or `buzzer`: in working hours only"
    yield "", "`chip`", f"`{usual.chip}`", "gpiochip0 on a Pi with a current kernel"
    yield "", "`active`", "`high`", "the level that switches it on"
    priorities = ", ".join(f"`{each}`" for each in usual.priorities)
    yield "", "`priorities`", priorities, "what can wait makes no light"
    yield "", "`pattern`", f"`{usual.pattern}`", "or `steady`: while nobody has seen the alarm"


def _kinds() -> Iterator[Row]:
    for kind, usual in defaults.KINDS.items():
        air = _temperature(usual.temperature)
        if kind == "intake":
            humidity = _both(defaults.HUMIDITY, show_percent)
            air = f"the only free sensor that gives it, else {air}; relative humidity {humidity}"
        if kind == "receiver":
            volume = _both(defaults.VOLUME, lambda value: show_volume(value, "metric"))
            air += f"; volume {volume}"
        yield f"`{kind}`", air, _pressure(usual), _has_trap(usual)


def _temperature(usual: UsualTemperature) -> str:
    width = show_difference(usual.give_or_take_k, "metric")
    plus = show_difference(usual.plus_k, "metric")
    if usual.like == "":
        return f"{show_temperature(defaults.ROOM.value, 'metric')} +- {width}"
    if usual.like == "duty":
        lag = show_duration(defaults.RISE_TIME_S)
        return f"like the intake + {plus} x duty, over {lag}, +- {width}"
    place = "the intake" if usual.like == "intake" else "the station before"
    return f"like {place}{f' + {plus}' if usual.plus_k else ''}, +- {width}"


def _pressure(usual: KindDefault) -> str:
    width = show_pressure_difference(defaults.LIKE_PRESSURE_PA, "metric")
    match usual.pressure:
        case "barometer":
            shown = _both(defaults.BAROMETER, lambda value: show_barometer(value, "metric"))
            return f"the only barometer, else {shown}"
        case "switch":
            return (
                "between `cut_in` and `cut_out`; behind another tank or a regulator like the "
                f"station before, +- {width}"
            )
        case "set":
            share = show_percent(defaults.GIVE_OR_TAKE_SHARES["set"])
            return f"`set`, which must be said, +- {share}"
        case "before":
            return f"like the station before, +- {width}; before the first tank like that tank"


def _has_trap(usual: KindDefault) -> str:
    if usual.trap is None:
        return "none"
    return 'yes, unless `trap = "none"`' if usual.trap.always else "only with a `trap` table"


def _traps() -> Iterator[Row]:
    for kind, usual in defaults.KINDS.items():
        trap = usual.trap
        if trap is None:
            continue
        share = trap.capacity_of_volume
        size = f"{show_percent(share)} of the volume" if share else _volume(trap.capacity_m3)
        keeps = [f"{_share(trap.separation)} ({trap.because})"]
        if kind == "pipe":
            bottom = _share(defaults.TAKE_OFF_BOTTOM)
            keeps.append(f"{bottom} ({defaults.TAKE_OFF_BOTTOM_BECAUSE})")
        if kind == "cooler":
            fitted = _share(defaults.COOLER_WITH_SEPARATOR)
            keeps.append(f"{fitted} ({defaults.COOLER_WITH_SEPARATOR_BECAUSE})")
        every = "working day with a petcock, else never" if kind == "receiver" else "never"
        yield f"`{kind}`", size, f"{show_percent(trap.drain_at)} of it", "; ".join(keeps), every


def _widths() -> Iterator[Row]:
    yield "temperature", show_difference(defaults.GIVE_OR_TAKE_K, "metric")
    yield "pressure in the line", show_pressure_difference(defaults.GIVE_OR_TAKE_PA, "metric")
    yield "barometer's pressure", show_barometer(defaults.GIVE_OR_TAKE_BAROMETER_PA, "metric")
    yield "relative humidity", show_percent(defaults.GIVE_OR_TAKE_HUMIDITY)
    for key, share in defaults.GIVE_OR_TAKE_SHARES.items():
        yield f"`{key}`", f"{show_percent(share)} of the value"
    yield "`separation`", "the kind's own"


def _drivers(drivers: Mapping[str, Driver]) -> Iterator[Row]:
    for name, driver in sorted(drivers.items()):
        first = f"`{name}`"
        for key in driver.keys:
            default = "must be said" if key.default is REQUIRED else written(key.default, key.name)
            yield first, f"`{key.name}`", default or "left out", key.meaning
            first = ""


def _both(fixed: Fixed, show: object) -> str:
    assert callable(show)
    return f"{show(fixed.value)} +- {show(fixed.give_or_take)}"


def _share(share: Share) -> str:
    return f"{share.value:g} +- {share.give_or_take:g}"


def _volume(volume_m3: float) -> str:
    return show_volume(volume_m3, "metric")
