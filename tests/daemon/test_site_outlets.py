"""The outlets' own sensors in a site file."""

from __future__ import annotations

import pytest

from daemon.check import explain
from daemon.errors import SiteError
from daemon.moisture.model import Model
from daemon.site.types import Site
from tests.daemon.outlet_shops import AROUND, AT_GUN, GUN, a_shop
from tests.daemon.shops import SITE, site


def outlet_with(text: str) -> Site:
    return site(SITE.replace('\n[[station]]\nid = "intake"\n', AROUND, 1).replace(GUN, GUN + text))


def test_the_sensors_at_an_outlet_are_read_with_their_widths() -> None:
    (gun,) = outlet_with(AT_GUN).line.outlets
    assert gun.air_temperature is not None
    assert gun.air_humidity is not None
    assert gun.slab is not None
    assert gun.surface is not None
    assert gun.air_temperature.channel == "booth-air.temperature"
    assert gun.air_humidity.channel == "booth-air.relative_humidity"
    assert gun.slab.channel == "floor.temperature"
    assert (gun.surface.channel, gun.surface.give_or_take > 0) == ("panel.temperature", True)
    assert not outlet_with(AT_GUN).without_effect


def test_the_model_holds_them_with_a_bias_each() -> None:
    model = Model(outlet_with(AT_GUN).line)
    for channel in ("booth-air.temperature", "booth-air.relative_humidity", "floor.temperature"):
        assert channel in model.plan.channels
    assert len(set(model.plan.channels)) == len(model.plan.channels)


def test_a_sensor_may_serve_a_station_and_an_outlet() -> None:
    model = Model(outlet_with('slab = "pipe-end.temperature"\n').line)
    assert model.plan.channels.count("pipe-end.temperature") == 1


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('slab = "floor.humidity"\n', 'the sensor "floor" gives no "humidity"'),
        ('slab = "booth-air.pressure"\n', "gives a pressure, but a temperature belongs here"),
        ('slab = "8 degC"\n', "is measured or left out: name a channel"),
        ('surface = "panel"\n', 'write "panel.temperature"'),
        ("surface = 20\n", "must be text in quotes"),
        ('surfaces = "panel.temperature"\n', 'did you mean "surface"?'),
    ],
)
def test_what_cannot_stand_at_an_outlet_is_told_in_words(text: str, words: str) -> None:
    with pytest.raises(SiteError) as wrong:
        outlet_with(text)
    assert len(wrong.value.problems) == 1
    assert words in str(wrong.value)


def test_check_tells_what_an_outlet_is_judged_by() -> None:
    told = " ".join(explain(outlet_with(AT_GUN + 'work = "solvent-borne"\n')).split())
    assert "coldest under it sensor floor.temperature" in told
    assert "surface sensor panel.temperature" in told
    assert "margins asked for line 5 K (for solvent-borne work), surface 3 K" in told
    guessed = " ".join(explain(site()).split())
    assert "coldest under it 4 K below the air around, give or take 4 K (not said)" in guessed
    assert "margins asked for line 10 K (not said)" in guessed
    powder = " ".join(explain(a_shop(work="powder", more='line_margin = "12 K"\n')).split())
    assert "margins asked for line 12 K " in powder
    assert "surface 3 K" not in powder
