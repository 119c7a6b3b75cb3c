"""Rows of an export: readings, drains and the journal as `dripleg replay` reads or writes them."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

from daemon.alarms import Transition
from daemon.clock import format_rfc3339
from daemon.going_back import is_reckoned_with
from daemon.journal import Drain, Entry, body_to_json
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.units import from_si, recorded_from_si, to_si
from sensors.reading import Channel, Reading, in_steps, reading

FAULTS_HEADER = ["time", "channel", "reason", "value", "unit"]
OTHERS_HEADER = ["time", "channel", "value_si", "reason"]
JOURNAL_HEADER = ["number", "time", "written", "counts", "body"]
Row = list[str]
_TOGETHER = 5000  # readings that are put in order at once


class ChannelText:
    """Writes a channel's values in the unit that a replay reads, exactly."""

    def __init__(self, channel: Channel) -> None:
        self.channel = channel
        zero, self.unit = recorded_from_si(0.0, channel.quantity, gauge=channel.gauge)
        step, _ = recorded_from_si(channel.step, channel.quantity, gauge=channel.gauge)
        # two digits beyond the step: what is read is rounded to the step again, to the same bits
        self._decimals = max(0, math.ceil(-math.log10(abs(step - zero))) + 2)

    def of(self, value: float) -> str:
        """A finite value; one that is no whole number of steps with all its digits."""
        channel = self.channel
        number, _ = recorded_from_si(value, channel.quantity, gauge=channel.gauge)
        if in_steps(value, channel.step) != value:
            return repr(number)
        text = f"{number:.{self._decimals}f}"
        return text.rstrip("0").rstrip(".") if "." in text else text

    def takes(self, value: float) -> bool:
        """Whether a replay takes the value as one of this channel's."""
        return math.isfinite(value) and reading(self.channel, value, 0).good


def by_time(
    ticks: Iterable[tuple[int, Sequence[Reading]]], reach_us: int
) -> Iterator[tuple[int, list[Reading]]]:
    """Readings in order of their own times, those of one time as they came.

    Each with the time up to which all are given. `reach_us` is how far a reading's own time may
    stand from its tick's.
    """
    waiting: list[Reading] = []
    until_us, enough = 0, _TOGETHER
    for tick_us, readings in ticks:
        waiting += readings
        until_us = tick_us - reach_us
        if len(waiting) > enough:
            waiting.sort(key=_own_time)
            ready = [one for one in waiting if one.time_us <= until_us]
            if ready:
                yield until_us, ready
                del waiting[: len(ready)]
            enough = max(_TOGETHER, 2 * len(waiting))
    waiting.sort(key=_own_time)
    yield until_us, waiting


def _own_time(one: Reading) -> int:
    return one.time_us


@dataclass(slots=True)
class Counts:
    """How many rows of readings went where, and the first and the last time of the site's."""

    readings: int = 0
    faults: int = 0
    others: int = 0
    first_us: int | None = None
    last_us: int | None = None


class ReadingRows:
    """Sorts readings into the rows of three files."""

    def __init__(self, channels: Mapping[str, Channel]) -> None:
        self._texts = {name: ChannelText(channel) for name, channel in channels.items()}
        self._time: tuple[int, str] = (-1, "")
        self.counts = Counts()

    def rows(self, readings: Iterable[Reading]) -> tuple[list[Row], list[Row], list[Row]]:
        """Rows of readings.csv, faults.csv and other-channels.csv.

        A reading that was judged bad still has the value that its part gave: it stands in the
        first, where a replay judges it again, and in the second with its reason.
        """
        good: list[Row] = []
        bad: list[Row] = []
        others: list[Row] = []
        for one in readings:
            time, text = self._when(one.time_us), self._texts.get(one.channel)
            if text is None:
                value = repr(one.value) if math.isfinite(one.value) else ""
                others.append([time, one.channel, value, one.fault])
                continue
            if self.counts.first_us is None:
                self.counts.first_us = one.time_us
            self.counts.last_us = one.time_us
            written = text.of(one.value) if text.takes(one.value) else ""
            if written:
                good.append([time, one.channel, written, text.unit])
            if one.fault or not written:
                reason = one.fault or f"cannot be from this channel: {one.value:g} in SI"
                unit = text.unit if written else ""
                bad.append([time, one.channel, reason, written, unit])
        self.counts.readings += len(good)
        self.counts.faults += len(bad)
        self.counts.others += len(others)
        return good, bad, others

    def _when(self, time_us: int) -> str:
        if self._time[0] != time_us:
            self._time = (time_us, format_rfc3339(time_us))
        return self._time[1]


@dataclass(slots=True)
class DrainRows:
    """Rows of drains.csv, and how many drains it has no words for, by why."""

    rows: list[Row]
    left_out: dict[str, int]


def drain_rows(entries: Iterable[Entry], traps: Collection[str], first_us: int) -> DrainRows:
    """The drains that count, in order of time, as a replay from `first_us` on reads them."""
    found = DrainRows([], {})
    for entry in sorted(entries, key=lambda entry: (entry.at_us, entry.seq)):
        body = entry.body
        if not isinstance(body, Drain):
            continue
        why = _not_for_replay(entry, body, traps, first_us)
        if why:
            found.left_out[why] = found.left_out.get(why, 0) + 1
            continue
        volume, unit = "", ""
        if body.outcome == "empty":
            volume, unit = "0", "ml"
        elif body.volume_kg is not None:
            volume, unit = _ml(body.volume_kg), "ml"
        found.rows.append([format_rfc3339(entry.at_us), body.trap, volume, unit])
    return found


def _not_for_replay(entry: Entry, drain: Drain, traps: Collection[str], first_us: int) -> str:
    if drain.outcome == "partly":
        return "left some in the trap"
    if drain.trap not in traps:
        return "of traps that the site file does not have"
    if entry.at_us < first_us:
        return "before the first reading"
    if not is_reckoned_with(entry):
        return "reported more than a week late, which the model did not go back for"
    return ""


def _ml(volume_kg: float) -> str:
    """The volume in ml that gives the very same mass when it is read."""
    ml = from_si(volume_kg / WATER_KG_PER_M3, "ml", "volume")
    for text in (f"{ml:.6g}", f"{ml:.12g}", repr(ml)):
        if to_si(float(text), "ml", "volume") * WATER_KG_PER_M3 == volume_kg:
            return text
    for near in (math.nextafter(ml, -math.inf), math.nextafter(ml, math.inf)):
        if to_si(near, "ml", "volume") * WATER_KG_PER_M3 == volume_kg:
            return repr(near)
    return repr(ml)


def transition_rows(transitions: Iterable[Transition]) -> Iterator[Row]:
    """Every change of an alarm's state, in the columns of a replay's transitions.csv."""
    for each in transitions:
        time = format_rfc3339(each.at_us)
        yield [time, each.id, each.alarm, each.before, each.after, each.priority, each.text]


def journal_rows(every: Iterable[Entry], counting: Iterable[Entry]) -> Iterator[Row]:
    """The whole journal; a drain that was undone, and the undoing, do not count."""
    counted = {entry.seq for entry in counting}
    for entry in every:
        yield [
            str(entry.seq),
            format_rfc3339(entry.at_us),
            format_rfc3339(entry.written_us),
            "yes" if entry.seq in counted else "no",
            body_to_json(entry.body),
        ]
