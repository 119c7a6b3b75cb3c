"""Alarms of dryers, of drains that empty themselves, of tanks let down, and of frost. Pure."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from daemon.alarms import AlarmDefinition, Condition
from daemon.clock import HOUR_US, MINUTE_US
from daemon.drain_alarms import DrainAlarms
from daemon.fitting_words import FittingWords
from daemon.moisture import dryers
from daemon.moisture.description import Desiccant, Refrigerated
from daemon.moisture.ensemble import Array
from daemon.moisture.model import Model
from daemon.site.types import Site
from daemon.state import CoreState

RAISED_AT, RETURNS_BELOW = 0.5, 0.3  # share of members
OVERLOAD_DELAY_US = 15 * MINUTE_US  # a burst of air is no overload
FREEZE_ON_US, FREEZE_OFF_US = 10 * MINUTE_US, HOUR_US
FREEZING_K = dryers.ZERO_C_K
# Liquid that is worth a warning: in a trap, and on its way, kg. Below it a film dries off.
FREEZES_KG, FREEZES_ON_ITS_WAY_KG = 1e-3, 1e-5

Watched = tuple[AlarmDefinition, Condition, str]


class FittingAlarms:
    """The alarms of one site's dryers and drains."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self._words = FittingWords(site, model)
        self._drains = DrainAlarms(site, model)
        self._stations = list(enumerate(model.plan.stations))[1:]
        self._drying = model.fittings.drying

    def define(self) -> Iterator[AlarmDefinition]:
        """Every station can freeze; the others are where there is something to watch."""
        for _, station in self._stations:
            yield AlarmDefinition(
                f"{station.id}-freeze-risk",
                "freeze-risk",
                station.id,
                "medium",
                FREEZE_ON_US,
                FREEZE_OFF_US,
            )
        for i, dryer in self._drying.dryers:
            name = self.model.plan.stations[i].id
            if i in self._drying.rated:
                yield AlarmDefinition(
                    f"{name}-dryer-overloaded",
                    "dryer-overloaded",
                    name,
                    "medium",
                    OVERLOAD_DELAY_US,
                    OVERLOAD_DELAY_US,
                )
            if isinstance(dryer, Desiccant) and dryer.holds is not None:
                yield AlarmDefinition(f"{name}-desiccant-spent", "desiccant-spent", name, "high")
        yield from self._drains.define()

    def watched(
        self, state: CoreState, definitions: Mapping[str, AlarmDefinition]
    ) -> Iterator[Watched]:
        """What each says now."""
        yield from self._freezing(state, definitions)
        for number, (i, _) in enumerate(self._drying.dryers):
            name = self.model.plan.stations[i].id
            overloaded = definitions.get(f"{name}-dryer-overloaded")
            if overloaded is not None:
                yield self._overloaded(state, number, overloaded)
            spent = definitions.get(f"{name}-desiccant-spent")
            if spent is not None:
                yield self._spent(state, number, spent)
        yield from self._drains.watched(state, definitions)

    # ---- frost ----

    def _freezing(
        self, state: CoreState, definitions: Mapping[str, AlarmDefinition]
    ) -> Iterator[Watched]:
        """Liquid at or below 0 degC; a refrigerated dryer that runs in a cold room."""
        cold = state.model.conditions.temperature_k <= FREEZING_K
        frost = bool(cold.any())
        for i, station in self._stations:
            definition = definitions[f"{station.id}-freeze-risk"]
            record = state.alarms[definition.id]
            dryer = isinstance(station.dryer, Refrigerated)
            if not frost and not dryer and record.state == "normal" and record.holding_since_us < 0:
                continue  # the usual case costs nothing
            share, room = self._freezes(state, i, cold[i]) if frost else 0.0, False
            if dryer and share < RAISED_AT:
                share, room = self._cold_room(state, i), True
            so = _by_share(share)
            text = record.text
            if (so == "so") != record.raised:
                text = self._words.freezing(station.id, so, room)
            yield definition, so, text

    def _freezes(self, state: CoreState, i: int, cold: Array) -> float:
        """The share of members in which liquid stands, or is on its way, where it is freezing."""
        water = state.model.water
        wet = (water.trap[i] >= FREEZES_KG) | (
            water.waiting[i] + water.spilled[i] >= FREEZES_ON_ITS_WAY_KG
        )
        return float(np.count_nonzero(wet & (cold > 0)) / wet.size)

    def _cold_room(self, state: CoreState, i: int) -> float:
        """The share of members in which a running dryer's room is too cold for it."""
        number = next(n for n, (at, _) in enumerate(self._drying.dryers) if at == i)
        model = state.model
        if model.fittings.power[number].off:
            return 0.0
        around = self._drying.around(i, model.conditions, model.held, model.offsets, model.time_us)
        return float(np.count_nonzero(around < dryers.MAY_FREEZE_BELOW_K) / around.size)

    # ---- dryers ----

    def _by_design(self, state: CoreState, number: int) -> Condition | None:
        """Why a dryer's alarms keep quiet, where they do."""
        dryer = self._drying.dryers[number][1]
        if not dryer.power.in_service:
            return "out of service"
        return "by design" if state.model.fittings.power[number].off else None

    def _overloaded(self, state: CoreState, number: int, definition: AlarmDefinition) -> Watched:
        quiet = self._by_design(state, number)
        overloaded = state.model.fittings.overloaded
        so = quiet or _by_share(overloaded[number] if overloaded else 0.0)
        record = state.alarms[definition.id]
        if quiet is None and (so == "so") == record.raised:
            return definition, so, record.text
        return definition, so, self._words.overloaded(state, number, so)

    def _spent(self, state: CoreState, number: int, definition: AlarmDefinition) -> Watched:
        i, dryer = self._drying.dryers[number]
        if not dryer.power.in_service:
            return definition, "out of service", self._words.quiet(number, "out of service")
        model = state.model
        share = self._drying.spent_share(model.fittings, model.parameters.fittings, i)
        so = _by_share(share)
        record = state.alarms[definition.id]
        if (so == "so") == record.raised:
            return definition, so, record.text
        return definition, so, self._words.spent(definition.source, so, share)


def _by_share(share: float) -> Condition:
    if share >= RAISED_AT:
        return "so"
    return "not so" if share < RETURNS_BELOW else "between"
