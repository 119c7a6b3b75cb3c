"""The wiring notes: cautions first, pins that exist, and examples that the drivers accept."""

from __future__ import annotations

import json
import re
import tomllib
from typing import Any

import pytest

import sensors.drivers  # noqa: F401  # fills the registry
from sensors.registry import DRIVERS, REQUIRED, SensorConfig
from tests.daemon.shops import SITE, site
from tests.tree import ROOT

TEXT = (ROOT / "deploy" / "wiring.md").read_text(encoding="utf-8")
SECTIONS = [part.splitlines()[0] for part in TEXT.split("\n## ")[1:]]
BLOCKS = [tomllib.loads(block) for block in re.findall(r"```toml\n(.*?)```", TEXT, re.DOTALL)]
EXAMPLES: list[dict[str, Any]] = [table for block in BLOCKS for table in block.get("sensor", [])]

# The 40-pin header of a Raspberry Pi, from its documentation (from memory).
HEADER = {
    2: 3, 3: 5, 4: 7, 14: 8, 15: 10, 17: 11, 18: 12, 27: 13, 22: 15, 23: 16, 24: 18, 10: 19, 9: 21,
    25: 22, 11: 23, 8: 24, 7: 26, 0: 27, 1: 28, 5: 29, 6: 31, 12: 32, 13: 33, 19: 35, 16: 36,
    26: 37, 20: 38, 21: 40,
}  # fmt: skip
POWER_3V3, POWER_5V = {1, 17}, {2, 4}
GROUND = {6, 9, 14, 20, 25, 30, 34, 39}


def test_the_cautions_come_first() -> None:
    assert SECTIONS[0] == "Read this first"
    first, second = TEXT.index("\n- "), TEXT.index("\n- ", TEXT.index("\n- ") + 1)
    assert "unless rated for that zone" in " ".join(TEXT[first:second].split())
    words = " ".join(TEXT.split("\n## ")[1].split())
    for caution in (
        "Isolate and lock it before touching",
        "put no valve between it and its safety valve",
        "rated above the safety valve's setting",
        "never towards skin",
        "Vent before unscrewing a bowl",
        "an isolated auxiliary contact, fitted by an electrician",
        "never to the drain",
        "Not for breathing air",
        "speaks of water only",
    ):
        assert caution in words


def test_every_block_is_of_sensors_or_the_signal() -> None:
    (signal,) = (block["signal"] for block in BLOCKS if "sensor" not in block)
    lines = "\n".join(f"{key} = {json.dumps(value)}" for key, value in signal.items())
    read = site(f"{SITE}\n[signal]\n{lines}\n").signal
    assert read is not None
    # the pin in its section's table is that of the line
    section = TEXT.split("\n## Lamp or buzzer\n")[1]
    assert f"GPIO {read.line}, pin {HEADER[read.line]} " in section


def test_every_driver_has_an_example() -> None:
    assert {example["driver"] for example in EXAMPLES} == set(DRIVERS)


@pytest.mark.parametrize("example", EXAMPLES, ids=[example["id"] for example in EXAMPLES])
def test_an_example_is_what_its_driver_asks_for(example: dict[str, Any]) -> None:
    driver = DRIVERS[example["driver"]]
    said = {key: value for key, value in example.items() if key not in ("id", "driver")}
    assert set(said) <= {key.name for key in driver.keys}
    missing = {key.name for key in driver.keys if key.default is REQUIRED} - set(said)
    assert not missing
    settings = {
        key.name: key.read(said[key.name]) if key.name in said else key.default
        for key in driver.keys
    }
    config = SensorConfig(example["id"], driver.name, settings)
    assert driver.clashes(config) == ()
    assert driver.channels(config)


def test_every_driver_has_an_example_and_every_key_is_told() -> None:
    assert {example["driver"] for example in EXAMPLES} == set(DRIVERS)
    for driver in DRIVERS.values():
        for key in driver.keys:
            assert re.search(rf"(?<![\w-]){key.name}(?![\w-])", TEXT), f"{driver.name} {key.name}"


def test_the_examples_are_one_shops_and_share_no_place() -> None:
    # The converter's and the bus's addresses too: all of them could be on one Pi.
    places: list[str] = []
    for example in EXAMPLES:
        driver = DRIVERS[example["driver"]]
        settings = {
            key.name: key.read(example[key.name]) if key.name in example else key.default
            for key in driver.keys
        }
        places += driver.occupies(SensorConfig(example["id"], driver.name, settings))
    assert len(places) == len(set(places))
    names = [example["id"] for example in EXAMPLES]
    assert len(names) == len(set(names))


def test_pins_are_those_of_the_header() -> None:
    pairs = re.findall(r"GPIO (\d+)(?: \||,) pin (\d+)", TEXT)
    assert len(pairs) >= 11
    for line, pin in pairs:
        assert HEADER[int(line)] == int(pin), f"GPIO {line}"
    for words, pins in (("3.3 V on", POWER_3V3), ("5 V on", POWER_5V), ("ground on", GROUND)):
        found = re.findall(rf"(?<![\d.]){re.escape(words)} pin (\d+)", TEXT)
        assert found
        assert {int(pin) for pin in found} <= pins


def test_a_line_has_one_use() -> None:
    rows = re.findall(r"^\| [^|]+ \| GPIO (\d+) \| pin", TEXT, re.MULTILINE)
    assert len(rows) == len(set(rows)) == 9
    used = {str(example["line"]) for example in EXAMPLES if isinstance(example.get("line"), int)}
    assert used <= set(rows)


def test_resistors_give_the_voltages_that_are_stated() -> None:
    # Ohm's law, and the converter's limit: VDD + 0.3 V (ADS1115 data sheet SBAS444).
    divider = 20 / (10 + 20)
    assert f"{divider:.4f}" in TEXT
    assert 4.5 * divider == pytest.approx(3.0)
    assert 5.25 * divider < 3.6
    for amperes, volts in ((0.004, 0.6), (0.020, 3.0)):
        assert amperes * 150 == pytest.approx(volts)
    assert 0.021 * 150 < 3.6 < 0.020 * 250
    assert (24 - 3.6) / 2200 < 0.010  # amperes into the input; 10 mA is its limit
    diode_v = 1.3  # an optocoupler's, from memory
    assert pytest.approx(0.010, rel=0.05) == (24 - diode_v) / 2200
