"""The command line: `dripleg`, which is also `python -m daemon`."""

from __future__ import annotations

import argparse
import io
import signal
import sys
import threading
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from daemon.errors import DriplegError

if TYPE_CHECKING:
    from daemon.site.types import Site
    from sensors.registry import Hardware

EXIT_OK, EXIT_BAD_INPUT, EXIT_FAILED = 0, 2, 1
EXIT_INTERRUPTED = 130  # as shells have it for Ctrl-C


def parser() -> argparse.ArgumentParser:
    """All commands and their options."""
    top = argparse.ArgumentParser(
        prog="dripleg", description="Keeps watch over the water in a shop's compressed air."
    )
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")

    demo = commands.add_parser("demo", help="a make-believe shop, sped up, on emulated parts")
    demo.add_argument("--port", type=int, default=8080, help="where the API listens (8080)")
    demo.add_argument("--for", dest="length", metavar="TIME", help='stop by itself, after "90s"')
    demo.add_argument("--broker", metavar="HOST:PORT", help="an MQTT broker; none without it")
    demo.add_argument("--speed", type=float, default=120.0, help="shop seconds a second (120)")

    run = commands.add_parser("run", help="the daemon")
    run.add_argument("site", type=Path, metavar="SITE", help="the site file")
    run.add_argument("--store", type=Path, help="the database (beside the site file)")
    run.add_argument("--verbose", action="store_true", help="log more")

    check = commands.add_parser("check", help="explain the site file, read every sensor once")
    check.add_argument("site", type=Path, metavar="SITE", help="the site file")
    check.add_argument("--watch", action="store_true", help="read them again until Ctrl-C")
    check.add_argument("--no-sensors", action="store_true", help="explain the file alone")
    check.add_argument("--salt", metavar="SENSOR", help="check a humidity sensor over wet salt")
    check.add_argument("--for", dest="length", default="10 min", metavar="TIME", help="with --salt")
    check.add_argument("--by", default="", help="initials, with --salt")
    check.add_argument("--store", type=Path, help="the database (beside the site file)")

    _replay_options(commands.add_parser("replay", help="recompute from recorded readings"))
    _weekly_options(commands.add_parser("weekly", help="the moisture log of a week"))

    drained = commands.add_parser("drained", help="record a drain from a shell")
    drained.add_argument("site", type=Path, metavar="SITE", help="the site file")
    drained.add_argument("trap", metavar="TRAP", help="the trap's name")
    drained.add_argument("--volume", help='what came out, like "380 ml"')
    drained.add_argument("--empty", action="store_true", help="opened and found empty")
    drained.add_argument("--partly", action="store_true", help="some was left")
    drained.add_argument("--at", metavar="TIME", help="when, like 2026-03-02T17:10:00Z (now)")
    drained.add_argument("--by", default="", help="initials")
    drained.add_argument("--look", default="", help="clear, milky, oily or rusty")
    drained.add_argument("--store", type=Path, help="the database (beside the site file)")
    key = commands.add_parser("key", help="make, list and end keys for phones and programs")
    key.add_argument("site", type=Path, metavar="SITE", help="the site file")
    key.add_argument(
        "action", choices=("make", "list", "revoke"), metavar="ACTION", help="make, list or revoke"
    )
    key.add_argument("key", nargs="?", metavar="KEY", help="with revoke: its id, or whom it is for")
    key.add_argument("--for", dest="made_for", metavar="NAME", help="who or what it is for")
    key.add_argument("--may", help="read, record, service, with commas (read,record)")
    key.add_argument("--host", help="under what name or address the phone finds this machine")
    key.add_argument("--png", type=Path, metavar="FILE", help="the link's code as an image")
    key.add_argument("--svg", type=Path, metavar="FILE", help="the same as a drawing")
    key.add_argument("--store", type=Path, help="the database (beside the site file)")
    _export_options(commands.add_parser("export", help="readings, drains and alarms as CSV"))
    _backup_options(commands.add_parser("backup", help="a checked copy of the database"))
    return top


def _replay_options(replay: argparse.ArgumentParser) -> None:
    replay.add_argument("site", type=Path, metavar="SITE", help="the site file")
    replay.add_argument("readings", type=Path, metavar="READINGS", help="CSV of readings")
    replay.add_argument("--drains", type=Path, help="CSV of drains")
    replay.add_argument("--faults", type=Path, help="CSV of faults, as export writes them")
    replay.add_argument("--members", type=int, help="of the ensemble, instead of the site file's")
    replay.add_argument("--seed", type=int, help="of the ensemble, instead of the site file's")
    replay.add_argument("--blocks", action="store_true", help="along time in blocks: much faster")
    replay.add_argument("--skip-bad", action="store_true", help="leave bad rows out and list them")
    replay.add_argument("--out", type=Path, required=True, metavar="FOLDER", help="for the results")


def _backup_options(backup: argparse.ArgumentParser) -> None:
    backup.add_argument("site", type=Path, metavar="SITE", help="the site file")
    backup.add_argument("path", type=Path, metavar="PATH", help="the copy's file")
    backup.add_argument("--store", type=Path, help="the database (beside the site file)")


def _export_options(export: argparse.ArgumentParser) -> None:
    export.add_argument("site", type=Path, metavar="SITE", help="the site file")
    export.add_argument("--out", type=Path, required=True, metavar="FOLDER", help="for the files")
    export.add_argument(
        "--from", dest="begin", metavar="TIME", help="a date, or like 2026-03-02T07:10:00Z"
    )
    export.add_argument("--to", dest="end", metavar="TIME", help="up to, but not including it")
    export.add_argument(
        "--channel", action="append", metavar="NAME", help="only this one; may be given again"
    )
    export.add_argument("--store", type=Path, help="the database (beside the site file)")


