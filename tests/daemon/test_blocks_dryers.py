"""Dryers, beds, baths and measured dew points in blocks: what comes and goes does so at its tick.

As in `test_blocks`, tick by tick is the reference. All figures are invented.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import pytest

from daemon.clock import HOUR_US, SECOND_US
from daemon.journal import Drain, Entry, Service
from daemon.moisture.ensemble import Array
from daemon.record_arrays import Record, Told
from daemon.replay import Result
from daemon.replay_along import BlockResult
from daemon.site.types import Site
from tests.daemon.block_shops import Weather, a_record, a_shop
from tests.daemon.dryer_shops import DRYER_SHOPS
from tests.daemon.shops import BEGUN_US
from tests.daemon.test_blocks import compare

# By channel: what it says, of the hours since the beginning; NaN stands for nothing.
Says = Mapping[str, Callable[[Array], Array]]


def saying(record: Record, said: Says) -> Record:
    """A record in which some channels say something else."""
    channels = dict(record.channels)
    for name, values_of in said.items():
        told = channels[name]
        values = np.broadcast_to(
            np.asarray(values_of((told.times_us - BEGUN_US) / HOUR_US), np.float64),
            told.times_us.shape,
        )
        speaks = ~np.isnan(values)
        channels[name] = Told(told.times_us[speaks], values[speaks])
    return Record(channels)


def working(shop: Site, hours: float, said: Says, humid: bool = False) -> Record:
    """A record in which all the air that is made is used at once: from the start, if nothing else
    is said."""
    noise = np.random.default_rng(2)
    usual: Says = {
        "motor.contact": np.ones_like,
        "tank-gauge.pressure": lambda at: 7e5 + noise.normal(0.0, 300.0, len(at)),
    }
    record = a_record(shop, Weather(BEGUN_US, hours, humid=humid), 1)
    return saying(record, {**usual, **said})


def between(*spans: tuple[float, float]) -> Callable[[Array], Array]:
    """1 within these hours, else 0."""
    return lambda at: sum(((at >= begin) & (at < end)) * 1.0 for begin, end in spans) + 0.0 * at


def told_of(found: Result, alarm: str) -> list[str]:
    return [each.after for each in found.transitions if each.alarm == alarm]


def together(found: BlockResult) -> float:
    return found.taken["together"] / found.ticks


@pytest.mark.parametrize("name", DRYER_SHOPS)
def test_most_ticks_are_taken_together(name: str) -> None:
    shop = a_shop(name)
    weather = Weather(BEGUN_US, 2.0)
    shop_s = 2.0 * 3600.0 / (shop.sample_every_us / 1e6)
    found = compare(shop, a_record(shop, weather, 4))
    assert found.ticks == shop_s + 1
    assert together(found) > 0.95


def test_a_dryer_is_switched_at_its_tick() -> None:
    shop = a_shop("a dryer that is switched")
    on = between((0.0, 1.02), (1.31, 2.2), (2.25, 9.0))
    found = compare(shop, working(shop, 3.0, {"dryer-on.contact": on}))
    assert told_of(found, "dryer-dryer-overloaded").count("suppressed by design") == 2
    assert together(found) > 0.95
    assert found.state.model.fittings.power[0].since_us == BEGUN_US + 2.25 * HOUR_US


def test_a_dryer_off_at_night_is_switched_at_its_tick() -> None:
    """The shop closes at half past five; a drain is recorded just before, and just before that."""
    shop = a_shop("a dryer off at night")
    begun_us = BEGUN_US + 10 * HOUR_US
    record = a_record(shop, Weather(begun_us, 1.2), 1)
    for seconds in (1785, 1782):
        at_us = begun_us + seconds * SECOND_US
        found = compare(shop, record, [Entry(1, at_us, at_us, Drain("riser"))])
        assert found.state.model.fittings.power[0].off
        assert told_of(found, "dryer-dryer-overloaded") == ["suppressed by design"]
        assert together(found) > 0.95


@pytest.mark.parametrize(
    "name", ["a dryer that is switched", "a switched cartridge", "small twin beds"]
)
def test_a_dryer_whose_contact_is_silent_dries_in_half_of_the_members(name: str) -> None:
    shop = a_shop(name)
    silent = lambda at: np.where((at > 1.1) & (at < 1.8), np.nan, 1.0)  # noqa: E731
    until = compare(shop, working(shop, 1.7, {"dryer-on.contact": silent}))
    assert not until.state.model.fittings.power[0].known
    found = compare(shop, working(shop, 2.5, {"dryer-on.contact": silent}))
    assert found.state.model.fittings.power[0].known
    assert together(found) > 0.95


def test_an_overload_comes_and_goes() -> None:
    """4 m3/h, and 9 m3/h for three quarters of an hour each time."""
    shop = a_shop("a dryer that is too small")
    uses = between((0.2, 0.95), (2.3, 9.0))
    found = compare(shop, working(shop, 3.0, {"motor.contact": uses}))
    after = told_of(found, "dryer-dryer-overloaded")
    assert after == ["unacknowledged", "returned unacknowledged", "unacknowledged"]
    assert found.state.model.fittings.overloaded[0] > 0.9
    assert together(found) > 0.95


def step(before: float, after: float) -> Callable[[Array], Array]:
    """One value for 1.2 hours, then the other."""
    return lambda at: np.where(at < 1.2, before, after) + 0.01 * np.sin(50.0 * at)


# what makes 9 m3/h too much for a dryer whose plate says 10: by its table 6.5 to 7.5 are left
TOO_MUCH = [
    ("a dryer", "pipe-end.temperature", step(290.0, 320.0)),
    ("a dryer", "tank-gauge.pressure", step(7e5, 2e5)),
    ("a dryer in a warm cellar", "cellar.temperature", step(290.0, 323.0)),
]


@pytest.mark.parametrize(("name", "channel", "says"), TOO_MUCH)
def test_a_dryer_can_take_less(name: str, channel: str, says: Callable[[Array], Array]) -> None:
    shop = a_shop(name)
    before, found = (compare(shop, working(shop, hours, {channel: says})) for hours in (1.1, 2.2))
    assert before.state.model.fittings.overloaded[0] < 0.3
    assert found.state.model.fittings.overloaded[0] > 0.5
    assert told_of(found, "dryer-dryer-overloaded") == ["unacknowledged"]


def test_a_cellar_is_too_cold_for_a_dryer_and_is_not_any_more() -> None:
    """Cold for an hour, and warm again for more than the alarm's delay of one."""
    shop = a_shop("a dryer in a cellar")
    said: Says = {"cellar.temperature": lambda at: 278.0 - 3.0 * np.sin(2.0 * at) + 0.02 * at}
    found = compare(shop, working(shop, 3.0, said))
    after = told_of(found, "dryer-freeze-risk")
    assert after == ["unacknowledged", "returned unacknowledged"]
    assert together(found) > 0.95


