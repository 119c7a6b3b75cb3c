"""Fills in what the file does not say of the stations. Never chooses between two candidates."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from daemon.moisture.description import (
    Compressor,
    Fixed,
    Like,
    Measured,
    RiseByDuty,
    Source,
    Station,
)
from daemon.site import defaults
from daemon.site.fittings import with_rating
from daemon.site.names import Names
from daemon.site.notes import Notes
from daemon.site.shape import first_receiver_below, in_order, upstream
from daemon.site.sources import is_barometer
from daemon.site.stations import STATION_KEYS, Draft
from daemon.site.table import Table
from daemon.site.traps import read_trap
from daemon.units import (
    show_barometer,
    show_difference,
    show_duration,
    show_percent,
    show_pressure,
    show_pressure_difference,
    show_temperature,
    show_volume,
)
from sensors.reading import Channel, Quantity

_INTAKE: tuple[tuple[str, Quantity], ...] = (
    ("temperature", "temperature"),
    ("relative_humidity", "relative_humidity"),
    ("pressure", "pressure"),
)


def complete_line(notes: Notes, drafts: list[Draft], *, all_known: bool) -> list[Draft]:
    """The stations in order, with an intake and, where nothing else is declared, a tank.

    Nothing is added while a station's kind or id is not known: it may be what seems missing.
    """
    found = list(drafts)
    if not all_known:
        return in_order(found)
    if not any(draft.is_intake for draft in found):
        found.insert(0, _added(notes, "intake", "intake", "", "every line begins at an intake"))
    if len(found) == 1 and found[0].is_intake and found[0].id != "tank":
        tank = _added(notes, "tank", "receiver", found[0].id, "no other station is declared")
        usual = defaults.VOLUME
        shown, width = (show_volume(v, notes.units) for v in (usual.value, usual.give_or_take))
        tank.table.default("volume", f"{shown} give or take {width}", defaults.VOLUME_BECAUSE)
        tank.volume = usual
        tank.trap = read_trap(tank.table, "receiver", usual, None)
        found.append(tank)
    return in_order(found)


def _added(notes: Notes, name: str, kind: str, after: str, because: str) -> Draft:
    table = Table(notes, f'station "{name}"', {"id": name, "kind": kind}, STATION_KEYS)
    table.default("kind", f'"{kind}"', because)
    return Draft(table, name, "intake" if kind == "intake" else "receiver", after)


@dataclass(slots=True)
class Assumptions:
    """Fills the drafts of one line, in the order of the stations."""

    notes: Notes
    drafts: Sequence[Draft]
    names: Names
    compressor: Compressor

    def fill(self) -> None:
        """Every station gets a temperature and a pressure, the intake a humidity too."""
        by_id = {draft.id: draft for draft in self.drafts}
        for draft in self.drafts:
            if draft.is_intake and not draft.table.ok("kind"):
                continue  # a second one, which has been told
            if draft.is_intake:
                self._fill_intake(draft)
            elif draft.kind is not None:
                self._fill_station(draft, by_id)

    # --- the intake ---

    def _fill_intake(self, intake: Draft) -> None:
        table = intake.table
        if not table.ok("temperature", "relative_humidity"):
            self._fill_air(intake)  # which sensor was meant is not known
            return
        missing = [pair for pair in _INTAKE if not table.said(pair[0])]
        sensor = self._intake_sensor(intake, [key for key, _ in missing])
        for key, quantity in missing:
            channel = self.names.of(sensor, quantity) if sensor else None
            if channel is None and quantity == "pressure":
                channel = self._barometer(table)
            if channel is not None and (quantity != "pressure" or is_barometer(channel)):
                self._use(intake, key, channel)
        self._fill_air(intake)

    def _intake_sensor(self, intake: Draft, missing: Sequence[str]) -> str:
        """The sensor that stands at the intake: named there already, or the only free one."""
        named = [
            source.channel.rsplit(".", 1)[0]
            for source in (intake.temperature, intake.relative_humidity)
            if isinstance(source, Measured)
        ]
        if named:
            return named[0]
        if "temperature" not in missing or "relative_humidity" not in missing:
            return ""
        free = self.names.free("temperature", "relative_humidity")
        if len(free) > 1:
            intake.table.wrong(
                "temperature",
                f"two or more sensors could stand at the intake: {', '.join(free)}; write "
                f'temperature = "{free[0]}.temperature" and '
                f'relative_humidity = "{free[0]}.relative_humidity", or another\'s',
            )
            intake.table.broken.update(("relative_humidity", "pressure"))
        return free[0] if len(free) == 1 else ""

    def _barometer(self, table: Table) -> Channel | None:
        """The only barometer, wherever in the shop it is: the weather is the same there."""
        found = [
            channel
            for channel in self.names.channels.values()
            if is_barometer(channel) and channel.sensor not in self.names.in_line
        ]
        if len(found) > 1 and table.ok("pressure"):
            table.wrong(
                "pressure",
                "two or more barometers could serve: "
                f"{', '.join(c.name for c in found)}; name one of them",
            )
        return found[0] if len(found) == 1 else None

    def _use(self, intake: Draft, key: str, channel: Channel) -> None:
        if not intake.table.ok(key):
            return
        self.names.used_channels.add(channel.name)
        setattr(intake, key, Measured(channel.name, channel.give_or_take, channel.gauge))
        because = "the only sensor that could stand here"
        if intake.table.said("temperature") or intake.table.said("relative_humidity"):
            because = "the sensor that stands here, or the only barometer"
        intake.table.default(key, f'"{channel.name}"', because)

    def _fill_air(self, intake: Draft) -> None:
        units, table = self.notes.units, intake.table
        usual = (
            (
                "temperature",
                defaults.ROOM,
                defaults.ROOM_BECAUSE,
                show_temperature,
                show_difference,
            ),
            (
                "pressure",
                defaults.BAROMETER,
                defaults.BAROMETER_BECAUSE,
                show_barometer,
                show_barometer,
            ),
            (
                "relative_humidity",
                defaults.HUMIDITY,
                defaults.HUMIDITY_BECAUSE,
                lambda value, _: show_percent(value),
                lambda value, _: show_percent(value),
            ),
        )
        for key, fixed, because, show, show_width in usual:
            if getattr(intake, key) is None:
                setattr(intake, key, fixed)
                if not table.said(key):
                    shown = f"{show(fixed.value, units)} give or take "
                    table.default(key, shown + show_width(fixed.give_or_take, units), because)

    # --- the other stations ---

    def _fill_station(self, draft: Draft, by_id: Mapping[str, Draft]) -> None:
        draft.fittings = with_rating(draft.table, draft.fittings, self.compressor)
        if draft.temperature is None:
            draft.temperature = self._temperature(draft)
        if draft.pressure is None and draft.set_pressure is not None:
            draft.pressure = draft.set_pressure
        if draft.pressure is None:
            draft.pressure = self._pressure(draft, by_id)

    def _temperature(self, draft: Draft) -> Source:
        assert draft.kind is not None
        usual = defaults.KINDS[draft.kind].temperature
        intake = next((each.id for each in self.drafts if each.is_intake), draft.after or "")
        approach = draft.fittings.approach
        if approach is not None:
            return Like(intake, approach.value, approach.give_or_take)
        like = (draft.after or "") if usual.like == "before" else intake
        if not draft.table.said("temperature"):
            draft.table.default(
                "temperature", temperature_text(usual, like, self.notes), usual.because
            )
        if usual.like == "duty":
            return RiseByDuty(like, usual.plus_k, defaults.RISE_TIME_S, usual.give_or_take_k)
        return Like(like, usual.plus_k, usual.give_or_take_k)

    def _pressure(self, draft: Draft, by_id: Mapping[str, Draft]) -> Source:
        above = list(upstream(draft, by_id))
        compressed = any(each.kind in ("receiver", "regulator") for each in above)
        tank = first_receiver_below(draft, self.drafts)
        source: Source
        if not compressed and (draft.kind == "receiver" or tank is None):
            source, because = self._by_switch(), "between cut_in and cut_out"
        else:
            other = draft.after or "" if compressed or tank is None else tank.id
            source = Like(other, 0.0, defaults.LIKE_PRESSURE_PA)
            because = "little is lost on the way" if compressed else "before the tank, as the tank"
        if not draft.table.said("pressure"):
            draft.table.default("pressure", pressure_text(source, self.notes), because)
        return source

    def _by_switch(self) -> Fixed:
        low, high = self.compressor.cut_in.value, self.compressor.cut_out.value
        return Fixed((low + high) / 2, abs(high - low) / 2, gauge=True)


def temperature_text(usual: defaults.UsualTemperature, like: str, notes: Notes) -> str:
    """A default temperature in words: 'like intake + 8 K, give or take 5 K'."""
    plus = show_difference(usual.plus_k, notes.units)
    width = show_difference(usual.give_or_take_k, notes.units)
    if usual.like == "duty":
        lag = show_duration(defaults.RISE_TIME_S)
        return f"like {like} + {plus} x duty over {lag}, give or take {width}"
    return f"like {like}{'' if usual.plus_k == 0 else f' + {plus}'}, give or take {width}"


def pressure_text(source: Source, notes: Notes) -> str:
    """A default pressure in words: 'like tank, give or take 0.05 bar'."""
    width = show_pressure_difference(source.give_or_take, notes.units)
    if isinstance(source, Like):
        return f"like {source.station}, give or take {width}"
    assert isinstance(source, Fixed)
    shown = show_pressure(source.value, notes.units, gauge=True)
    return f"{shown}, give or take {width}"


def station_of(draft: Draft) -> Station:
    """The finished station. Every draft is complete by then."""
    assert draft.kind is not None
    assert draft.temperature is not None
    assert draft.pressure is not None
    return Station(
        id=draft.id,
        kind=draft.kind,
        after=draft.after or "",
        temperature=draft.temperature,
        pressure=draft.pressure,
        relative_humidity=draft.relative_humidity,
        volume=draft.volume,
        trap=draft.trap,
        dryer=draft.fittings.dryer,
        rated_flow=draft.fittings.rated_flow,
        ice=draft.fittings.ice,
        around=draft.fittings.around,
        measured_dew_point=draft.measured_dew_point,
    )
