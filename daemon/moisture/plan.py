"""A line turned into index arithmetic once, so that a tick touches only arrays."""

from __future__ import annotations

from dataclasses import dataclass, replace

from daemon.moisture.description import (
    Desiccant,
    Fixed,
    Like,
    Line,
    Measured,
    RiseByDuty,
    Source,
    Station,
    VentedCell,
)
from daemon.moisture.kinds import BAROMETER, LIKE_PRESSURE_PA, RISE_TIME_S, ROOM, TEMPERATURES

# Instead of a rule that leans on the station itself: the room, wider. Common practice, no source.
_ROOM_LIKE_GIVE_OR_TAKE_K = 5.0


@dataclass(frozen=True, slots=True)
class Outflow:
    """Where the air goes from a station: to a station further on, or out at an outlet."""

    share: float  # of the air used by the whole line
    station: int  # -1: an outlet
    outlet: int  # -1: a station


@dataclass(frozen=True, slots=True)
class Plan:
    """Indices of a line. Stations keep the line's order: each stands after the one it hangs on."""

    line: Line
    index: dict[str, int]
    parent: tuple[int, ...]  # -1 for the intake
    outflows: tuple[tuple[Outflow, ...], ...]  # per station
    share: tuple[float, ...]  # of the air used, that passes each station
    receivers: tuple[int, ...]
    receivers_below: dict[int, tuple[int, ...]]  # at or below each receiver
    trunk: tuple[int, ...]  # stations that pass exactly what is drawn in
    traps: tuple[int, ...]  # stations with a trap
    channels: tuple[str, ...]  # every channel that a station or an outlet reads
    temperature_order: tuple[int, ...]
    pressure_order: tuple[int, ...]
    temperature_rules: tuple[Source, ...]  # what holds while the sensor is silent
    pressure_rules: tuple[Source, ...]
    purging: tuple[int, ...]  # desiccant dryers that blow off a part of the air they dry
    purged_above: tuple[tuple[int, ...], ...]  # per station: the rows of `purging` upstream of it

    @property
    def line_channels(self) -> tuple[str, ...]:
        """Those that a station reads: the others tell of the air around an outlet only."""
        return _channels(replace(self.line, outlets=()))

    @property
    def stations(self) -> tuple[Station, ...]:
        return self.line.stations


def plan_line(line: Line) -> Plan:
    """Work out a line's indices. ValueError when sources refer to each other in a circle."""
    index = {station.id: number for number, station in enumerate(line.stations)}
    parent = tuple(index[s.after] if s.after else -1 for s in line.stations)
    share = _shares(line, index, parent)
    outflows = _outflows(line, index, parent, share)
    receivers = tuple(i for i, s in enumerate(line.stations) if s.kind == "receiver")
    temperature_rules = tuple(_temperature_rule(line, i, parent) for i in range(len(parent)))
    pressure_rules = tuple(_pressure_rule(line, i, parent, receivers) for i in range(len(parent)))
    temperatures = tuple(station.temperature for station in line.stations)
    pressures = tuple(station.pressure for station in line.stations)
    room = Like(line.stations[0].id, 0.0, _ROOM_LIKE_GIVE_OR_TAKE_K)
    trunk = _trunk(parent, receivers)
    purging = _purging(line, trunk if receivers else ())
    temperature_rules = _without_circles(index, temperatures, temperature_rules, room)
    pressure_rules = _without_circles(index, pressures, pressure_rules, _switch_pressure(line))
    return Plan(
        line=line,
        index=index,
        parent=parent,
        outflows=outflows,
        share=share,
        receivers=receivers,
        receivers_below={r: _below(r, parent, receivers) for r in receivers},
        trunk=trunk,
        traps=tuple(i for i, s in enumerate(line.stations) if s.trap is not None),
        channels=_channels(line),
        temperature_order=_order("temperature", index, temperatures, temperature_rules),
        pressure_order=_order("pressure", index, pressures, pressure_rules),
        temperature_rules=temperature_rules,
        pressure_rules=pressure_rules,
        purging=purging,
        purged_above=tuple(_above(i, parent, purging) for i in range(len(parent))),
    )


def _purging(line: Line, trunk: tuple[int, ...]) -> tuple[int, ...]:
    """Twin beds, but for those before the first tank: what they blow off counts as used air."""
    return tuple(
        i
        for i, station in enumerate(line.stations)
        if isinstance(station.dryer, Desiccant)
        and station.dryer.holds is None
        and station.dryer.rated_flow is not None
        and i not in trunk
    )


def _above(station: int, parent: tuple[int, ...], purging: tuple[int, ...]) -> tuple[int, ...]:
    found = []
    at = parent[station]
    while at >= 0:
        if at in purging:
            found.append(purging.index(at))
        at = parent[at]
    return tuple(found)


def _shares(line: Line, index: dict[str, int], parent: tuple[int, ...]) -> tuple[float, ...]:
    share = [0.0] * len(parent)
    for outlet in line.outlets:
        at = index[outlet.after]
        while at >= 0:
            share[at] += outlet.share
            at = parent[at]
    return tuple(share)


