"""The broker's password: from the site file, or from a file of its own when connecting."""

from __future__ import annotations

from pathlib import Path

from daemon.errors import BrokerError
from daemon.site.types import Mqtt


def broker_password(mqtt: Mqtt) -> str:
    """The password, without the line's end of a password file. BrokerError when it has none.

    Read when connecting and not with the site file: who checks or replays a site needs no secrets.
    """
    if not mqtt.password_file:
        return mqtt.password
    try:
        text = Path(mqtt.password_file).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "not UTF-8"
        raise BrokerError(
            f"[mqtt] password_file: {mqtt.password_file} cannot be read ({reason}); "
            "name a file that the daemon may read"
        ) from None
    password = text.splitlines()[0] if text else ""
    if not password:
        raise BrokerError(
            f"[mqtt] password_file: {mqtt.password_file} has nothing in its first line; "
            "write the password there"
        )
    return password
