"""Whether a dryer runs: by its contact, by the shop's hours, or because nothing says otherwise."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from daemon.moisture.contact import ContactState
from daemon.moisture.description import Power
from daemon.moisture.ensemble import Array

Mask = npt.NDArray[np.bool_]
SILENT = ContactState()
Told = Sequence[tuple[int, float, bool]]  # a channel's readings: time_us, value, good


@dataclass(frozen=True, slots=True)
class Powered:
    """Whether a dryer runs."""

    contact: ContactState = SILENT
    since_us: int = -1  # since when it has been on; -1: it is off
    known: bool = True  # whether what says so can be believed now

    @property
    def off(self) -> bool:
        """Whether it is known to be off."""
        return self.known and self.since_us < 0


def switched(
    before: Powered,
    power: Power,
    told: Told,
    is_open: bool,
    to_us: int,
    period_us: int,
) -> Powered:
    """The state at `to_us`, after what its contact told; `is_open`: whether the shop works then.

    A dryer that nothing ever switches has been on for ever; every other counts from when it was
    first known to be on.
    """
    contact, since_us = before.contact, before.since_us
    for time_us, value, good in told:
        if not good:
            contact = replace(contact, sampled=True)
            continue
        contact = contact.told(time_us, value > 0.5, period_us)
        since_us = -1 if not contact.closed else (time_us if since_us < 0 else since_us)
    if not power.in_service or (power.off_when_closed and not is_open):
        return Powered(contact, -1, known=True)
    if power.contact is None:
        if since_us < 0:
            since_us = to_us if power.off_when_closed else 0
        return Powered(contact, since_us, known=True)
    if contact.closed and since_us < 0:
        since_us = to_us
    known = contact.closed is not None and contact.known_until(to_us - 1, to_us, period_us) == to_us
    return Powered(contact, since_us, known)


def foreseen(before: Powered, power: Power, is_open: bool, at_us: int) -> Powered:
    """The state at a time to come, for which no contact has told anything yet.

    One that stands off now and is not switched by the hours stays off; one whose contact cannot
    be believed stays that.
    """
    if not power.in_service or (power.off_when_closed and not is_open):
        return replace(before, since_us=-1, known=True)
    if power.off_when_closed and before.since_us < 0 and before.contact.closed is not False:
        return replace(before, since_us=at_us)
    return before


def works(powered: Powered, unknown: Array, warms_us: int, to_us: int) -> Mask:
    """The members in which a dryer dries, (members,) of bool.

    `unknown` is standard normal: where nothing can be believed, half of the members take it to be
    off. One that was just switched on dries nothing until it has been on for `warms_us`.
    """
    if not powered.known:
        return np.asarray(unknown > 0.0)
    on = powered.since_us >= 0 and to_us - powered.since_us >= warms_us
    return np.full(unknown.shape, on)