def _weekly_options(weekly: argparse.ArgumentParser) -> None:
    weekly.add_argument("site", type=Path, metavar="SITE", help="the site file")
    weekly.add_argument("week", nargs="?", metavar="WEEK", help="like 2026-W49 (the last full one)")
    weekly.add_argument("--out", type=Path, metavar="FOLDER", help="write its PDF and CSV there")
    weekly.add_argument("--store", type=Path, help="the database (beside the site file)")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command; 0 when it did its job, 2 for bad input, 1 when something failed."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):  # a file's odd name must not stop a message
            stream.reconfigure(errors="backslashreplace")
    options = parser().parse_args(arguments)
    try:
        return _COMMANDS[options.command](options)
    except DriplegError as error:
        print(f"dripleg: {error}", file=sys.stderr)
        return EXIT_BAD_INPUT if isinstance(error, ValueError) else EXIT_FAILED
    except BrokenPipeError:
        sys.stderr.close()
        return EXIT_FAILED
    except KeyboardInterrupt:
        return EXIT_INTERRUPTED


def _demo(options: argparse.Namespace) -> int:
    from daemon import demo

    demo.run(options.port, options.length, options.broker, options.speed)
    return EXIT_OK


def _run(options: argparse.Namespace) -> int:
    from daemon import compose, logs
    from daemon.addresses import is_loopback, names_for_others
    from daemon.site.reader import read_site
    from sensors.hardware import RealHardware

    logs.set_up(options.verbose)
    site = read_site(options.site)
    stop = threading.Event()
    compose.stop_on_signals(stop)
    setting = compose.Setting(site, _store_path(options, site.id), RealHardware())

    def greet(parts: compose.Parts) -> None:
        compose.log.info("%s: watching; API at %s", site.name, parts.server.url)
        if not is_loopback(site.api.host):
            found = ", ".join(names_for_others(site.api.host)) or "no address yet"
            compose.log.info(
                "others reach it (%s) with a key: dripleg key %s make", found, options.site
            )

    compose.run(setting, stop, greet)
    return EXIT_OK


def _store_path(options: argparse.Namespace, site_id: str) -> Path:
    if options.store is not None:
        return Path(options.store)
    return Path(options.site).resolve().with_name(f"{site_id}.db")


def _check(options: argparse.Namespace) -> int:
    from daemon.check_command import check
    from daemon.clock import SystemClock
    from daemon.site.reader import read_site
    from sensors.hardware import RealHardware

    site = read_site(options.site)
    stop = threading.Event()
    if options.watch:
        signal.signal(signal.SIGINT, lambda *_: stop.set())
    hardware = RealHardware()
    try:
        if options.salt:
            return _salt(options, site, hardware, stop)
        return check(site, options, hardware, SystemClock(), stop, _say)
    finally:
        hardware.close()


def _salt(
    options: argparse.Namespace, site: Site, hardware: Hardware, stop: threading.Event
) -> int:
    from daemon.check_salt import Wanted, salt_check
    from daemon.clock import SystemClock
    from daemon.errors import JournalError, UnitError
    from daemon.units import parse

    try:
        length_s = parse(options.length, "duration")
    except UnitError as error:
        raise JournalError(f"--for: {error}") from error
    wanted = Wanted(options.salt, length_s, options.by, _store_path(options, site.id))
    salt_check(site, wanted, hardware, SystemClock(), stop, _say)
    return EXIT_OK


def _say(text: str) -> None:
    print(text, flush=True)


def _replay(options: argparse.Namespace) -> int:
    from daemon.replay_command import replay_files

    print(replay_files(options))
    return EXIT_OK


def _weekly(options: argparse.Namespace) -> int:
    from daemon.clock import SystemClock
    from daemon.site.reader import read_site
    from daemon.weekly.command import weekly

    def tell(text: str) -> None:
        print(text, file=sys.stderr, flush=True)

    site = read_site(options.site)
    path = _store_path(options, site.id)
    print(weekly(site, options, path, SystemClock(), tell))
    return EXIT_OK


def _drained(options: argparse.Namespace) -> int:
    from daemon.drained import record_drain
    from daemon.site.reader import read_site

    site = read_site(options.site)
    print(record_drain(site, options, _store_path(options, site.id)))
    return EXIT_OK


def _key(options: argparse.Namespace) -> int:
    from daemon.clock import SystemClock
    from daemon.keys_command import run_command
    from daemon.site.reader import read_site

    site = read_site(options.site)
    print(run_command(site, options, _store_path(options, site.id), SystemClock()))
    return EXIT_OK


def _export(options: argparse.Namespace) -> int:
    from daemon.export import export_files
    from daemon.site.reader import read_site

    site = read_site(options.site)
    print(export_files(site, options, _store_path(options, site.id)))
    return EXIT_OK


def _backup(options: argparse.Namespace) -> int:
    from daemon.backup_command import make_backup
    from daemon.clock import SystemClock
    from daemon.site.reader import read_site

    site = read_site(options.site)
    store_path = _store_path(options, site.id)
    print(make_backup(site, options.path, store_path, sys.stderr, SystemClock()))
    return EXIT_OK


_COMMANDS = {
    "demo": _demo,
    "run": _run,
    "check": _check,
    "replay": _replay,
    "drained": _drained,
    "export": _export,
    "backup": _backup,
    "weekly": _weekly,
    "key": _key,
}


if __name__ == "__main__":
    sys.exit(main())
