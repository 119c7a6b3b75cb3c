"""Forecasts of a regular invented shop over ten days, through a replay, and their scores."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

from daemon.advance import Core
from daemon.checkpoint import decode, encode
from daemon.clock import DAY_US, HOUR_US, parse_rfc3339
from daemon.foreseer import Foreseen, Foreseer
from daemon.foresight import (
    MOST_KEPT,
    MOST_SCORES,
    NOT_WITHIN,
    Foresight,
    Kept,
    Score,
    hit_rate,
    keep,
    score,
)
from daemon.journal import Drain, Entry
from daemon.moisture.forecast import Due
from daemon.moisture.week import OPEN
from daemon.payloads import trap_payload
from daemon.plant_summary import forecast_summary
from daemon.replay import Result, replay
from daemon.site import hours as opening
from daemon.state import CoreState
from sensors.reading import Reading
from tests.daemon.plants import Plant
from tests.daemon.shops import SITE
from tests.daemon.shops import site as parsed

BEGUN = parse_rfc3339("2026-03-02T07:00:00Z")  # a Monday
SECOND_WEEK = parse_rfc3339("2026-03-09T00:00:00Z")
DRAINED = parse_rfc3339("2026-03-05T17:20:00Z")  # the first Thursday
WEEK = "\n".join(
    f'{day} = ["08:00-12:00", "13:00-17:30"]' for day in ("mon", "tue", "wed", "thu", "fri")
)
HOURS = 'mon = ["08:00-12:00", "13:00-17:30"]\ntue = ["08:00-12:00", "13:00-17:30"]'
SHOP = parsed(
    SITE.replace(HOURS, WEEK)
    .replace("[site]", '[site]\nsample_every = "60 s"')
    .replace('"300 ml", drain_at = "150 ml"', '"900 ml", drain_at = "190 ml"')
    .replace('"120 ml", drain_at = "60 ml"', '"600 ml", drain_at = "120 ml"')
    .replace("members = 32", "members = 64")
)


def gun(now_us: int) -> float:
    working = opening.is_open(SHOP.hours, SHOP.timezone, now_us)
    return 70.0 if working and now_us // 60_000_000 % 10 < 8 else 0.0


@lru_cache(maxsize=1)
def readings() -> Sequence[Reading]:
    plant = Plant(SHOP, leak_l_min=3.0, used_l_min=gun, relative_humidity=0.6, step_s=10)
    return tuple(r for tick in plant.record(BEGUN, 10 * 86_400, 60) for r in tick)


@lru_cache(maxsize=1)
def ten_days() -> tuple[Core, Result]:
    """Ten days; the riser and the bowl are drained on the first Thursday, nobody measures."""
    core = Core(SHOP)
    entries = [
        Entry(number, DRAINED, DRAINED, Drain(trap))
        for number, trap in enumerate(("riser", "bowl"), 1)
    ]
    return core, replay(core, readings(), entries)


def foresight() -> Foresight:
    return ten_days()[1].state.followed.foresight


def test_a_regular_shop_s_levels_are_foreseen_within_a_few_per_cent() -> None:
    scores = foresight().scores
    assert {each.trap for each in scores} == {"riser", "bowl"}
    assert len(scores) >= 3
    for each in scores:
        ahead = each.happened_us - each.made_us
        assert ahead >= DAY_US
        assert abs(each.p50_us - each.happened_us) < 0.06 * ahead
        assert each.hit


def test_the_summary_scores_the_forecasts() -> None:
    _, result = ten_days()
    count = len(foresight().scores)
    expected = {"scored": count, "hits": count, "hit_rate": 1.0}
    assert forecast_summary(result.state) == expected
    assert hit_rate(foresight().scores, BEGUN, SECOND_WEEK)[1] < count
    assert hit_rate(foresight().scores, BEGUN, BEGUN + 10 * DAY_US) == (count, count)


def test_the_working_week_is_learned_from_whole_hours() -> None:
    learned = foresight().week
    opened = learned.count[OPEN]
    assert opened[9] > 1.0  # Monday at nine, seen twice
    assert opened[12] == 0.0  # the lunch break is closed
    assert not opened[120:].any()  # the weekend
    assert learned.count[0, 130] == 1.0  # a closed hour of Saturday's, seen once
    duty = learned.duty[OPEN, 9] / opened[9]
    # 56 L/min of 152 on average, and the leak: arithmetic on the plant's figures
    assert duty == pytest.approx((0.8 * 70.0 + 3.0) / 152.0, rel=0.08)


def test_forecasts_are_kept_only_when_something_moved_and_only_the_last_few() -> None:
    kept = foresight().kept
    assert len(kept) == MOST_KEPT
    times = [(each.at_us // HOUR_US % 24, (each.at_us - BEGUN) // DAY_US) for each in kept]
    assert {hour for hour, _ in times} <= {0, 6, 12, 18}
    weekend = [each for each in kept if 5 <= (each.at_us - SECOND_WEEK) / DAY_US + 7 < 6.9]
    assert not weekend


def test_views_and_messages_carry_the_due_times() -> None:
    core, result = ten_days()
    riser = next(view for view in core.views(result.state) if view.trap == "riser")
    assert riser.due_p05_us is not None
    payload = trap_payload(riser)["due"]
    assert payload["because"] == "volume"
    assert parse_rfc3339(payload["p05"]) == riser.due_p05_us // 1_000_000 * 1_000_000
    tank = next(view for view in core.views(result.state) if view.trap == "tank")
    assert tank.due
    assert "due now" in tank.expected


def test_asking_again_within_the_hour_costs_nothing_and_a_drain_asks_anew(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    core, result = ten_days()
    asked: list[int] = []
    forecast = Foreseer.forecast

    def counted(self: Foreseer, *given: object) -> Foreseen:
        asked.append(1)
        return forecast(self, *given)  # type: ignore[arg-type]

    monkeypatch.setattr(Foreseer, "forecast", counted)
    core = Core(SHOP)
    core.views(result.state)
    core.views(result.state)
    assert len(asked) == 1
    at_us = result.state.time_us
    drained, _, _ = core.take(result.state, [Entry(9, at_us, at_us, Drain("tank"))])
    view = next(each for each in core.views(drained) if each.trap == "tank")
    assert len(asked) == 2
    assert view.due_p50_us is not None
    assert view.due_p50_us > at_us


def test_a_forecast_is_the_same_to_the_bit_whoever_makes_it() -> None:
    core, result = ten_days()
    state = result.state
    again, _ = decode(encode(state, ""))
    dues = [
        each.following.foreseer.forecast(
            which.followed.foresight, which.model, each.following.dates(which)
        )
        for each, which in ((core, state), (Core(SHOP), again))
    ]
    assert dues[0] == dues[1]


def test_hours_that_nobody_watched_are_left_out() -> None:
    watching = ("motor.contact", "tank-gauge.pressure")
    silent = [
        each
        for each in readings()
        if each.time_us < BEGUN + 36 * HOUR_US
        and (each.channel not in watching or each.time_us <= BEGUN + 3 * HOUR_US)
    ]
    state = replay(Core(SHOP), silent, []).state
    assert state.followed.foresight.week.count[OPEN].sum() == 2.0  # eight and nine o'clock


# ---- the scores themselves ----


def plain() -> Foresight:
    return replace(foresight(), kept=(), scores=(), scored=0, hits=0)


def made(at_us: int, *times: int) -> Kept:
    return Kept(at_us, (tuple(times),))  # type: ignore[arg-type]


def test_a_score_takes_the_last_forecast_of_at_least_a_day_ago() -> None:
    kept = tuple(made(n * 6 * HOUR_US, n, n, n) for n in range(1, 7))
    with_them = replace(plain(), kept=kept)
    found = score(with_them, 0, "riser", 0, 48 * HOUR_US)
    assert found.scores[-1].made_us == 24 * HOUR_US
    assert found.scores[-1].p50_us == 4
    assert (found.scored, found.hits) == (1, 0)
    # those from before its last drain were not about this level
    assert score(with_them, 0, "riser", 25 * HOUR_US, 48 * HOUR_US) == with_them
    assert score(with_them, 0, "riser", 0, 29 * HOUR_US) == with_them


@pytest.mark.parametrize(
    ("p05", "p95", "happened", "hit"),
    [
        (10, 20, 15, True),
        (10, 20, 10, True),
        (10, 20, 9, False),
        (10, 20, 21, False),
        (10, NOT_WITHIN, 99, True),
        (NOT_WITHIN, NOT_WITHIN, 99, False),
    ],
)
def test_a_hit_lies_within_the_interval(p05: int, p95: int, happened: int, hit: bool) -> None:
    assert Score("riser", 0, p05, 15, p95, happened).hit is hit


def test_forecasts_and_scores_are_bounded() -> None:
    found = plain()
    for number in range(MOST_SCORES + 20):
        found = keep(found, number * DAY_US, [Due(1, 2, None, "volume")], 0.0)
        found = score(found, 0, "riser", 0, (number + 1) * DAY_US)
    assert len(found.kept) == MOST_KEPT
    assert len(found.scores) == MOST_SCORES
    assert found.scored == MOST_SCORES + 20
    assert found.kept[-1].due_us == ((1, 2, NOT_WITHIN),)


def test_the_whole_of_it_survives_a_checkpoint() -> None:
    state: CoreState = ten_days()[1].state
    again, _ = decode(encode(state, "x"))
    assert again.followed.foresight.scores == state.followed.foresight.scores
    assert again.followed.foresight.kept == state.followed.foresight.kept
    assert again.followed.reminders == state.followed.reminders
    assert np.array_equal(
        again.followed.foresight.pattern.ratio, state.followed.foresight.pattern.ratio
    )
