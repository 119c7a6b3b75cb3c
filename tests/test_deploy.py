"""The commands that set a fresh machine up, with a Python that only pretends."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
import tomllib
from collections.abc import Mapping
from pathlib import Path

import pytest
from packaging.requirements import Requirement

from tests.tree import ROOT

DEPLOY = ROOT / "deploy"
LOCKS = ("requirements.lock", "requirements-test.lock")

# Stands in for a Python: makes no environment and installs nothing, but writes down that it was
# asked to. Whatever else it is asked (its version, a digest) the real one answers.
PRETENDER = """#!/bin/sh
case "$*" in
*"import ensurepip"*) exit ${NO_VENV:-0} ;;
"-m venv"*)
    for folder; do :; done
    mkdir -p "$folder/bin" && cp "$0" "$folder/bin/python" && touch "$folder/pyvenv.cfg"
    printf '#!/bin/sh\\necho "dripleg $*"\\n' >"$folder/bin/dripleg"
    chmod +x "$folder/bin/dripleg"
    echo "venv" >>"$LOG" ;;
"-m pip"*) echo "pip $*" >>"$LOG"; exit ${PIP_FAILS:-0} ;;
"-m ${TOOL_FAILS:-none} "*) exit 1 ;;
"-m"*) echo "$*" >>"$LOG" ;;
*) exec REAL "$@" ;;
esac
"""


class Checkout:
    """A copy of the deploy folder on a machine with stand-ins for what would change a real one."""

    def __init__(self, folder: Path) -> None:
        self.root = folder / "checkout"
        self.log = folder / "log"
        self.programs = folder / "programs"
        self.programs.mkdir()
        shutil.copytree(DEPLOY, self.root / "deploy")
        shutil.copy(ROOT / "pyproject.toml", self.root)
        self.program("python3", PRETENDER.replace("REAL", sys.executable))
        self.program("id", "#!/bin/sh\necho 1000\n")  # not root, whoever runs the tests
        self.program("mosquitto", "#!/bin/sh\n")
        self.program("apt-get", '#!/bin/sh\necho "apt-get $*" >>"$LOG"\n')  # installs nothing

    def program(self, name: str, text: str) -> None:
        path = self.programs / name
        path.write_text(text)
        path.chmod(0o755)

    def run(
        self, command: str, *options: str, **environment: str
    ) -> subprocess.CompletedProcess[str]:
        """Its outcome, with only the stand-ins and the system's own small programs on the PATH."""
        settings: Mapping[str, str] = {
            "PATH": f"{self.programs}:/usr/bin:/bin",
            "LOG": str(self.log),
            **environment,
        }
        return subprocess.run(
            [str(self.root / "deploy" / command), *options],
            env=settings,
            capture_output=True,
            text=True,
            timeout=60,
            check=False,
        )

    def done(self) -> list[str]:
        lines = self.log.read_text().splitlines() if self.log.exists() else []
        self.log.unlink(missing_ok=True)
        return lines


@pytest.fixture
def checkout(tmp_path: Path) -> Checkout:
    return Checkout(tmp_path)


def test_the_first_start_installs_the_lock_and_the_project_then_runs_the_demo(
    checkout: Checkout,
) -> None:
    outcome = checkout.run("demo", "--port", "8123", "--for", "90s")
    assert (outcome.returncode, outcome.stdout) == (0, "dripleg demo --port 8123 --for 90s\n")
    made, locked, project = checkout.done()
    assert made == "venv"
    assert locked.endswith(f"--requirement {checkout.root}/deploy/requirements.lock")
    assert "--no-deps --no-build-isolation --editable" in project
    assert project.endswith(str(checkout.root))


def test_the_second_start_installs_nothing(checkout: Checkout) -> None:
    checkout.run("demo")
    checkout.done()
    outcome = checkout.run("demo")
    assert (outcome.returncode, outcome.stdout, outcome.stderr) == (0, "dripleg demo\n", "")
    assert checkout.done() == []


