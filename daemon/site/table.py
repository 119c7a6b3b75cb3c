"""One table of a site file: hands out its keys, checked, and tells what it does not know."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any, TypeVar

from daemon.site.notes import Notes, Told, Unknown, nearest

T = TypeVar("T")
Reader = Callable[[object], T]  # a TOML value to a checked one; ValueError says what to write


class Table:
    """A table as TOML gave it.

    Unknown keys are told at once. A misspelt key is then read as the one that was meant, so that
    its absence is no second problem. A key with a problem is `broken`: what depends on it must
    keep quiet.
    """

    def __init__(
        self,
        notes: Notes,
        where: str,
        raw: object,
        known: Sequence[str],
        prefix: str = "",
        required: Mapping[str, Reader[object]] | None = None,
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
        odd = {key: value for key, value in raw.items() if key not in known}
        if not self._lost_header(odd):
            self._tell_unknown(odd, known, required or {})

    def _not_a_table(self, raw: object, known: Sequence[str]) -> None:
        self.broken.update(known)
        name = self._prefix.rstrip(".")
        example = f"{name} = {{ ... }}" if name else f"a table [{self.where}]"
        self.notes.problem(self.where, name, raw, f"is not a table; write {example}")

    def _lost_header(self, odd: Mapping[str, object]) -> bool:
        """Whether the keys are those of another table whose header is missing: one mistake."""
        for name, keys in self.notes.elsewhere.items():
            if len(odd) > 1 and set(odd) <= set(keys):
                self.notes.problem(
                    self.where,
                    "",
                    None,
                    f"there are no such keys here: {', '.join(odd)}; they belong to {name}: "
                    "is its header missing above them?",
                )
                self.broken.update(odd)
                if "id" in odd:  # whoever names it is not wrong
                    self.notes.lost(odd["id"])
                return True
        return False

    def _tell_unknown(
        self,
        odd: Mapping[str, object],
        known: Sequence[str],
        required: Mapping[str, Reader[object]],
    ) -> None:
        for key, value in odd.items():
            meant = nearest(key, known) or self._stands_for(value, required)
            if meant in self.values:
                remedy = f'there is no such key ("{meant}" is there already); take it out'
            elif meant:
                remedy = f'there is no such key; did you mean "{meant}"?'
                self.values[meant] = value
                self._guessed.add(meant)
            else:
                remedy = f"there is no such key here; known: {', '.join(known)}"
            self.wrong(key, remedy, value)

    def _stands_for(self, value: object, required: Mapping[str, Reader[object]]) -> str:
        """A key that must be there, is not, and could have this value: said by another name."""
        for key, reader in required.items():
            if key in self.values:
                continue
            try:
                reader(value)
            except ValueError:
                continue
            return key
        return ""

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
        except Told as error:
            self.broken.add(key)
            if isinstance(error, Unknown):
                self.notes.unknown(error, self.where, self.key(key), self.values[key])
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
