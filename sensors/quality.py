"""Judges readings that a part gave without complaint: range, rate, frozen, saturated, disagreement.

Pure: a state and a tick's readings in; the next state, the readings with the bad ones marked, and
the verdicts that began or ended out. The time is the readings' own, so a replay judges as the live
daemon did. A bad reading is marked with its reason and never replaced; it keeps the value that the
part gave, so that the same readings can be judged again (`as_given`), and nobody may use it.

Standing still is a fault only of what has moved before: a record of a channel that never moved
says nothing about how it moves.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

from sensors.quality_likes import disagreeing, still_disagreeing
from sensors.quality_rules import (
    ACCEPT_AFTER,
    DRY_AGAIN,
    LIVELY_MOVES,
    LONGEST_GAP_US,
    OFF_LONG_S,
    QUICK_STEPS,
    REPEATED,
    SATURATED,
    SATURATED_S,
    SLOW_COSTS,
    Part,
    Rule,
    Rules,
)
from sensors.quality_state import (
    DISAGREES,
    FROZEN,
    OUT_OF_RANGE,
    SATURATED_ELEMENT,
    TOO_FAST,
    ChannelState,
    Judged,
    QualityState,
    Severity,
    Verdict,
)
from sensors.reading import Reading

__all__ = [
    "DISAGREES",
    "FROZEN",
    "OUT_OF_RANGE",
    "SATURATED_ELEMENT",
    "TOO_FAST",
    "ChannelState",
    "Judged",
    "QualityState",
    "Severity",
    "Verdict",
    "as_given",
    "forget",
    "judge",
]


def as_given(readings: Sequence[Reading]) -> list[Reading]:
    """The readings as their parts gave them, before they were judged."""
    return [
        replace(one, fault="") if one.fault and not math.isnan(one.value) else one
        for one in readings
    ]


def forget(state: QualityState, sensor: str) -> QualityState:
    """After a sensor was replaced: nothing is known of the new one."""
    kept = {name: one for name, one in state.channels.items() if name.rpartition(".")[0] != sensor}
    return replace(state, channels=kept)


def judge(
    rules: Rules, state: QualityState, readings: Sequence[Reading], *, running: bool | None = None
) -> Judged:
    """Judge one tick's readings, as their parts gave them.

    `running` is whether the compressor ran during the tick; None where nobody knows, and what
    depends on it is then not judged. Channels without a rule (contacts) pass.
    """
    at_us = max((one.time_us for one in readings), default=state.last_us or 0)
    ran_us = 0
    if running and state.last_us is not None:
        ran_us = min(at_us - state.last_us, LONGEST_GAP_US)
    off_since_us = None if running is not False else state.off_since_us
    if running is False and off_since_us is None:
        off_since_us = at_us
    channels = dict(state.channels)
    reasons: dict[int, tuple[str, str]] = {}
    good: dict[str, int] = {}
    for number, one in enumerate(readings):
        if one.fault:
            continue
        rule = rules.channels.get(one.channel)
        if rule is None:
            good[one.channel] = number
            continue
        before = channels.get(one.channel, _NEW)
        channels[one.channel], bad = _judge_one(rule, before, one, ran_us)
        if bad:
            reasons[number] = bad
        else:
            good[one.channel] = number
    for part in rules.parts:
        reasons |= _frozen_part(part, channels, good, at_us)
    settled = off_since_us is not None and at_us - off_since_us >= OFF_LONG_S * 1e6
    doubts: dict[str, str] = {}
    for agreement in rules.agreements:
        if settled or agreement.always:
            reasons |= disagreeing(agreement, readings, good, doubts)
        else:
            reasons |= still_disagreeing(agreement, state.channels, good, doubts)
    marked = tuple(
        replace(one, fault=reasons[number][0]) if number in reasons else one
        for number, one in enumerate(readings)
    )
    verdicts = _verdicts(rules, channels, readings, reasons, doubts)
    return Judged(QualityState(channels, off_since_us, at_us), marked, tuple(verdicts))


_NEW = ChannelState()


def _judge_one(
    rule: Rule, before: ChannelState, one: Reading, ran_us: int
) -> tuple[ChannelState, tuple[str, str] | None]:
    """What is remembered next, and why the reading is bad if it is."""
    if not rule.lowest <= one.value <= rule.highest:
        limits = f"{rule.lowest:g} to {rule.highest:g}"
        return before, (OUT_OF_RANGE, f"{one.value:g} is not within {limits}")
    jump = _too_fast(rule, before, one)
    if jump is not None:
        return jump
    now = _remember(before, one, ran_us)
    if rule.saturates:
        now, wet = _saturation(now, one)
        if wet:
            return now, (SATURATED_ELEMENT, f"{one.value:.1%}")
    limit_s = rule.frozen_running_s
    stands = now.repeated >= REPEATED and now.moves >= LIVELY_MOVES
    if stands and limit_s is not None and now.ran_us >= limit_s * 1e6:
        return now, (FROZEN, f"{one.value:g} for {now.ran_us / 1e6:.0f} s of running")
    return now, None


def _too_fast(
    rule: Rule, before: ChannelState, one: Reading
) -> tuple[ChannelState, tuple[str, str]] | None:
    """A jump is bad until several readings stand by it."""
    if rule.fastest_per_s is None or math.isnan(before.value):
        return None
    change = abs(one.value - before.value)
    if change <= _allowed(rule, before.time_us, one.time_us):
        return None
    stands = abs(one.value - before.jump_value) <= _allowed(rule, before.time_us, one.time_us)
    jumped = before.jumped + 1 if stands or before.jumped == 0 else 1
    if jumped >= ACCEPT_AFTER:
        return None
    now = replace(before, jumped=jumped, jump_value=one.value)
    seconds = (one.time_us - before.time_us) / 1e6
    return now, (TOO_FAST, f"{before.value:g} to {one.value:g} in {seconds:g} s")


def _allowed(rule: Rule, from_us: int, to_us: int) -> float:
    assert rule.fastest_per_s is not None
    return rule.jump + rule.fastest_per_s * (to_us - from_us) / 1e6


def _remember(before: ChannelState, one: Reading, ran_us: int) -> ChannelState:
    if one.value == before.value:
        return replace(
            before,
            time_us=one.time_us,
            repeated=before.repeated + 1,
            ran_us=before.ran_us + ran_us,
            jumped=0,
            jump_value=math.nan,
        )
    return replace(
        before,
        value=one.value,
        time_us=one.time_us,
        same_since_us=one.time_us,
        repeated=0,
        ran_us=0,
        moves=_moves(before, one),
        jumped=0,
        jump_value=math.nan,
    )


def _moves(before: ChannelState, one: Reading) -> int:
    """How much it moved, up to the count that shows it alive; once alive it is known to live."""
    if before.moves >= LIVELY_MOVES:
        return before.moves
    stood_us, step_us = one.time_us - before.same_since_us, one.time_us - before.time_us
    quick = not math.isnan(before.value) and stood_us <= QUICK_STEPS * step_us
    return before.moves + 1 if quick else max(before.moves - SLOW_COSTS, 0)


def _saturation(now: ChannelState, one: Reading) -> tuple[ChannelState, bool]:
    """Wet once it stood at its end for long, until it is clearly dry again."""
    if one.value < DRY_AGAIN:
        return replace(now, wet_since_us=None, wet=False), False
    since_us = now.wet_since_us
    if one.value >= SATURATED and since_us is None:
        since_us = one.time_us
    long = since_us is not None and one.time_us - since_us >= SATURATED_S * 1e6
    wet = now.wet or long
    return replace(now, wet_since_us=since_us, wet=wet), wet


def _frozen_part(
    part: Part, channels: Mapping[str, ChannelState], good: Mapping[str, int], at_us: int
) -> dict[int, tuple[str, str]]:
    """All channels of a part exactly as they were: it repeats an old conversion."""
    if not all(name in good for name in part.channels):
        return {}
    of_part = [channels[name] for name in part.channels]
    if any(one.repeated < REPEATED for one in of_part):
        return {}
    if all(one.moves < LIVELY_MOVES for one in of_part):
        return {}
    since_us = max(one.same_since_us for one in of_part)
    if at_us - since_us < part.frozen_s * 1e6:
        return {}
    detail = f"{part.name} has repeated itself for {(at_us - since_us) / 1e6:.0f} s"
    return {good[name]: (FROZEN, detail) for name in part.channels}


def _verdicts(
    rules: Rules,
    channels: dict[str, ChannelState],
    readings: Sequence[Reading],
    reasons: Mapping[int, tuple[str, str]],
    doubts: Mapping[str, str],
) -> list[Verdict]:
    """What began and what ended; `channels` is brought up to date."""
    verdicts: list[Verdict] = []
    for number, one in enumerate(readings):
        if one.fault or one.channel not in rules.channels:
            continue
        state = channels.get(one.channel, _NEW)
        if number not in reasons and one.channel not in doubts and not state.said:
            continue
        now: dict[str, tuple[Severity, str]] = {}
        if one.channel in doubts:
            now[DISAGREES] = ("doubt", doubts[one.channel])
        if number in reasons:
            reason, detail = reasons[number]
            now[reason] = ("bad", detail)
        for reason, (severity, detail) in now.items():
            if state.said.get(reason) != severity:
                verdicts.append(Verdict(one.channel, one.time_us, reason, severity, True, detail))
        for reason, severity in state.said.items():
            if reason not in now:
                verdicts.append(Verdict(one.channel, one.time_us, reason, severity, False))
        said = {reason: severity for reason, (severity, _) in now.items()}
        channels[one.channel] = replace(state, said=said)
    return verdicts
