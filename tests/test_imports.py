"""Imports point one way: leaves, then physics and sensors, then the daemon, the API, the root."""

from __future__ import annotations

import ast
import importlib
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.tree import PACKAGES, ROOT

LEAVES = {"daemon.errors", "daemon.clock", "daemon.units", "daemon.unit_tables"}
# The composition root, and what starts it: they alone see everything.
COMPOSITION = {"daemon.compose", "daemon.demo", "daemon.__main__"}

HARDWARE = (
    "adafruit_",
    "board",
    "busio",
    "digitalio",
    "gpiod",
    "lgpio",
    "RPi",
    "smbus",
    "pymodbus",
    "serial",
    "usb",
)


def name_of(path: Path) -> str:
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


SOURCES = {
    name_of(path): path for package in PACKAGES for path in sorted((ROOT / package).rglob("*.py"))
}


def imports_of(tree: ast.AST) -> Iterator[str]:
    """Modules that a piece of a source file imports, a submodule rather than its package."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            assert node.module is not None
            for alias in node.names:
                whole = f"{node.module}.{alias.name}"
                yield whole if whole in SOURCES else node.module


def package_of(module: str) -> str:
    return module.partition(".")[0]


def layer(module: str) -> int:
    if module in LEAVES:
        return 0
    if module.startswith(("daemon.moisture", "sensors")):
        return 1
    if module in COMPOSITION:
        return 4
    return 3 if package_of(module) == "api" else 2


def against_the_grain(module: str, imported: str) -> bool:
    """Whether one of the project's modules may not import another."""
    if imported in PACKAGES:  # the bare package holds nothing
        return False
    if layer(module) == layer(imported) == 1:
        return package_of(imported) != package_of(module)  # physics and sensors are strangers
    return layer(imported) > layer(module)


@pytest.mark.parametrize("module", sorted(SOURCES))
def test_imports_point_one_way(module: str) -> None:
    imported = set(imports_of(ast.parse(SOURCES[module].read_text(encoding="utf-8"))))
    ours = {name for name in imported if package_of(name) in PACKAGES}
    assert not [name for name in sorted(ours) if against_the_grain(module, name)]


@pytest.mark.parametrize(
    ("module", "imported"),
    [
        ("daemon.errors", "daemon.clock.x"),
        ("daemon.moisture.line", "daemon.site.types"),
        ("daemon.moisture.line", "sensors.reading"),
        ("sensors.bme280", "daemon.moisture.air"),
        ("sensors.bme280", "daemon.store"),
        ("daemon.advance", "api.app"),
        ("api.app", "daemon.compose"),
    ],
)
def test_the_rule_refuses_what_points_back(module: str, imported: str) -> None:
    assert against_the_grain(module, imported)


@pytest.mark.parametrize("module", sorted(m for m in SOURCES if m.startswith("sensors")))
def test_no_sensor_imports_a_hardware_library_when_it_is_loaded(module: str) -> None:
    tree = ast.parse(SOURCES[module].read_text(encoding="utf-8"))
    for node in ast.walk(tree):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            node.body = []  # an import inside runs when the part is opened
        elif isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING":
            node.body = []
    assert not [name for name in imports_of(tree) if name.startswith(HARDWARE)]


# What arrays in, arrays out can do without: clocks, files, the network, chance, a log.
IMPURE = {"datetime", "io", "logging", "os", "pathlib", "random", "socket", "threading", "time"}


def test_the_physics_needs_numpy_alone_and_is_pure() -> None:
    allowed = (sys.stdlib_module_names - IMPURE) | {"numpy", *PACKAGES}
    for module in (m for m in SOURCES if m.startswith("daemon.moisture")):
        imported = imports_of(ast.parse(SOURCES[module].read_text(encoding="utf-8")))
        assert {package_of(name) for name in imported} <= allowed, module


@pytest.mark.parametrize("package", PACKAGES)
def test_a_package_comes_from_this_tree(package: str) -> None:
    # Another distribution's top-level "daemon" would win over an editable install.
    file = importlib.import_module(package).__file__
    assert file is not None
    assert Path(file).resolve().parent == ROOT / package
