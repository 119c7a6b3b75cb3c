"""Liquid water carried out at each outlet, per unit of air used lately.

One step's liquid over one step's air is a poor measure: liquid waits in the line while nothing is
used and then leaves with the first air. Both are summed, and forgotten as air passes: over as much
air as the outlet uses in five minutes when the compressor just keeps up (common practice, no
source). While no air moves nothing is forgotten.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.ensemble import Array
from daemon.moisture.plan import Plan

MEMORY_S = 300.0
_LEAST_MEMORY_KG = 1e-6


@dataclass(frozen=True, slots=True)
class Carried:
    """Sums that fade with the air used, kg. Arrays are (outlets, members)."""

    liquid: Array
    air: Array

    @property
    def kg_per_m3(self) -> Array:
        """Liquid in a reference m3 of the dry air (20 degC, 1 bar absolute); 0 before any air."""
        air = np.where(self.air > 0.0, self.air, 1.0)
        content: Array = self.liquid / air * REFERENCE_DRY_AIR_KG_PER_M3
        return content


def nothing_yet(plan: Plan) -> Carried:
    """Before any air has left."""
    zero = np.zeros((len(plan.line.outlets), plan.line.members))
    return Carried(zero, zero)


def carry(plan: Plan, carried: Carried, air: Array, liquid: Array) -> Carried:
    """After a step in which this much dry air and liquid left, kg, (outlets, members)."""
    keeps = np.exp(-air / memory_kg(plan))
    return Carried(carried.liquid * keeps + liquid, carried.air * keeps + air)


def memory_kg(plan: Plan) -> Array:
    """Over how much air each outlet forgets, kg, (outlets, 1)."""
    delivered_kg_per_s = plan.line.compressor.delivered.value * REFERENCE_DRY_AIR_KG_PER_M3
    shares = np.array([outlet.share for outlet in plan.line.outlets])
    memory: Array = np.maximum(shares[:, None] * delivered_kg_per_s * MEMORY_S, _LEAST_MEMORY_KG)
    return memory
