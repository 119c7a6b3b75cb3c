"""Addresses to listen on: whether others can reach one, and under what they find this machine."""

from __future__ import annotations

import ipaddress
import socket

# Addresses kept for documents (RFC 5737, RFC 3849): where a packet to the outside would leave from.
# Nothing is sent: connecting a datagram socket only looks the way up.
_FAR_AWAY = ((socket.AF_INET, "192.0.2.1"), (socket.AF_INET6, "2001:db8::1"))
_ANY = ("", "0.0.0.0", "::")


def address_of(host: str) -> ipaddress.IPv4Address | ipaddress.IPv6Address | None:
    """The address that a text is, None for a name."""
    try:
        return ipaddress.ip_address(host)
    except ValueError:
        return None


def is_loopback(host: str) -> bool:
    """Whether an address to listen on can be reached from this machine only."""
    if host == "localhost":
        return True
    address = address_of(host)
    return address is not None and address.is_loopback


def names_for_others(host: str) -> list[str]:
    """Under what others find an API that listens on `host`, the surest first."""
    if host not in _ANY:
        return [host]
    families = _FAR_AWAY[:1] if host != "::" else _FAR_AWAY
    found = [name for family, far in families if (name := _own_address(family, far))]
    name = socket.gethostname().partition(".")[0]
    if name and name != "localhost":
        found.append(f"{name}.local")  # where the network has multicast DNS, as a Pi's own has
    return found


def url_host(host: str) -> str:
    """A host as an URL has it: an IPv6 address in brackets."""
    return f"[{host}]" if ":" in host else host


def _own_address(family: socket.AddressFamily, far: str) -> str:
    with socket.socket(family, socket.SOCK_DGRAM) as probe:
        try:
            probe.connect((far, 9))
        except OSError:
            return ""
        own = str(probe.getsockname()[0])
    return "" if is_loopback(own) or own in _ANY else own
