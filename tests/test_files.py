"""The project's files speak of no machine that they were written on."""

from __future__ import annotations

import re

import pytest

from tests.tree import ROOT, text_files

# Somebody's own folders. A Pi's system paths (/dev, /etc, /sys, /var) are meant.
MACHINE_PATHS = re.compile(r"(?<![\w.}/])/(?:work|root|home|Users)/[\w.]|/tmp/\w|\.pyenv")


def test_no_file_names_a_machine_path() -> None:
    found = [
        f"{path.relative_to(ROOT)}:{number}: {line.strip()}"
        for path in text_files()
        for number, line in enumerate(path.read_text(errors="replace").splitlines(), 1)
        if MACHINE_PATHS.search(line) and "MACHINE_PATHS" not in line
    ]
    assert not found


# Put together here, so that this file names none itself.
@pytest.mark.parametrize(
    "parts", [("in ", "work", "main"), ('"', "root", ".cache"), ("", "tmp", "v", "bin")]
)
def test_the_rule_knows_a_machine_path(parts: tuple[str, ...]) -> None:
    assert MACHINE_PATHS.search("/".join(parts))


@pytest.mark.parametrize("fine", ["/dev/gpiochip0", "tests/home/x", "/api/home/x"])
def test_the_rule_lets_other_paths_be(fine: str) -> None:
    assert not MACHINE_PATHS.search(fine)
