"""Ice baths over several ticks: no warmer than ice while it lasts, then as warm as their heat.

Only between the last of the ice and the room's temperature does a bath hang on the tick before; it
is then taken in order, and what is downstream of it is not.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from daemon.moisture import air, dryers
from daemon.moisture.along_air import running_sum
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_state import Moment


@dataclass(slots=True)
class BathAlong:
    """One bath, at station `i`. Arrays are (ticks, members)."""

    i: int
    parent: int
    start: Array  # (members,): J that it had taken in before
    ice_kg: Array  # (members,)
    gain_w: Array  # (members,)
    evaporated: Array  # (members,): of the liquid that arrives, what may evaporate
    moment: Moment
    good: int = field(init=False)  # so many ticks from the first are as here
    gained: Array = field(init=False)  # J in each tick
    heat: Array = field(init=False)  # J after each
    _icy: bool = field(init=False)  # whether every member has ice at first

    def __post_init__(self) -> None:
        self.good = self.moment.now.temperature_k.shape[1]
        self._icy = not dryers.bath_warmth(self.ice_kg, self.start).any()

    def arrives(self, vapor: Array, liquid: Array | None) -> None:
        """How warm it is while this comes to it: sets temperatures and saturation in place."""
        if self._icy:
            return
        now, saturated = self.moment.now, self.moment.saturated[self.i]
        temperature, pressure = now.temperature_k[self.i], now.pressure_pa[self.i]
        most = np.maximum(temperature, now.temperature_k[0])
        warmth = dryers.bath_warmth(self.ice_kg, self.start)
        if (temperature + warmth >= most).all():  # as warm as its room, and so it stays
            temperature[:] = most
            saturated[:] = air.saturated_humidity_ratio_unchecked(temperature, pressure)
            return
        heat = self.start
        for row in range(len(temperature)):
            warmer = temperature[row] + dryers.bath_warmth(self.ice_kg, heat)
            temperature[row] = np.minimum(warmer, most[row])
            saturated[row] = air.saturated_humidity_ratio_unchecked(temperature[row], pressure[row])
            wetted = vapor[row] if liquid is None else vapor[row] + self.evaporated * liquid[row]
            leaves = np.minimum(wetted, saturated[row] * self.moment.moved.into[self.i][row])
            heat = heat + self._gained(slice(row, row + 1), vapor[row], leaves)[0]

    def passed(self, vapor_in: Array, vapor: Array) -> None:
        """What passed it, and the heat that it takes in."""
        self.gained = self._gained(slice(None), vapor_in, vapor)
        self.heat = running_sum(self.start, self.gained)[1:]
        if self._icy:
            warms = dryers.bath_warmth(self.ice_kg, self.heat).any(axis=1)
            if warms.any():
                self.good = int(warms.argmax()) + 1

    def _gained(self, rows: slice, vapor_in: Array, vapor: Array) -> Array:
        """Heat from the air and from the room, J."""
        now = self.moment.now
        from_air = dryers.coil_heat(
            self.moment.moved.into[self.i][rows],
            vapor,
            vapor_in - vapor,
            now.temperature_k[self.parent][rows],
            now.temperature_k[self.i][rows],
            now.pressure_pa[self.i][rows],
        )
        gained: Array = from_air + self.gain_w * self.moment.dt_s
        return gained
