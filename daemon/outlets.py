"""What is shown of the outlets: made from a state when somebody looks, never per tick. Pure."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from zoneinfo import ZoneInfo

import numpy as np

from daemon.clock import HOUR_US, to_datetime
from daemon.journal import Blotted
from daemon.line_verdict import LineFacts, judge_line
from daemon.moisture import air, margin
from daemon.moisture.ensemble import Array, percentiles, standard_normal
from daemon.moisture.purity import humidity_class
from daemon.outlet_ahead import HOURS_AHEAD, foresee, with_dew_points
from daemon.outlet_air import Described, OutletAir
from daemon.outlet_alarms import place_words
from daemon.outlet_record import OutletRecord
from daemon.state import CoreState, OutletMark
from daemon.surface_verdict import SurfaceFacts, judge_holding, judge_surface
from daemon.verdict import worst
from daemon.views import Interval, Judgement, LineAirView, OutletView, SurfaceView, Verdict

CLEARLY_WARMER_K = 3.0  # a trap than the hose: letting it cool is worth saying


@dataclass(frozen=True, slots=True)
class _Line:
    """The figures of an outlet's air."""

    faults: list[str]  # inputs that cannot be believed, in words
    pressure_pa: Array
    hose_k: Array
    dew_point_k: Interval | None  # None where a sensor says what cannot be
    carried_kg_per_m3: Interval
    margin_k: Interval | None  # None where an input failed
    coldest: str


@dataclass(frozen=True, slots=True)
class _Surface:
    """The figures of a surface and the air around it."""

    air_k: Interval | None = None
    humidity: Interval | None = None
    dew_point_k: Interval | None = None
    surface_k: Interval | None = None
    margin_k: Interval | None = None
    humidity_at_surface: Interval | None = None
    ahead: tuple[tuple[int, Interval], ...] = ()


@dataclass(frozen=True, slots=True)
class OutletNote:
    """An outlet as the weekly log takes it down. None: not known."""

    verdict: Verdict
    line_margin_k: Interval | None
    coldest: str
    surface_margin_k: Interval | None
    humidity_class: str | None


