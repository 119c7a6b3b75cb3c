"""Logs that a person can read: one line, local time, what happened."""

from __future__ import annotations

import logging
import sys


def set_up(verbose: bool, quiet: bool = False) -> None:
    """Log to standard error: our own from INFO on (WARNING when quiet), others from WARNING."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(logging.Formatter("%(asctime)s %(levelname)s %(message)s", "%H:%M:%S"))
    logging.basicConfig(level=logging.WARNING, handlers=[handler], force=True)
    level = logging.DEBUG if verbose else logging.WARNING if quiet else logging.INFO
    for name in ("dripleg", "daemon", "sensors", "api"):
        logging.getLogger(name).setLevel(level)