def test_a_bowl_beyond_its_rated_flow_keeps_less() -> None:
    caught = []
    for name in ("contact and gauge", "a rated bowl"):
        shop = a_shop(name)
        found = compare(shop, working(shop, 3.0, {}, humid=True))
        bowl = found.state.stations.index("bowl")
        caught.append(float(np.median(found.state.model.ledger.shed[bowl])))
        assert together(found) > 0.95
    assert 0.0 < caught[1] < 0.9 * caught[0]


@pytest.mark.parametrize(("changed", "seconds"), [(False, 0), (True, 7), (True, 100)])
def test_a_cartridge_is_spent_and_changed(changed: bool, seconds: int) -> None:
    """Between two ticks, or at one."""
    shop = a_shop("a small cartridge")
    at_us = BEGUN_US + 2 * HOUR_US + seconds * SECOND_US
    entries = [Entry(1, at_us, at_us, Service("element changed", "beads"))] if changed else []
    found = compare(shop, working(shop, 2.1, {}), entries)
    after = told_of(found, "beads-desiccant-spent")
    assert after == ["unacknowledged", "returned unacknowledged"][: 1 + changed]
    holds = found.state.model.parameters.fittings.holds_kg
    full = found.state.model.fittings.charge >= holds * (1.0 - 1e-9)
    assert full.all() != changed
    assert together(found) > 0.95


def test_twin_beds_blow_off_their_share() -> None:
    shop = a_shop("twin beds")
    found = compare(shop, working(shop, 2.0, {}))
    air = found.state.model.air
    share = np.median(air.purged[0] / air.used)
    assert 0.1 < share < 0.25  # 17.5 % of 8 m3/h, of some 9 m3/h
    assert together(found) > 0.95


# after so many hours: how much colder than the room the coil is at least and at most, K
ICE = [(0.1, 10.0, 25.0), (0.3, 0.0, 12.0), (1.2, 0.0, 0.0), (2.0, 10.0, 25.0)]