class OutletViews:
    """Makes the views of one site's outlets."""

    def __init__(self, outlet_air: OutletAir) -> None:
        self.air = outlet_air
        self.site, self.model = outlet_air.site, outlet_air.model
        self._zone = ZoneInfo(self.site.timezone)

    def all(self, state: CoreState) -> tuple[OutletView, ...]:
        """One view an outlet."""
        return tuple(self.one(state, outlet) for outlet in self.air.outlets)

    def of(self, state: CoreState, name: str, surface_k: float | None) -> OutletView | None:
        """One outlet's view, for a surface of a temperature that somebody measured."""
        for outlet in self.air.outlets:
            if outlet.id == name:
                return self.one(state, outlet, surface_k)
        return None

    def one(self, state: CoreState, outlet: Described, typed_k: float | None = None) -> OutletView:
        """An outlet's view."""
        record = state.outlets[outlet.id]
        line, surface = self._line(state, outlet), self._surface(state, outlet, typed_k)
        result, result_us = _blotter(record)
        counts = [line.judgement.verdict]
        if outlet.profile.name or outlet.air_channels or surface.surface_margin_k is not None:
            counts.append(surface.judgement.verdict)
        holding = None
        if outlet.profile.name == "blasting":
            holding = judge_holding(self.site.units, self._facts(state, outlet, surface))
        return OutletView(
            outlet=outlet.id,
            at_us=state.time_us,
            work=outlet.profile.name,
            verdict=worst(counts),
            air=line,
            surface=surface,
            holding=holding,
            blotter=result,
            blotter_us=result_us,
            inputs_us=_oldest_us(state, outlet),
        )

    def marks(self, state: CoreState) -> tuple[OutletMark, ...]:
        """The outlets' air for the record, the least that this takes."""
        found = []
        for outlet in self.air.outlets:
            line = self._line_figures(state, outlet)
            verdict = self._judged(state, outlet, line).verdict
            found.append(
                OutletMark(
                    outlet.id,
                    line.dew_point_k,
                    line.margin_k,
                    line.carried_kg_per_m3.p95,
                    verdict,
                )
            )
        return tuple(found)

    def notes(self, state: CoreState) -> Iterator[tuple[str, OutletNote]]:
        """Every outlet for the log: verdicts as they are shown, but for the hours ahead."""
        for outlet in self.air.outlets:
            line = self._line_figures(state, outlet)
            counts = [self._judged(state, outlet, line).verdict]
            surface = self._surface(state, outlet, None, ahead=False)
            margin_k = surface.surface_margin_k
            if outlet.profile.name or outlet.air_channels or margin_k is not None:
                counts.append(surface.judgement.verdict)
            coldest = place_words(line.coldest)
            found = _class(line)
            yield outlet.id, OutletNote(worst(counts), line.margin_k, coldest, margin_k, found)

    # ---- the air in the line ----

    def _line(self, state: CoreState, outlet: Described) -> LineAirView:
        found = self._line_figures(state, outlet)
        ratio = margin.outlet_ratio(state.model, outlet.way)
        atmosphere_pa = state.model.conditions.pressure_pa[0]
        expanded = atmospheric = None
        dew_point, carried = found.dew_point_k, found.carried_kg_per_m3
        if found.margin_k is not None:
            cooled = margin.after_expansion(found.hose_k, found.pressure_pa, atmosphere_pa)
            expanded = interval(cooled)
        if dew_point is not None:
            atmospheric = interval(air.dew_point_unchecked(ratio, atmosphere_pa))
        return LineAirView(
            judgement=self._judged(state, outlet, found),
            pressure_pa=float(np.median(found.pressure_pa)),
            atmosphere_pa=float(np.median(atmosphere_pa)),
            pressure_dew_point_k=dew_point,
            atmospheric_dew_point_k=atmospheric,
            line_margin_k=found.margin_k,
            wanted_k=outlet.wanted_line_k,
            coldest=found.coldest if found.margin_k is not None else "",
            after_expansion_k=expanded,
            carried_kg_per_m3=carried,
            humidity_class=_class(found),
        )

    def _line_figures(self, state: CoreState, outlet: Described) -> _Line:
        """The air may be known, wide, where its margin is not: an input failed."""
        faults = self.air.line_faults(state, outlet)
        beyond = self.air.beyond_belief(state, outlet)
        ratio = margin.outlet_ratio(state.model, outlet.way)
        touched = self.air.places(state, outlet)
        found = margin.line_margin(ratio, touched)
        known = not faults and bool(np.isfinite(touched.temperature_k).all())
        return _Line(
            faults=faults,
            pressure_pa=found.pressure_pa,
            hose_k=touched.temperature_k[-2],
            dew_point_k=None if beyond else interval(found.dew_point_k),
            carried_kg_per_m3=interval(state.model.water.carried.kg_per_m3[outlet.way.outlet]),
            margin_k=interval(found.margin_k) if known else None,
            coldest=found.coldest,
        )

    def _judged(self, state: CoreState, outlet: Described, line: _Line) -> Judgement:
        record = state.outlets[outlet.id]
        warm, warmer_k = self._warm_trap(state, outlet, line)
        facts = LineFacts(
            margin_k=line.margin_k,
            dew_point_k=line.dew_point_k,
            carried_kg_per_m3=line.carried_kg_per_m3,
            coldest=place_words(line.coldest),
            wanted_k=outlet.wanted_line_k,
            relieved=outlet.relieved,
            flooded=self.air.flooded(state, outlet),
            unusable=line.faults,
            warm=warm,
            warmer_k=warmer_k,
            oil_at=self._clock_words(record.oil_us),
            water_at=self._clock_words(record.water_us),
        )
        return judge_line(self.site.units, outlet.profile, facts)

    def _warm_trap(self, state: CoreState, outlet: Described, line: _Line) -> tuple[str, float]:
        """The last trap before the outlet, and how much warmer it is than the hose, if clearly."""
        along = outlet.way
        row = along.path[len(along.path) - len(along.touched) - 1]
        station = self.model.plan.stations[row]
        if station.trap is None or station.dryer is not None:
            return "", 0.0
        warmer_k = float(np.median(state.model.conditions.temperature_k[row] - line.hose_k))
        return (station.id, warmer_k) if warmer_k > CLEARLY_WARMER_K else ("", 0.0)

    # ---- the surface ----

    def _surface(
        self, state: CoreState, outlet: Described, typed_k: float | None, ahead: bool = True
    ) -> SurfaceView:
        faults = self.air.surface_faults(state, outlet)
        found = _Surface() if faults else self._surface_figures(state, outlet, typed_k, ahead)
        gauge = self.air.gauge(state, outlet) if typed_k is None else None
        view = SurfaceView(
            judgement=Judgement("unknown", (), ()),
            air_k=found.air_k,
            relative_humidity=found.humidity,
            dew_point_k=found.dew_point_k,
            surface_k=found.surface_k,
            surface_margin_k=found.margin_k,
            wanted_k=outlet.settings.surface_margin_k,
            humidity_at_surface=found.humidity_at_surface,
            by_gauge_until_us=gauge.until_us if gauge is not None else None,
            ahead=found.ahead,
        )
        facts = self._facts(state, outlet, view)
        judgement = judge_surface(self.site.units, outlet.profile, facts)
        return replace(view, judgement=judgement)

    def _facts(self, state: CoreState, outlet: Described, view: SurfaceView) -> SurfaceFacts:
        return SurfaceFacts(
            air_k=view.air_k,
            humidity=view.relative_humidity,
            surface_k=view.surface_k,
            margin_k=view.surface_margin_k,
            humidity_at_surface=view.humidity_at_surface,
            wanted_k=view.wanted_k,
            by_gauge=view.by_gauge_until_us is not None,
            low_at=self._low_at(outlet, view),
            unusable=self.air.surface_faults(state, outlet),
        )

    def _low_at(self, outlet: Described, view: SurfaceView) -> str:
        """When the margin may first fall below what is asked for, in the hours that count."""
        for at_us, foreseen in view.ahead[: outlet.profile.ahead_h]:
            if foreseen.p05 < view.wanted_k:
                return self._clock_words(at_us)
        return ""

    def _surface_figures(
        self, state: CoreState, outlet: Described, typed_k: float | None, ahead: bool = True
    ) -> _Surface:
        room = self.air.around(state, outlet)
        dew_point_k = None if room is None else margin.dew_point_around(room)
        surface_k = self.air.surface_k(state, outlet, typed_k)
        margin_k = self.air.surface_margin_k(
            state, outlet, dew_point_k, surface_k, typed=typed_k is not None
        )
        at_surface = None
        if room is not None and dew_point_k is not None and surface_k is not None:
            at_surface = margin.humidity_at_surface(dew_point_k, surface_k, room.pressure_pa)
        return _Surface(
            air_k=None if room is None else interval(room.temperature_k),
            humidity=None if room is None else interval(room.relative_humidity),
            dew_point_k=None if dew_point_k is None else interval(dew_point_k),
            surface_k=None if surface_k is None else interval(surface_k),
            margin_k=None if margin_k is None else interval(margin_k),
            humidity_at_surface=None if at_surface is None else interval(at_surface),
            ahead=() if margin_k is None or not ahead else self._ahead(state, outlet, margin_k),
        )

    def _ahead(
        self, state: CoreState, outlet: Described, margin_k: Array
    ) -> tuple[tuple[int, Interval], ...]:
        line = self.model.plan.line
        place = standard_normal(line.seed, f"ahead of {outlet.id}", line.members)
        hours = range(1, HOURS_AHEAD + 1)
        atmosphere_pa = float(np.median(state.model.conditions.pressure_pa[0]))
        past = with_dew_points(state.outlets[outlet.id].past, atmosphere_pa)
        foreseen = percentiles(foresee(past, state.time_us, margin_k, place, hours))
        return tuple(
            (state.time_us + hour * HOUR_US, Interval(*(float(v) for v in foreseen[:, hour - 1])))
            for hour in hours
        )

    def _clock_words(self, time_us: int) -> str:
        """A time on the shop's wall, "Tue 16:00"; "" for never."""
        if time_us < 0:
            return ""
        return f"{to_datetime(time_us).astimezone(self._zone):%a %H:%M}"


