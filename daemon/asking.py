"""Asks the daemon that serves a site, from another process on the same machine."""

from __future__ import annotations

import http.client
import json
import urllib.error
import urllib.request
from typing import Any

from daemon.errors import StoreError
from daemon.site.types import Site

TIMEOUT_S = 10.0


def ask(site: Site, path: str, body: dict[str, Any] | None = None) -> tuple[int, Any] | None:
    """Status and JSON of a GET under /api/v1/, or of a POST of `body`; None: nobody listens there.

    StoreError when something listens that does not answer as dripleg does.
    """
    host = {"0.0.0.0": "127.0.0.1", "::": "::1"}.get(site.api.host, site.api.host)
    where = f"[{host}]:{site.api.port}" if ":" in host else f"{host}:{site.api.port}"
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(
        f"http://{where}/api/v1/{path}", data, {"Content-Type": "application/json"}
    )
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    try:
        with opener.open(request, timeout=TIMEOUT_S) as response:
            return response.status, json.load(response)
    except urllib.error.HTTPError as error:
        with error:
            return error.code, _body(error)
    except urllib.error.URLError:
        return None
    except (OSError, http.client.HTTPException, ValueError) as error:
        raise StoreError(f"{where} does not answer as dripleg does ({error})") from error


def serves(site: Site) -> bool:
    """Whether a daemon of this very site runs here; whatever else listens there is not one."""
    try:
        answer = ask(site, "site")
    except StoreError:
        return False
    if answer is None or answer[0] != 200 or not isinstance(answer[1], dict):
        return False
    return answer[1].get("id") == site.id


def _body(error: urllib.error.HTTPError) -> Any:
    try:
        return json.load(error)
    except ValueError:
        return {}
