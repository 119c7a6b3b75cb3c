"""One table of a site file: hands out its keys, checked, and tells what it does not know."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, TypeVar

from daemon.site.notes import Notes, Told, nearest

T = TypeVar("T")
Reader = Callable[[object], T]  # a TOML value to a checked one; ValueError says what to write


class Table:
    """A table as TOML gave it.

    Unknown keys are told at once. A misspelt key is then read as the one that was meant, so that
    its absence is no second problem. A key with a problem is `broken`: what depends on it must
    keep quiet.
    """

    def __init__(
        self, notes: Notes, where: str, raw: object, known: Sequence[str], prefix: str = ""
    ) -> None:
        self.notes = notes
        self.where = where
        self.broken: set[str] = set()
        self.values: dict[str, Any] = {}
        self._guessed: set[str] = set()
        self._prefix = prefix
        if not isinstance(raw, dict):
            self._not_a_table(raw, known)
            return
        self.values = {key: value for key, value in raw.items() if key in known}
        for key, value in raw.items():
            if key not in known:
                self._unknown(key, value, known)

    def _not_a_table(self, raw: object, known: Sequence[str]) -> None:
        self.broken.update(known)
        name = self._prefix.rstrip(".")
        example = f"{name} = {{ ... }}" if name else f"a table [{self.where}]"
        self.notes.problem(self.where, name, raw, f"is not a table; write {example}")

    def _unknown(self, key: str, value: object, known: Sequence[str]) -> None:
        meant = nearest(key, known)
        if meant:
            remedy = f'there is no such key; did you mean "{meant}"?'
            if meant in self.values:
                remedy = f'there is no such key ("{meant}" is there already); take it out'
            else:
                self.values[meant] = value
                self._guessed.add(meant)
        else:
            remedy = f"there is no such key here; known: {', '.join(known)}"
        self.wrong(key, remedy, value)

    def key(self, key: str) -> str:
        """The key's name in a message: "trap.capacity"."""
        return f"{self._prefix}{key}"

    def said(self, key: str) -> bool:
        """Whether the file says this key (rightly or not)."""
        return key in self.values or key in self.broken

    def ok(self, *keys: str) -> bool:
        """Whether none of these keys has a problem."""
        return not self.broken.intersection(keys)

    def wrong(self, key: str, remedy: str, value: object = None) -> None:
        """Tell a problem with a key; its value is the table's own unless another is given."""
        self.broken.add(key)
        found = self.values.get(key) if value is None else value
        self.notes.problem(self.where, self.key(key), found, remedy)

    def read(self, key: str, reader: Reader[T], default: T) -> T:
        """The key's value, or `default` when it is absent or wrong. Notes nothing."""
        if key not in self.values:
            return default
        try:
            return reader(self.values[key])
        except Told:
            self.broken.add(key)
        except ValueError as error:
            if key in self._guessed:  # told already, as an unknown key
                self.broken.add(key)
            else:
                self.wrong(key, str(error))
        return default

    def value(self, key: str, reader: Reader[T], default: T, shown: str, because: str) -> T:
        """As `read`, and an absent key is noted as a default with its reason."""
        if not self.said(key):
            self.default(key, shown, because)
        return self.read(key, reader, default)

    def default(self, key: str, shown: str, because: str) -> None:
        """Note that nobody said this key."""
        self.notes.default(self.where, self.key(key), shown, because)

    def sub(self, key: str, known: Sequence[str]) -> Table:
        """The table under a key, its problems told as "key.inner"."""
        raw = self.values.get(key, {})
        return Table(self.notes, self.where, raw, known, prefix=f"{self._prefix}{key}.")