@pytest.mark.parametrize(("hours", "least_k", "most_k"), ICE)
def test_ice_runs_out_and_is_renewed(hours: float, least_k: float, most_k: float) -> None:
    """While there is some, while its water warms, when that is as warm as the room, and anew."""
    shop = a_shop("a little ice")
    record = working(shop, hours, {})
    renewed_us = BEGUN_US + round(1.95 * HOUR_US)
    entries = [Entry(1, renewed_us, renewed_us, Service("element changed", "ice-coil"))]
    found = compare(shop, record, entries if hours > 1.95 else [])
    now = found.state.model.conditions.temperature_k
    colder = now[0] - now[found.state.stations.index("ice-coil")]
    assert least_k <= colder.min()
    assert colder.max() <= most_k
    assert np.ptp(colder) > 1.0 or most_k == 0.0
    assert together(found) > 0.9


@pytest.mark.parametrize("until", [2.7, 2.6945])
def test_a_transmitter_contradicts_the_line(until: float) -> None:
    """And what the alarm says is the last that it read: it still does so at the end, or ended to
    two ticks before."""
    shop = a_shop("a transmitter")
    noise = np.random.default_rng(3)

    def reads(at: Array) -> Array:
        wet = ((at > 1.2) & (at < 1.7)) | ((at > 2.4) & (at < until))
        return 276.0 + 24.0 * wet + noise.normal(0.0, 1.0, len(at))

    found = compare(shop, working(shop, 2.7, {"hygrometer.dew_point": reads}))
    after = told_of(found, "hygrometer-sensor-fault")
    assert after == ["unacknowledged", "returned unacknowledged", "unacknowledged"]
    assert "cannot be where dryer" in found.state.alarms["hygrometer-sensor-fault"].text
    assert together(found) > 0.95


def test_a_pressure_that_stays_moves_no_air() -> None:
    """Gauge and barometer change and their sum does not, but for rounding, while the riser's
    temperature wanders: how moist the air was that last left it is the same in both ways."""
    shop = a_shop("a transmitter")

    def flickers(at: Array) -> Array:
        return 3.3 * np.round(2.0 + 2.0 * np.sin(3000.0 * at))

    said: Says = {
        "motor.contact": np.zeros_like,
        "intake-air.temperature": lambda at: np.full_like(at, 293.0),
        "tank-gauge.pressure": lambda at: np.where(at < 1.1, 7e5, 6.5e5) + flickers(at),
        "intake-air.pressure": lambda at: 101_000.0 - flickers(at),
    }
    found = compare(shop, working(shop, 1.9, said))
    assert (found.state.model.air.used > 0.01).all()  # what left the tank as its pressure fell


def test_a_transmitter_falls_silent() -> None:
    shop = a_shop("a transmitter")

    def reads(at: Array) -> Array:
        return np.where((at > 1.2) & (at < 1.7), np.nan, 276.0 + 0.3 * np.sin(40.0 * at))

    found = compare(shop, working(shop, 2.6, {"hygrometer.dew_point": reads}))
    after = told_of(found, "hygrometer-sensor-fault")
    assert after == ["unacknowledged", "returned unacknowledged"]
    hour = found.state.sensed.observed["dryer"].hour
    assert hour is not None
    assert hour.seconds == pytest.approx(0.6 * 3600.0)
    assert together(found) > 0.95


@pytest.mark.parametrize("hours", [0.8, 1.3, 2.4])
def test_a_float_switch_contradicts_what_is_believed(hours: float) -> None:
    """Closed from early on, until it may be so: an outlet after it cannot be judged meanwhile."""
    shop = a_shop("a float switch")
    closed: Says = {"riser-float.contact": between((0.15, 9.0))}
    found = compare(shop, working(shop, hours, closed, humid=True))
    after = told_of(found, "riser-float-sensor-fault")
    assert after == ["unacknowledged", "returned unacknowledged"][: 1 + (hours > 1.0)]
    assert bool(told_of(found, "spray-gun-line-margin-low")) == (hours > 2.0)
    assert together(found) > 0.95


def test_liquid_in_a_vented_cell_is_told() -> None:
    shop = a_shop("a vented cell")
    noise = np.random.default_rng(3)

    def reads(at: Array) -> Array:
        wet = (at > 1.2) & (at < 1.7)
        return 0.03 + 0.9 * wet + 0.002 * noise.normal(0.0, 1.0, len(at))

    found = compare(shop, working(shop, 2.6, {"cell.relative_humidity": reads}))
    assert told_of(found, "cell-sensor-fault") == ["unacknowledged", "returned unacknowledged"]
    assert found.state.sensed.observed["bowl"].hour is not None
    assert together(found) > 0.95