def _outflows(
    line: Line, index: dict[str, int], parent: tuple[int, ...], share: tuple[float, ...]
) -> tuple[tuple[Outflow, ...], ...]:
    flows: list[list[Outflow]] = [[] for _ in parent]
    for station, above in enumerate(parent):
        if above >= 0:
            flows[above].append(Outflow(share[station], station, -1))
    for number, outlet in enumerate(line.outlets):
        flows[index[outlet.after]].append(Outflow(outlet.share, -1, number))
    return tuple(tuple(each) for each in flows)


def _below(receiver: int, parent: tuple[int, ...], receivers: tuple[int, ...]) -> tuple[int, ...]:
    found = []
    for other in receivers:
        at = other
        while at >= 0 and at != receiver:
            at = parent[at]
        if at == receiver:
            found.append(other)
    return tuple(found)


def _trunk(parent: tuple[int, ...], receivers: tuple[int, ...]) -> tuple[int, ...]:
    """From the intake down to the first receiver, as long as nothing branches off before it."""
    path = []
    at = 0
    while True:
        path.append(at)
        if at in receivers:
            return tuple(path)
        onward = [i for i, above in enumerate(parent) if above == at]
        if len(onward) != 1:
            return tuple(path)
        at = onward[0]


def _channels(line: Line) -> tuple[str, ...]:
    names: list[str] = []
    for station in line.stations:
        read = (station.temperature, station.pressure, station.relative_humidity, station.around)
        for source in read:
            if isinstance(source, Measured) and source.channel not in names:
                names.append(source.channel)
        names += [name for name in _of_dew_point(station) if name not in names]
    for outlet in line.outlets:
        for source in outlet.sources:
            if source.channel not in names:
                names.append(source.channel)
    meter = line.compressor.flow_meter
    if meter is not None and meter.channel not in names:
        names.append(meter.channel)
    return tuple(names)


def _of_dew_point(station: Station) -> tuple[str, ...]:
    """The channels that a measured dew point is made of."""
    match station.measured_dew_point:
        case Measured(channel=channel):
            return (channel,)
        case VentedCell(relative_humidity=humidity, temperature=temperature, pressure=pressure):
            return (humidity.channel, temperature.channel, pressure.channel)
        case _:
            return ()


def _temperature_rule(line: Line, number: int, parent: tuple[int, ...]) -> Source:
    """What a station without a believable sensor is taken to be."""
    station = line.stations[number]
    usual = TEMPERATURES[station.kind]
    if usual.like == "":
        return ROOM
    if usual.like == "before":
        return Like(line.stations[parent[number]].id, usual.plus_k, usual.give_or_take_k)
    intake = line.stations[0].id
    if usual.like == "duty":
        return RiseByDuty(intake, usual.plus_k, RISE_TIME_S, usual.give_or_take_k)
    return Like(intake, usual.plus_k, usual.give_or_take_k)


def _pressure_rule(
    line: Line, number: int, parent: tuple[int, ...], receivers: tuple[int, ...]
) -> Source:
    station = line.stations[number]
    if station.kind == "intake":
        return BAROMETER
    above = parent[number]
    while above > 0 and above not in receivers:
        above = parent[above]
    if station.kind == "receiver" or above <= 0:
        return _switch_pressure(line)
    return Like(line.stations[parent[number]].id, 0.0, LIKE_PRESSURE_PA)


def _switch_pressure(line: Line) -> Fixed:
    """Somewhere between the pressure switch's two settings."""
    low, high = line.compressor.cut_in.value, line.compressor.cut_out.value
    return Fixed((low + high) / 2.0, (high - low) / 2.0, gauge=True)


def _without_circles(
    index: dict[str, int],
    sources: tuple[Source, ...],
    rules: tuple[Source, ...],
    instead: Source,
) -> tuple[Source, ...]:
    """Rules for silent sensors that do not lean on a station which leans on the sensor itself."""
    safe = list(rules)

    def leans_on(station: int, other: int) -> bool:
        at, seen = station, set[int]()
        while at not in seen:
            if at == other:
                return True
            seen.add(at)
            source = safe[at] if isinstance(sources[at], Measured) else sources[at]
            if not isinstance(source, Like | RiseByDuty):
                return False
            at = index[source.station]
        return True

    for station, source in enumerate(sources):
        rule = safe[station]
        if not isinstance(source, Measured) or not isinstance(rule, Like | RiseByDuty):
            continue
        if leans_on(index[rule.station], station):
            safe[station] = instead
    return tuple(safe)


def _order(
    what: str,
    index: dict[str, int],
    sources: tuple[Source | None, ...],
    rules: tuple[Source, ...],
) -> tuple[int, ...]:
    """Stations in an order in which whatever a source or its rule refers to comes first."""
    done: list[int] = []
    open_now: list[int] = []

    def visit(station: int) -> None:
        if station in done:
            return
        if station in open_now:
            names = [name for name, number in index.items() if number in open_now]
            raise ValueError(f"{what}: stations refer to each other in a circle: {names}")
        open_now.append(station)
        referring = [sources[station]]
        if isinstance(sources[station], Measured):
            referring.append(rules[station])
        for source in referring:
            if isinstance(source, Like | RiseByDuty):
                visit(index[source.station])
        open_now.remove(station)
        done.append(station)

    for station in range(len(sources)):
        visit(station)
    return tuple(done)
