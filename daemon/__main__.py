"""The command line: `dripleg`, which is also `python -m daemon`."""

from __future__ import annotations

import argparse
import io
import sys
import threading
from collections.abc import Sequence
from pathlib import Path

from daemon.errors import DriplegError

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

    check = commands.add_parser("check", help="read the site file and explain it")
    check.add_argument("site", type=Path, metavar="SITE", help="the site file")

    replay = commands.add_parser("replay", help="recompute from recorded readings")
    replay.add_argument("site", type=Path, metavar="SITE", help="the site file")
    replay.add_argument("readings", type=Path, metavar="READINGS", help="CSV of readings")
    replay.add_argument("--drains", type=Path, help="CSV of drains")
    replay.add_argument("--members", type=int, help="of the ensemble, instead of the site file's")
    replay.add_argument("--seed", type=int, help="of the ensemble, instead of the site file's")
    replay.add_argument("--skip-bad", action="store_true", help="leave bad rows out and list them")
    replay.add_argument("--out", type=Path, required=True, metavar="FOLDER", help="for the results")

    drained = commands.add_parser("drained", help="record a drain from a shell")
    drained.add_argument("site", type=Path, metavar="SITE", help="the site file")
    drained.add_argument("trap", metavar="TRAP", help="the trap's name")
    drained.add_argument("--volume", help='what came out, like "380 ml"')
    drained.add_argument("--empty", action="store_true", help="opened and found empty")
    drained.add_argument("--partly", action="store_true", help="some was left")
    drained.add_argument("--at", metavar="TIME", help="when, like 2026-03-02T17:10:00Z (now)")
    drained.add_argument("--by", default="", help="initials")
    drained.add_argument("--look", default="", help="clear, milky, oily or rusty")
    drained.add_argument("--store", type=Path, help="the database, if the daemon does not run")
    return top


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
    from daemon.site.reader import read_site
    from sensors.hardware import RealHardware

    logs.set_up(options.verbose)
    site = read_site(options.site)
    stop = threading.Event()
    compose.stop_on_signals(stop)
    setting = compose.Setting(site, _store_path(options, site.id), RealHardware())

    def greet(parts: compose.Parts) -> None:
        compose.log.info("%s: watching; API at %s", site.name, parts.server.url)

    compose.run(setting, stop, greet)
    return EXIT_OK


def _store_path(options: argparse.Namespace, site_id: str) -> Path:
    if options.store is not None:
        return Path(options.store)
    return Path(options.site).resolve().with_name(f"{site_id}.db")


def _check(options: argparse.Namespace) -> int:
    from daemon.check import explain
    from daemon.site.reader import read_site

    print(explain(read_site(options.site)))
    return EXIT_OK


def _replay(options: argparse.Namespace) -> int:
    from daemon.replay_command import replay_files

    print(replay_files(options))
    return EXIT_OK


def _drained(options: argparse.Namespace) -> int:
    from daemon.drained import record_drain
    from daemon.site.reader import read_site

    site = read_site(options.site)
    print(record_drain(site, options, _store_path(options, site.id)))
    return EXIT_OK


_COMMANDS = {
    "demo": _demo,
    "run": _run,
    "check": _check,
    "replay": _replay,
    "drained": _drained,
}


if __name__ == "__main__":
    sys.exit(main())
