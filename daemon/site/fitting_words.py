"""What dryers, ratings, baths and self-emptying drains are taken for, in words and in rows."""

from __future__ import annotations

from collections.abc import Iterator

from daemon.moisture.description import (
    WATER_KG_PER_M3,
    Desiccant,
    Fixed,
    Measured,
    Power,
    Station,
    Trap,
)
from daemon.moisture.drains import SELF_EMPTYING, emptying_of, usual
from daemon.site import defaults
from daemon.units import (
    People,
    show_difference,
    show_duration,
    show_flow,
    show_mass,
    show_percent,
    show_temperature,
    show_volume,
)

Said = Iterator[tuple[str, str]]


def station_words(station: Station, people: People) -> Said:
    """What a station's fittings are, as (what, words)."""
    dryer = station.dryer
    if dryer is not None:
        width = show_difference(dryer.dew_point.give_or_take, people)
        point = show_temperature(dryer.dew_point.value, people)
        yield "dries to", f"{point} at line pressure, give or take {width}"
        if dryer.rated_flow is not None:
            yield "rated for", _flow(dryer.rated_flow, people)
        if isinstance(dryer, Desiccant) and dryer.holds is not None:
            yield "takes up", f"{_mass(dryer.holds, people)} of water; then it is spent"
        elif isinstance(dryer, Desiccant):
            share = show_percent(dryer.purge.value)
            yield "blows off", f"{share} of its rated flow while it runs"
        yield "runs", _power(dryer.power)
        if not isinstance(dryer, Desiccant):
            yield "around it", _around(station, people)
    elif station.rated_flow is not None:
        yield "rated for", f"{_flow(station.rated_flow, people)}; beyond it less is kept"
    if station.ice is not None:
        yield "ice", f"{_mass(station.ice, people)}, at the start"


def _flow(flow: Fixed, people: People) -> str:
    width = show_flow(flow.give_or_take, people)
    return f"{show_flow(flow.value, people)} of free air, give or take {width}"


def _mass(mass: Fixed, people: People) -> str:
    width = show_mass(mass.give_or_take, people)
    return f"{show_mass(mass.value, people)}, give or take {width}"


def _power(power: Power) -> str:
    if not power.in_service:
        return "never: out of service, and no more than a pipe"
    night = "; off outside working hours" if power.off_when_closed else ""
    if power.contact is None:
        return ("while the shop is open" if power.off_when_closed else "always") + (
            ": nothing says so"
        )
    return f"while {power.contact} is closed{night}"


def _around(station: Station, people: People) -> str:
    if isinstance(station.around, Measured):
        return f"sensor {station.around.channel}"
    if isinstance(station.around, Fixed):
        return show_temperature(station.around.value, people)
    return "as at the intake"


def drain_words(trap: Trap, people: People) -> str:
    """How a drain empties itself: " opens at 36 ml, passes 0.2 L/min"; "" for one that does not."""
    if trap.drain not in SELF_EMPTYING:
        return ""
    how = emptying_of(trap)
    passes = f"passes {show_flow(how.passes.value / WATER_KG_PER_M3, people)} of water"

    def volume(kg: float) -> str:
        return show_volume(kg / WATER_KG_PER_M3, people)

    match trap.drain:
        case "float":
            return f"opens by itself at {volume(how.opens_at.value)}, {passes}"
        case "level":
            return (
                f"opens by itself at {volume(how.opens_at.value)}, closes at "
                f"{volume(how.closes_at_kg)}, {passes}"
            )
        case "timer":
            return (
                f"blows every {show_duration(how.period_s)} for {show_duration(how.open_s)}, "
                f"{passes}"
            )
        case _:
            return "opens when the line is let down"


def default_rows() -> Iterator[tuple[str, str, str, str]]:
    """The defaults of `[[station]]` and its trap, as rows of the documents' table."""

    def kelvin(fixed: Fixed) -> str:
        return (
            f"{show_temperature(fixed.value, 'metric')} +- "
            f"{show_difference(fixed.give_or_take, 'metric')}"
        )

    yield "`[[station]]`", "`dew_point`", kelvin(defaults.REFRIGERATED.value), "`refrigerated`"
    yield "", "", kelvin(defaults.TWIN.value), "`desiccant`, twin beds"
    yield "", "", kelvin(defaults.CARTRIDGE.value), "`desiccant`, a cartridge"
    times = defaults.RATED_TO_DELIVERED
    rated = f"{times.value:g} +- {times.give_or_take:g} times what the compressor delivers"
    yield "", "`rated_flow`", rated, "a dryer's; of a separator: any flow"
    yield "", "`off_when_closed`", "`false`", "a dryer is left on overnight"
    yield "", "`in_service`", "`true`", "air goes through the dryer"
    yield "", "`around`", "as at the intake", "the air around a refrigerated dryer"
    yield "", "`bed`", '`"twin"`; `"cartridge"` with `mass`', "of a desiccant dryer"
    holds, purge = defaults.SILICA, defaults.PURGE
    yield "", "`holds`", f"{holds.value:g} +- {holds.give_or_take:g}", defaults.SILICA_BECAUSE
    yield "", "`purge`", f"{purge.value:g} +- {purge.give_or_take:g}", defaults.PURGE_BECAUSE
    for fixed, what in (
        (defaults.APPROACH, "of a cooler that says its coolant"),
        (defaults.ICE_APPROACH, "of a coil in ice"),
    ):
        value = show_difference(fixed.value, "metric")
        width = show_difference(fixed.give_or_take, "metric")
        yield "", "`approach`", f"{value} +- {width}", what
    yield from _drain_rows()


def _drain_rows() -> Iterator[tuple[str, str, str, str]]:
    """What drains that empty themselves do; shares of the capacity."""
    for kind in SELF_EMPTYING:
        how = usual(kind, 1.0)
        said = []
        if how.opens_at.value:
            opens, wide = (
                show_percent(each) for each in (how.opens_at.value, how.opens_at.give_or_take)
            )
            said.append(f"`opens_at` {opens} +- {wide} of capacity")
        if how.closes_at_kg:
            said.append(f"`closes_at` {show_percent(how.closes_at_kg)}")
        if how.period_s:
            said.append(f"`blows_every` {show_duration(how.period_s)}")
            said.append(f"`blows_for` {show_duration(how.open_s)}")
        if how.passes.value:
            passes, width = (
                show_flow(each / WATER_KG_PER_M3, "metric")
                for each in (how.passes.value, how.passes.give_or_take)
            )
            said.append(f"`passes` {passes} +- {width}")
        yield "", f'`drain = "{kind}"`', ", ".join(said) or "opens when let down", "estimate"