def test_a_changed_lock_is_installed_into_the_same_environment(checkout: Checkout) -> None:
    checkout.run("demo")
    checkout.done()
    with (checkout.root / "deploy" / "requirements.lock").open("a") as lock:
        lock.write("one-more==1.0\n")
    checkout.run("demo")
    assert [line.split()[0] for line in checkout.done()] == ["pip", "pip"]


def test_an_installation_that_failed_is_tried_again(checkout: Checkout) -> None:
    outcome = checkout.run("demo", PIP_FAILS="1")
    assert outcome.returncode == 1
    assert "Could not install: see above." in outcome.stderr
    assert "dripleg" not in outcome.stdout
    checkout.done()
    assert checkout.run("demo").returncode == 0
    assert [line.split()[0] for line in checkout.done()] == ["pip", "pip"]


def test_a_folder_that_is_no_environment_is_left_alone(checkout: Checkout) -> None:
    mine = checkout.root / "mine"
    mine.mkdir()
    (mine / "letter.txt").write_text("keep me")
    outcome = checkout.run("demo", DRIPLEG_VENV=str(mine))
    assert outcome.returncode == 1
    assert f"{mine} is there and is no virtual environment" in outcome.stderr
    assert (mine / "letter.txt").read_text() == "keep me"
    assert checkout.done() == []


def test_another_folder_can_be_named(checkout: Checkout) -> None:
    elsewhere = checkout.root / "elsewhere"
    assert checkout.run("demo", DRIPLEG_VENV=str(elsewhere)).returncode == 0
    assert (elsewhere / "pyvenv.cfg").exists()
    assert not (checkout.root / ".venv").exists()


def test_a_newer_python_under_another_name_is_found(checkout: Checkout) -> None:
    shutil.move(checkout.programs / "python3", checkout.programs / "python3.12")
    checkout.program("python3", "#!/bin/sh\nexit 1\n")
    assert checkout.run("demo").returncode == 0
    assert checkout.done()[0] == "venv"


def test_without_a_new_enough_python_it_says_what_to_install(checkout: Checkout) -> None:
    for name in ("python3", "python3.13", "python3.12", "python3.11"):
        checkout.program(name, "#!/bin/sh\nexit 1\n")
    outcome = checkout.run("demo")
    assert outcome.returncode == 1
    assert "dripleg needs Python 3.11 or newer" in outcome.stderr
    assert "sudo apt-get install python3 python3-venv" in outcome.stderr
    assert "virtual environment in" not in outcome.stderr


def test_a_python_without_its_venv_module_is_named_with_its_package(checkout: Checkout) -> None:
    outcome = checkout.run("demo", NO_VENV="1")
    assert outcome.returncode == 1
    package = f"python{sys.version_info[0]}.{sys.version_info[1]}-venv"
    assert f"sudo apt-get install {package}" in outcome.stderr
    assert checkout.done() == []


def test_root_on_debian_gets_the_venv_module_installed(checkout: Checkout) -> None:
    checkout.program("id", "#!/bin/sh\necho 0\n")
    outcome = checkout.run("demo", NO_VENV="1")
    assert outcome.returncode == 1  # the stand-in installed nothing
    update, install = checkout.done()
    assert update.startswith("apt-get update")
    assert re.fullmatch(r"apt-get install .*python3\.\d+-venv", install)


def test_the_tests_run_every_check_in_order(checkout: Checkout) -> None:
    outcome = checkout.run("test")
    assert outcome.returncode == 0, outcome.stderr
    done = [line for line in checkout.done() if not line.startswith(("pip", "venv"))]
    assert done == [
        "-m ruff check .",
        "-m ruff format --check .",
        "-m mypy --strict",
        "-m pytest --numprocesses=auto",
    ]


@pytest.mark.parametrize("tool", ["ruff check", "ruff format", "mypy", "pytest"])
def test_a_check_that_fails_fails_the_whole(checkout: Checkout, tool: str) -> None:
    assert checkout.run("test", TOOL_FAILS=tool).returncode == 1


def test_the_tests_name_what_is_missing_to_who_may_not_install_it(checkout: Checkout) -> None:
    script = checkout.root / "deploy" / "test"
    text = script.read_text().replace("needed=(mosquitto", "needed=(no-such-broker:a-broker cat")
    script.write_text(text)
    outcome = checkout.run("test")
    assert outcome.returncode == 1
    assert "The tests need programs that are not here: a-broker" in outcome.stderr
    assert "sudo apt-get install a-broker" in outcome.stderr
    assert checkout.done() == []


