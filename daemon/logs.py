"""Logs that a person can read: one line, local time, what happened."""

from __future__ import annotations

import logging
import sys


def set_up(verbose: bool) -> None:
    """Log to standard error; our own messages from INFO on, everybody else's from WARNING."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(logging.Formatter("%(asctime)s %(levelname)s %(message)s", "%H:%M:%S"))
    logging.basicConfig(level=logging.WARNING, handlers=[handler], force=True)
    level = logging.DEBUG if verbose else logging.INFO
    for name in ("dripleg", "daemon", "sensors", "api"):
        logging.getLogger(name).setLevel(level)
