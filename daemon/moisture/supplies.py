"""Desiccant and ice: how much of what a station began with is used up."""

from __future__ import annotations

import numpy as np

from daemon.moisture import dryers
from daemon.moisture.ensemble import Array
from daemon.moisture.forecast import Level
from daemon.moisture.model import Model, State

USED_UP = 1.0 - 1e-9  # of the whole


class Supplies:
    """The cartridges and ice baths of one line."""

    def __init__(self, model: Model) -> None:
        stations = model.plan.stations
        fittings = model.fittings
        self.names = [stations[i].id for i in (*fittings.drying.cartridges, *fittings.baths)]
        self._members = model.plan.line.members

    def used(self, state: State) -> Array:
        """The share used of each cartridge, then of each bath's ice, (supplies, members)."""
        of, carried = state.parameters.fittings, state.fittings
        melts = of.ice_kg * dryers.MELTING_J_PER_KG
        return np.concatenate([carried.charge / of.holds_kg, carried.heat / melts])

    def levels(self) -> list[Level]:
        """Used up, in the order of the names."""
        return [Level(name, np.full(self._members, USED_UP)) for name in self.names]