def test_ci_does_what_a_newcomer_does() -> None:
    lines = (ROOT / ".ci" / "run").read_text().splitlines()
    commands = [line for line in lines if line and not line.startswith("#")]
    assert commands == [
        "set -euo pipefail",
        'exec "$(dirname "${BASH_SOURCE[0]}")/../deploy/test"',
    ]


COMMANDS = [
    path
    for path in sorted([*DEPLOY.iterdir(), ROOT / ".ci" / "run"])
    if path.is_file() and path.read_bytes().startswith(b"#!")
]


@pytest.mark.parametrize("path", COMMANDS, ids=lambda path: path.name)
def test_a_command_can_be_run(path: Path) -> None:
    assert os.access(path, os.X_OK)


SHELL = [path for path in COMMANDS if b"bash" in path.read_bytes().splitlines()[0]]


@pytest.mark.parametrize("path", [*SHELL, DEPLOY / "environment.sh"], ids=lambda path: path.name)
def test_a_shell_script_is_well_formed(path: Path) -> None:
    outcome = subprocess.run(["bash", "-n", str(path)], capture_output=True, text=True, check=False)
    assert (outcome.returncode, outcome.stderr) == (0, "")


def locked(name: str) -> dict[str, Requirement]:
    lines = (DEPLOY / name).read_text().splitlines()
    requirements = [Requirement(line) for line in lines if not line.startswith("#")]
    return {requirement.name: requirement for requirement in requirements}


def version_of(requirement: Requirement) -> str:
    (specifier,) = requirement.specifier
    assert specifier.operator == "=="
    return specifier.version


def declared(*extras: str) -> list[Requirement]:
    text = (ROOT / "pyproject.toml").read_text()
    described = tomllib.loads(text)
    lines = [*described["build-system"]["requires"], *described["project"]["dependencies"]]
    for extra in extras:
        lines += described["project"]["optional-dependencies"][extra]
    return [Requirement(line) for line in lines]


@pytest.mark.parametrize(
    ("lock", "extras"), [(LOCKS[0], ("pi",)), (LOCKS[1], ("pi", "modbus", "test"))]
)
def test_a_lock_covers_every_dependency(lock: str, extras: tuple[str, ...]) -> None:
    pins = locked(lock)
    for requirement in declared(*extras):
        assert requirement.name in pins, f"run deploy/lock: {requirement} is not in {lock}"
        version = version_of(pins[requirement.name])
        assert requirement.specifier.contains(version), f"run deploy/lock: {requirement}, {version}"


def test_the_tests_run_what_runs() -> None:
    runtime, test = (
        {name: version_of(pin) for name, pin in locked(lock).items()} for lock in LOCKS
    )
    assert {name: test.get(name) for name in runtime} == runtime


@pytest.mark.parametrize("lock", LOCKS)
def test_a_lock_is_pins_and_nothing_else(lock: str) -> None:
    pin = re.compile(r'[a-z0-9-]+==[\w.!+]+(; [\w"=. ]+)?')
    lines = (DEPLOY / lock).read_text().splitlines()[1:]
    names = [line.partition("==")[0] for line in lines]
    assert names == sorted(set(names))
    assert not [line for line in lines if not pin.fullmatch(line)]


def test_the_gpio_library_is_for_a_pi_and_for_tests_on_linux() -> None:
    runtime, test = (locked(lock)["gpiod"].marker for lock in LOCKS)
    assert runtime is not None
    assert test is not None
    on_a_pi = {"sys_platform": "linux", "platform_machine": "aarch64"}
    elsewhere = {"sys_platform": "linux", "platform_machine": "x86_64"}
    assert [runtime.evaluate(place) for place in (on_a_pi, elsewhere)] == [True, False]
    assert [test.evaluate(place) for place in (on_a_pi, elsewhere)] == [True, True]
    assert not test.evaluate({"sys_platform": "darwin"})
