"""Coming back from a checkpoint and the inputs after it, to the same bits as without a stop."""

from __future__ import annotations

import logging
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from daemon.advance import Core, Estimate
from daemon.alarms import Transition
from daemon.checkpoint import decode, encode
from daemon.clock import HOUR_US, format_rfc3339
from daemon.counted import COUNTED_KEY
from daemon.errors import StoreError
from daemon.going_back import TOO_OLD_US, Back, GoingBack, is_reckoned_with
from daemon.journal import Entry
from daemon.moisture.ensemble import spread
from daemon.moisture.line import new_ledger
from daemon.outlet_record import OutletRecord
from daemon.site_parts import fingerprint, same_line, untouched
from daemon.state import CoreState, Inputs
from daemon.store.store import Store
from sensors.reading import Reading

log = logging.getLogger("dripleg")

# of the record: what a start goes back to in one go, before it samples; a few seconds on a Pi
LONGEST_AT_START_US = 6 * HOUR_US


@dataclass(frozen=True, slots=True)
class Start:
    """What a start came back to, and what is left to be reckoned with beside the ticks."""

    back: Back | None
    late: Sequence[Entry] = ()  # dated before it, and not known to it
    undone_us: int | None = None  # of the earliest drain that it knows and that was undone


class Recovery:
    """Makes states from one site's store."""

    def __init__(self, core: Core, store: Store) -> None:
        self._core, self._store = core, store
        self._fingerprint = fingerprint(core.site, core.model.plan)

    def blob(self, state: CoreState) -> bytes:
        """A state as a checkpoint keeps it."""
        return encode(state, self._fingerprint)

    def come_back(self, grid_us: int, until_us: int, before_us: int | None = None) -> Back | None:
        """The state at the last stored tick up to `until_us`, from the latest checkpoint that is
        earlier than `before_us`, or from the latest of all; None without one of this line."""
        going = self.going_back(grid_us, until_us, before_us)
        return None if going is None else going.go_on(until_us)

    def start(self, grid_us: int, until_us: int) -> Start:
        """Come back at a start of the daemon, which has to sample soon.

        Where entries that the latest checkpoint does not know of are dated long before it, going
        back to them is left to the ticks: the state is the one that the ticks had come to while the
        daemon was still on its way.
        """
        found = next(self._readable(until_us), None)
        if found is not None and same_line(found[1], self._fingerprint):
            late, undone_us = self._unknown(found[0].time_us, grid_us)
            times_us = [*(entry.at_us for entry in late), *undone_us]
            if times_us and until_us - min(times_us) > LONGEST_AT_START_US:
                state = self._core.fitted(found[0])
                going = GoingBack(self._core, self._store, grid_us, None, state, rewritten=False)
                return Start(going.go_on(until_us), late, min(undone_us, default=None))
        return Start(self.come_back(grid_us, until_us))

    def going_back(
        self, grid_us: int, until_us: int, before_us: int | None = None
    ) -> GoingBack | None:
        """The same, to be gone on with a little at a time."""
        latest_us = until_us if before_us is None else before_us - 1
        state, rewritten = self._latest_complete(grid_us, latest_us)
        if state is None:
            return None
        return GoingBack(self._core, self._store, grid_us, before_us, state, rewritten)

    def _latest_complete(self, grid_us: int, until_us: int) -> tuple[CoreState | None, bool]:
        """The latest checkpoint that knows of every entry dated before it.

        An entry written after a checkpoint but dated before it (a kill came between) sends us
        further back, and so does the undoing of a drain dated before it; one from before the
        record began cannot.
        """
        rewritten = False
        while True:
            found = next(self._readable(until_us), None)
            if found is None or not same_line(found[1], self._fingerprint):
                return None, rewritten
            late, undone_us = self._unknown(found[0].time_us, grid_us)
            unknown = [*(entry.at_us for entry in late), *undone_us]
            if not unknown:
                return self._core.fitted(found[0]), rewritten
            until_us = min(unknown) - 1
            self._store.drop_checkpoints_after(until_us)
            rewritten = True

    def _unknown(self, at_us: int, grid_us: int) -> tuple[list[Entry], list[int]]:
        """What a checkpoint made at a time does not know, and should: entries dated before it, and
        the times of drains that it reckons with and that were undone."""
        dated = self._store.entries(from_us=max(at_us - TOO_OLD_US, grid_us + 1), to_us=at_us + 1)
        late = [entry for entry in dated if entry.written_us > at_us and is_reckoned_with(entry)]
        undone_us = [
            drain.at_us
            for drain, undo in self._undone()
            if grid_us < drain.at_us <= at_us < undo.at_us
        ]
        return late, undone_us

    def _undone(self) -> list[tuple[Entry, Entry]]:
        """Drains that were reckoned with until they were undone, with what undid them."""
        found = []
        for seq, undo in self._store.undoings().items():
            drain = self._store.entry(seq)
            if drain is not None and is_reckoned_with(drain):
                found.append((drain, undo))
        return found

    def reaches(self, before_us: int) -> bool:
        """Whether there is a checkpoint of this line to go back to, earlier than a time."""
        found = next(self._readable(before_us - 1), None)
        return found is not None and same_line(found[1], self._fingerprint)

    def _readable(self, until_us: int) -> Iterator[tuple[CoreState, str]]:
        """Checkpoints from the latest back, with what each belongs to; unreadable ones left out."""
        told = False
        while (found := self._store.checkpoint_before(until_us)) is not None:
            at_us, blob = found
            until_us = at_us - 1
            try:
                yield decode(blob)
            except StoreError as error:  # damaged, or of another version of dripleg
                if not told:
                    log.warning(
                        "the checkpoint of %s is left out: %s", format_rfc3339(at_us), error
                    )
                told = True

    def begin(
        self, now_us: int, readings: Sequence[Reading]
    ) -> tuple[CoreState, Estimate, list[Transition]]:
        """The first state of this line: like `Core.initial`, but what is known goes on.

        After a change of the site file traps of the same name keep what they hold, and what was
        learned of untouched parts stays. What was recorded while the daemon stood still is taken
        in. Where nothing of a record's state can be read, that is kept (see `counted`).
        """
        found = next(self._readable(now_us), None)
        if found is None:
            if self._store.last_tick_us is not None:
                self._store.set_meta(COUNTED_KEY, str(now_us))
            return self._core.initial(now_us, Inputs(readings))
        old, before = found
        log.info("the line's description has changed: traps go on with what they held")
        plan = self._core.model.plan
        known = untouched(plan, self._fingerprint, before, old.model.beliefs)
        fresh, estimate, transitions = self._core.initial(now_us, Inputs(readings), known)
        since = self._store.entries(from_us=old.time_us + 1, to_us=now_us + 1)
        state = carried_over(self._core, fresh, old)
        changed = {each.alarm for each in transitions}
        standing = {
            name: record if name in changed else old.alarms.get(name, record)
            for name, record in state.alarms.items()
        }
        state, taken, _ = self._core.take(
            replace(state, alarms=standing),
            sorted(since, key=lambda entry: (entry.at_us, entry.seq)),
        )
        return state, replace(estimate, state=state, noted=taken.noted), transitions


