"""Keys from the shell to the phone: `dripleg key` beside a daemon that runs. The drawn code is read
by another program (zxing-cpp), as a phone's camera would."""

from __future__ import annotations

import json
import os
import re
import struct
import urllib.error
import urllib.request
import zlib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import zxingcpp

from daemon.__main__ import main
from daemon.keys_local import key_file
from daemon.store.store import Store
from tests.daemon.broker import TIMEOUT_S, free_port
from tests.daemon.shops import SITE
from tests.test_end_to_end import SHOP, serving

KEY = re.compile(r"^  ([a-z0-9]{8}\.[\w-]{32})$", re.MULTILINE)
LINK = re.compile(r"^  (http://\S+)$", re.MULTILINE)


def ask(url: str, key: str = "", body: Any = None) -> tuple[int, Any]:
    headers = {"content-type": "application/json"}
    headers |= {"authorization": f"Bearer {key}"} if key else {}
    data = None if body is None else json.dumps(body).encode()
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    try:
        request = urllib.request.Request(url, data, headers)
        with opener.open(request, timeout=TIMEOUT_S) as answer:
            return answer.status, json.load(answer)
    except urllib.error.HTTPError as error:
        with error:
            return error.code, json.load(error)


def site_file(folder: Path, port: int, host: str = "0.0.0.0") -> Path:
    path = folder / "birch-works.toml"
    path.write_text(f'{SITE}\n[api]\nport = {port}\nhost = "{host}"\n')
    return path


def key(path: Path, *options: str) -> int:
    return main(["key", str(path), *options])


def made(out: str) -> str:
    found = KEY.search(out)
    assert found is not None, out
    return found[1]


def open_to_others(folder: Path, port: int) -> Any:
    return serving(folder, SITE, port, host="0.0.0.0")


def test_a_key_made_beside_the_daemon_opens_it_and_ends_at_once(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, port := free_port())
    with open_to_others(tmp_path, port):
        api = f"http://127.0.0.1:{port}/api/v1"
        assert ask(f"{api}/traps")[0] == 401
        assert key(path, "make", "--for", "paint booth tablet", "--host", "shop-pi") == 0
        text = made(capsys.readouterr().out)
        assert ask(f"{api}/traps", text)[0] == 200
        assert ask(f"{api}/traps/tank/drains", text, {"volume_ml": 380})[0] == 201
        assert ask(f"{api}/stations/tank/service", text, {"what": "element changed"})[0] == 403
        assert key(path, "list") == 0
        listed = capsys.readouterr().out
        # at the end of an hour it is half an hour that is said
        words = "made just now, last used (within the hour|30 minutes ago)"
        assert re.search(rf"^{text[:8]}  paint booth tablet  read,record  {words}$", listed, re.M)
        assert text.partition(".")[2] not in listed
        assert key(path, "revoke", "paint booth tablet") == 0
        status, problem = ask(f"{api}/traps", text)
        assert status == 401
        assert "was revoked at" in problem["detail"]
    assert key(path, "list") == 0  # and when no daemon runs
    assert "; revoked just now, opens nothing" in capsys.readouterr().out


def test_a_phone_reads_the_link_from_the_image_and_from_the_terminal(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, 8080)
    png, svg = tmp_path / "code.png", tmp_path / "code.svg"
    options = ["--for", "tablet", "--host", "shop-pi.local", "--png", str(png), "--svg", str(svg)]
    assert key(path, "make", *options) == 0
    out = capsys.readouterr().out
    found = LINK.search(out)
    assert found is not None
    assert found[1] == f"http://shop-pi.local:8080/pair#{made(out)}"
    assert [each.text for each in zxingcpp.read_barcodes(drawn(out))] == [found[1]]
    assert png.stat().st_mode & 0o777 == svg.stat().st_mode & 0o777 == 0o600
    assert [each.text for each in zxingcpp.read_barcodes(grey(png))] == [found[1]]
    assert svg.read_text().startswith("<?xml")