def _oldest_us(state: CoreState, outlet: Described) -> int | None:
    """When the input that has been silent for longest was heard; contacts speak when they change.

    None where there is no input, or one that has never spoken.
    """
    names = dict.fromkeys((*outlet.line_channels, *outlet.air_channels, outlet.surface_channel))
    records = [state.channels[name] for name in names if name in state.channels]
    times_us = [record.time_us for record in records if not record.only_edges]
    oldest_us = min(times_us, default=-1)
    return None if oldest_us < 0 else oldest_us


def interval(values: Array) -> Interval:
    """The median and the 5 to 95 % interval of members."""
    low, middle, high = percentiles(values)
    return Interval(float(low), float(middle), float(high))


def _class(line: _Line) -> str | None:
    """The class of ISO 8573-1 that the air's interval supports; None: it cannot be told."""
    dew_point, carried = line.dew_point_k, line.carried_kg_per_m3
    if dew_point is None or line.faults:
        return None
    return humidity_class((dew_point.p05, dew_point.p95), (carried.p05, carried.p95))


def _blotter(record: OutletRecord) -> tuple[Blotted | None, int | None]:
    """The result that stands: a stain until a clean test, oil before water."""
    if record.oil_us >= 0:
        return "oil", record.oil_us
    if record.water_us >= 0:
        return "water", record.water_us
    return ("clean", record.clean_us) if record.clean_us >= 0 else (None, None)
