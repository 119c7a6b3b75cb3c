"""What is followed beside the water: the plant, the week, the day's turns. A plain record."""

from __future__ import annotations

from dataclasses import dataclass

from daemon.foresight import Foresight
from daemon.moisture.plant import Plant
from daemon.reminders import Reminders


@dataclass(frozen=True, slots=True)
class Followed:
    """What is carried from tick to tick."""

    plant: Plant
    foresight: Foresight
    reminders: Reminders