def test_a_terminal_is_told_the_colours(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    path = site_file(tmp_path, 8080)
    monkeypatch.setattr("sys.stdout.isatty", lambda: True)
    assert key(path, "make", "--for", "tablet", "--host", "shop-pi") == 0
    out = capsys.readouterr().out
    code = [line for line in out.splitlines() if "█" in line]
    assert all(line.startswith("\033[97;40m") and line.endswith("\033[0m") for line in code)
    plain = re.sub(r"\033\[[\d;]*m", "", out)
    found = LINK.search(plain)
    assert found is not None
    assert [each.text for each in zxingcpp.read_barcodes(drawn(plain))] == [found[1]]


def drawn(out: str) -> Any:
    """The terminal's half blocks as a picture, light on dark, 8 dots to a square."""
    lines = [line for line in out.splitlines() if set(line) & set("█▀▄")]
    wide = max(len(line) for line in lines)
    rows = []
    for line in lines:
        padded = line.ljust(wide)
        rows.append([sign in "█▀" for sign in padded])
        rows.append([sign in "█▄" for sign in padded])
    return np.kron(np.array(rows), np.ones((8, 8))).astype(np.uint8) * 255


def grey(path: Path) -> Any:
    """A one-bit PNG (ISO/IEC 15948) as a picture; its rows have the filters none and up."""
    content, at, packed = path.read_bytes(), 8, b""
    while at < len(content):
        length, kind = struct.unpack_from(">I4s", content, at)
        body = content[at + 8 : at + 8 + length]
        if kind == b"IHDR":
            wide, high, depth, colour = struct.unpack_from(">IIBB", body)
        packed += body if kind == b"IDAT" else b""
        at += 12 + length
    assert (depth, colour) == (1, 0)
    rows = np.frombuffer(zlib.decompress(packed), np.uint8).reshape(high, -1)
    plain = np.zeros_like(rows[:, 1:])
    for number, row in enumerate(rows):
        assert row[0] in (0, 2)
        plain[number] = row[1:] + (plain[number - 1] if row[0] == 2 else 0)
    return np.unpackbits(plain, axis=1)[:, :wide] * 255


def test_for_loopback_alone_it_is_said_that_no_phone_can_reach_it(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, 8080, "127.0.0.1")
    assert key(path, "make", "--for", "tablet") == 0
    out = capsys.readouterr().out
    assert "http://127.0.0.1:8080/pair#" in out
    assert "listens on this machine only" in out
    assert 'Say host = "0.0.0.0"' in out


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["make"], "say who or what the key is for"),
        (["make", "--for", "x", "--may", "drain"], '"drain" is nothing that a key may do'),
        (["make", "abc", "--for", "x"], 'make takes no key: leave "abc" out'),
        (["revoke"], "say which key"),
        (["revoke", "abc"], 'there is no key "abc"'),
        (["list", "--may", "read"], "--may is for make"),
    ],
)
def test_what_cannot_be_done_is_said(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], options: list[str], words: str
) -> None:
    path = site_file(tmp_path, 8080)
    Store.open(tmp_path / "birch-works.db", SHOP.channels).close()
    assert key(path, *options) == 2
    assert words in capsys.readouterr().err


@pytest.mark.skipif(os.geteuid() != 0, reason="only root can give files away")
@pytest.mark.parametrize("there", [True, False])
def test_root_leaves_no_files_of_its_own_beside_another_user_s_database(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], there: bool
) -> None:
    path, store = site_file(tmp_path, 8080), tmp_path / "birch-works.db"
    if there:
        Store.open(store, SHOP.channels).close()
        os.chown(store, 65534, 65534)
    else:
        os.chown(tmp_path, 65534, 65534)
    before = sorted(each.name for each in tmp_path.iterdir())
    assert key(path, "make", "--for", "tablet", "--host", "shop-pi") == 2
    assert "run this as that user, with sudo -u" in capsys.readouterr().err
    assert sorted(each.name for each in tmp_path.iterdir()) == before


# ---- commands on the daemon's own machine ----


def test_a_drain_from_a_shell_needs_no_key_of_its_own(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path, store = site_file(tmp_path, port := free_port()), tmp_path / "birch-works.db"
    with open_to_others(tmp_path, port) as parts:
        assert key_file(store).stat().st_mode & 0o777 == 0o600
        assert main(["drained", str(path), "tank", "--volume", "380 ml"]) == 0
        assert len(parts.shell.drains("tank", 0, 2**62)) == 1
        elsewhere = str(tmp_path / "other.db")
        assert main(["drained", str(path), "tank", "--store", elsewhere]) == 1
        assert "name the daemon's own database with --store" in capsys.readouterr().err
        assert main(["check", str(path)]) == 0
        assert "as the running daemon last heard them" in capsys.readouterr().out
    assert not key_file(store).exists()


def test_a_daemon_for_this_machine_alone_leaves_no_key(tmp_path: Path) -> None:
    with serving(tmp_path, SITE, free_port()):
        assert not key_file(tmp_path / "birch-works.db").exists()
