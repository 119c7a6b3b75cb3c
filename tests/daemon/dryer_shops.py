"""Invented shops with dryers, rated separators, ice baths and measured dew points."""

from __future__ import annotations

from importlib import resources

from tests.daemon.shops import SITE

REGULATOR = '[[station]]\nid = "booth-regulator"\nkind = "regulator"\nafter = "bowl"\n'
INTAKE = '[[station]]\nid = "intake"\n'
GUN = '[[outlet]]\nid = "spray-gun"\nafter = "booth-regulator"\n'
ON = '[[sensor]]\nid = "dryer-on"\ndriver = "contact"\nline = 27\n\n'
TRANSMITTER = """\
[[sensor]]
id = "hygrometer"
driver = "dew-point-loop"
address = 0x48
input = 2
range = "-60 to 40 degC"
give_or_take = "1 K"

"""
CELL = '[[sensor]]\nid = "cell"\ndriver = "vented-cell"\naddress = 0x77\n\n'
ROOM = '[[sensor]]\nid = "cellar"\ndriver = "ds18b20"\nserial = "28-00000a1b2c3e"\n\n'
REFRIGERATED = """\
[[station]]
id = "dryer"
kind = "refrigerated"
after = "bowl"
rated_flow = "{rated}"
{more}trap = {{ drain = "float", capacity = "100 ml" }}

"""
BEADS = (
    '[[station]]\nid = "beads"\nkind = "desiccant"\nafter = "{after}"\nmass = "{mass}"\n{more}\n'
)
TWIN = """\
[[station]]
id = "twin"
kind = "desiccant"
after = "{after}"
rated_flow = "{rated}"
{more}
"""
BATH = """\
[[station]]
id = "ice-coil"
kind = "cooler"
after = "{after}"
ice = "{ice}"
trap = {{ capacity = "200 ml", drain_at = "150 ml" }}

"""
SECOND_TANK = """\
[[station]]
id = "dry-tank"
kind = "receiver"
after = "{after}"
volume = "40 L"
trap = {{ capacity = "2 L", drain_at = "300 ml" }}

[[outlet]]
id = "blast-pot"
after = "dry-tank"
share = 0.5

"""


def _before_regulator(stations: str, last: str) -> str:
    """Birch Works with these stations between its bowl and its regulator."""
    return SITE.replace(REGULATOR, stations + REGULATOR.replace("bowl", last))


def _measured(text: str, sensor: str, said: str, station: str = "booth-regulator") -> str:
    """A site's text with the dew point of a station's air measured."""
    name = f'id = "{station}"\n'
    text = text.replace(name, f'{name}measured_dew_point = "{said}"\n', 1)
    return text.replace(INTAKE, sensor + INTAKE, 1)


_SWITCHED = _before_regulator(
    REFRIGERATED.format(rated="20 m3/h", more='powered = "dryer-on.contact"\n'), "dryer"
).replace(INTAKE, ON + INTAKE, 1)
_ALL = (
    SITE.replace(
        REGULATOR,
        BATH.format(after="bowl", ice="0.3 kg")
        + REFRIGERATED.format(rated="9 m3/h", more='powered = "dryer-on.contact"\n').replace(
            '"bowl"', '"ice-coil"'
        )
        + TWIN.format(after="dryer", rated="6 m3/h", more="off_when_closed = true\n")
        + BEADS.format(after="twin", mass="20 g", more="")
        + REGULATOR.replace("bowl", "beads"),
    )
    .replace('id = "bowl"\n', 'id = "bowl"\nrated_flow = "4 m3/h"\n')
    .replace(INTAKE, ON + INTAKE, 1)
)

DRYER_SHOPS: dict[str, str] = {
    "the demo's line": resources.files("daemon")
    .joinpath("demo-site.toml")
    .read_text(encoding="utf-8"),
    "a dryer": _before_regulator(REFRIGERATED.format(rated="10 m3/h", more=""), "dryer"),
    "a dryer that is switched": _SWITCHED,
    "a dryer that is too small": _before_regulator(
        REFRIGERATED.format(rated="4 m3/h", more='around = "30 degC"\n'), "dryer"
    ),
    "a dryer in a cellar": _before_regulator(
        REFRIGERATED.format(rated="6 m3/h", more='around = "cellar.temperature"\n'), "dryer"
    ).replace(INTAKE, ROOM + INTAKE, 1),
    "a dryer off at night": _before_regulator(
        REFRIGERATED.format(rated="10 m3/h", more="off_when_closed = true\n"), "dryer"
    ),
    "a dryer out of service": _before_regulator(
        REFRIGERATED.format(rated="10 m3/h", more="in_service = false\n"), "dryer"
    ),
    "a dryer before the tank": SITE.replace(
        '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "intake"\n',
        REFRIGERATED.format(rated="8 m3/h", more="").replace("bowl", "intake")
        + '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "dryer"\n',
    ),
    "a rated bowl": SITE.replace('id = "bowl"\n', 'id = "bowl"\nrated_flow = "4 m3/h"\n'),
    "a cartridge": _before_regulator(BEADS.format(after="bowl", mass="0.2 kg", more=""), "beads"),
    "a small cartridge": _before_regulator(
        BEADS.format(after="bowl", mass="20 g", more='used_at_start = "50 %"\n'), "beads"
    ),
    "a switched cartridge": _before_regulator(
        BEADS.format(after="riser", mass="50 g", more='powered = "dryer-on.contact"\n'), "beads"
    )
    .replace('after = "bowl"', 'after = "riser"')
    .replace(INTAKE, ON + INTAKE, 1),
    "twin beds": _before_regulator(TWIN.format(after="bowl", rated="8 m3/h", more=""), "twin"),
    "small twin beds": _before_regulator(
        TWIN.format(after="bowl", rated="3 m3/h", more='powered = "dryer-on.contact"\n'), "twin"
    ).replace(INTAKE, ON + INTAKE, 1),
    "twin beds before the tank": SITE.replace(
        '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "intake"\n',
        TWIN.format(after="intake", rated="8 m3/h", more="")
        + '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "twin"\n',
    ),
    "twin beds between tanks": SITE.replace(
        GUN,
        TWIN.format(after="riser", rated="5 m3/h", more="")
        + SECOND_TANK.format(after="twin")
        + GUN
        + "share = 0.5\n",
    ),
    "an ice bath": _before_regulator(BATH.format(after="bowl", ice="10 kg"), "ice-coil"),
    "a little ice": _before_regulator(BATH.format(after="bowl", ice="0.15 kg"), "ice-coil"),
    "a transmitter": _measured(
        _before_regulator(REFRIGERATED.format(rated="10 m3/h", more=""), "dryer"),
        TRANSMITTER,
        "hygrometer.dew_point",
        "dryer",
    ),
    "a vented cell": _measured(SITE, CELL, "cell", "bowl"),
    "several dryers": _ALL,
    "several dryers, measured": _measured(_ALL, TRANSMITTER, "hygrometer.dew_point", "twin"),
}
