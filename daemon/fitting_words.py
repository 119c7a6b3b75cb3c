"""What the alarms of dryers and of frost say: what is so, how sure, what to do."""

from __future__ import annotations

import numpy as np

from daemon.alarms import Condition
from daemon.moisture import air
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.ensemble import percentiles
from daemon.moisture.model import Model
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.units import show_flow, show_percent, show_temperature


class FittingWords:
    """The words of one site."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model

    def freezing(self, station: str, so: Condition, room: bool) -> str:
        """Of water that may freeze at a station; `room`: because a dryer's room is cold."""
        if so != "so":
            return f"{station}: no frost any more."
        if room:
            return (
                f"It is below {show_temperature(278.15, self.site.units)} around {station}: its "
                "coil may freeze. Warm the room, or switch it off while no air is used."
            )
        return (
            f"There is water in {station} and it is freezing there: drain it, and keep the place "
            "above freezing. Ice blocks drains and bursts bowls: do not force a frozen one."
        )

    def overloaded(self, state: CoreState, number: int, so: Condition) -> str:
        """Of a dryer that more air goes through than it can dry."""
        i, _ = self.model.fittings.drying.dryers[number]
        name, people = self.model.plan.stations[i].id, self.site.units
        if so in ("by design", "out of service"):
            return self.quiet(number, so)
        if so != "so":
            return f"{name}: copes again."
        model, drying = state.model, self.model.fittings.drying
        row = drying.rated.index(i)
        flow = float(np.median(model.fittings.load[row])) / REFERENCE_DRY_AIR_KG_PER_M3
        rated = float(np.median(model.parameters.fittings.rated_kg_per_s[row]))
        points = air.dew_point(model.water.leaving_ratio[i], model.conditions.pressure_pa[i])
        low, middle, high = (show_temperature(float(each), people) for each in percentiles(points))
        return (
            f"{name} is overloaded: {show_flow(flow, people)} goes through it, rated for "
            f"{show_flow(rated / REFERENCE_DRY_AIR_KG_PER_M3, people)} at 7 bar, 35 degC in and "
            f"25 degC around. Its air leaves with a pressure dew point of about {middle} "
            f"({low} to {high}). Use less air at a time, cool what comes in, clean its condenser."
        )

    def quiet(self, number: int, why: Condition) -> str:
        """Of a dryer whose alarms keep quiet."""
        name = self.model.plan.stations[self.model.fittings.drying.dryers[number][0]].id
        if why == "out of service":
            return f"{name} is out of service: it dries nothing."
        return f"{name} is switched off: it dries nothing."

    def spent(self, name: str, so: Condition, share: float) -> str:
        """Of a cartridge without charge."""
        if so != "so":
            return f"{name}: has charge again."
        return (
            f"The desiccant in {name} is spent ({show_percent(share)} sure): wet air passes. "
            "Change the cartridge and record the change."
        )