def carried_over(core: Core, fresh: CoreState, old: CoreState) -> CoreState:
    """A fresh state whose traps hold what an old one's of the same name held.

    Member by member where there are as many of them, else spread alike.
    """
    members = core.site.line.members
    water = fresh.model.water.trap.copy()
    contents = core.model.contents(old.model)
    for name in core.trap_names:
        if name in old.stations:
            held = contents[old.stations.index(name)]
            water[core.model.plan.index[name]] = spread(held, members)
    model = replace(
        fresh.model, water=replace(fresh.model.water, trap=water), round_start=water.copy()
    )
    model = replace(
        model,
        ledger=new_ledger(core.model.plan, model.water),
        fittings=core.model.fittings.carried_over(model.fittings, old.model.fittings),
    )
    traps = {name: old.traps.get(name, record) for name, record in fresh.traps.items()}
    known = core.judging.rules.channels  # a frozen part stays one through a restart
    judged = {name: each for name, each in old.quality.channels.items() if name in known}
    quality = replace(fresh.quality, channels={**fresh.quality.channels, **judged})
    outlets = _blotters(fresh, old)
    followed = core.following.carried_over(model, old.followed)
    return replace(
        fresh,
        model=model,
        traps=traps,
        quality=quality,
        outlets=outlets,
        followed=followed,
        drains=core.drains.carried_over(fresh.drains, old.drains),
        hourly=None if core.hourly is None else core.hourly.carried_over(fresh, old),
    )


def _blotters(fresh: CoreState, old: CoreState) -> dict[str, OutletRecord]:
    """What blotters showed stands, whatever was changed in the site file."""
    outlets = dict(fresh.outlets)
    for name, was in old.outlets.items():
        if name in outlets:
            outlets[name] = replace(
                outlets[name], clean_us=was.clean_us, water_us=was.water_us, oil_us=was.oil_us
            )
    return outlets
