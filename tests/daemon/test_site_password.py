"""Where the broker's password comes from."""

from __future__ import annotations

from pathlib import Path

import pytest

from daemon.errors import BrokerError
from daemon.site.password import broker_password
from daemon.site.reader import parse_site
from daemon.site.types import Mqtt


def mqtt(text: str, folder: Path) -> Mqtt:
    found = parse_site(f'[mqtt]\nuser = "u"\n{text}\n', str(folder / "site.toml")).mqtt
    assert found is not None
    return found


def test_a_password_in_the_site_file_is_taken(tmp_path: Path) -> None:
    assert broker_password(mqtt('password = "hush"', tmp_path)) == "hush"
    assert broker_password(mqtt("", tmp_path)) == ""


def test_a_password_file_stands_beside_the_site_file_and_is_read_when_asked(tmp_path: Path) -> None:
    found = mqtt('password_file = "broker.txt"', tmp_path)  # not there yet
    (tmp_path / "broker.txt").write_text("hush hush\n")
    assert broker_password(found) == "hush hush"


@pytest.mark.parametrize(
    ("content", "words"),
    [(None, "cannot be read"), (b"", "nothing in its first line"), (b"\xff", "not UTF-8")],
)
def test_a_password_file_that_gives_none_is_told(
    tmp_path: Path, content: bytes | None, words: str
) -> None:
    if content is not None:
        (tmp_path / "broker.txt").write_bytes(content)
    with pytest.raises(BrokerError, match=words) as caught:
        broker_password(mqtt('password_file = "broker.txt"', tmp_path))
    assert "broker.txt" in str(caught.value)
