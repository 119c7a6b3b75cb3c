"""How long cartridges and ice last, as a replay sums it up. Shops invented."""

from __future__ import annotations

import pytest

from daemon.advance import Core
from daemon.replay import replay, summarise
from tests.daemon.shops import SITE, flat, site, working

BOWL = 'kind = "coalescer"\nafter = "riser"\ntrap = { capacity = "120 ml", drain_at = "60 ml" }'


def lasts(instead: str, ticks: int = 1080) -> dict[str, float | None]:
    """Of the bowl, after three hours of work with something else in its place."""
    assert BOWL in SITE
    shop = site(SITE.replace(BOWL, instead))
    core = Core(shop)
    summary = summarise(core, replay(core, flat(list(working(shop, ticks))), []), [])
    found: dict[str, float | None] = summary["lasts_h"]["bowl"]
    return found


def test_a_cartridge_lasts_twice_as_long_when_it_is_twice_as_large() -> None:
    one = lasts('kind = "desiccant"\nafter = "riser"\nmass = "2 kg"')
    two = lasts('kind = "desiccant"\nafter = "riser"\nmass = "4 kg"')
    assert one["p05"] is not None
    assert one["p50"] is not None
    assert two["p50"] is not None
    assert one["p95"] is not None
    assert one["p05"] < one["p50"] < one["p95"]
    # three hours have gone: what is left of 240 g is less than half of what is left of 480 g
    assert two["p50"] == pytest.approx(2.0 * one["p50"] + 3.0, rel=0.02)


def test_five_kilograms_of_ice_last_as_long_as_their_heat_of_melting_says() -> None:
    """Some 75 L/min from 18 to 3 degC: about 27 W and 10 W of the room's: 13 h for 1.7 MJ, three
    of them gone."""
    found = lasts('kind = "cooler"\nafter = "riser"\nice = "5 kg"')
    assert found["p50"] is not None
    assert 7.0 < found["p50"] < 13.0


def test_what_is_not_used_lasts_longer_than_anybody_plans() -> None:
    found = lasts('kind = "desiccant"\nafter = "riser"\nmass = "2 kg"\nin_service = false', 120)
    assert found == {"p05": None, "p50": None, "p95": None}


def test_a_line_without_them_has_nothing_that_runs_out() -> None:
    shop = site()
    core = Core(shop)
    summary = summarise(core, replay(core, flat(list(working(shop, 20))), []), [])
    assert summary["lasts_h"] == {}
