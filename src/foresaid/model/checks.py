"""A TOML table read key by key; every wrong key becomes an issue instead of an exception."""

from __future__ import annotations

import math
import re
from typing import TYPE_CHECKING, Any

from foresaid.model.issues import Issue, clip

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

LENGTH = re.compile(r"[1-9]\d{0,3} (session|day|week|month|year)s?")
CLOCK = re.compile(r"([01]\d|2[0-3]):([0-5]\d)|24:00")


class Node:
    """One table of a TOML file, with its path and the issues of the whole file.

    Each reader returns a usable value even where it records a fault, so that one pass over
    the file finds all faults. Keys never asked for are faults too: ``finish`` lists them.
    """

    def __init__(
        self, raw: object, *, file: str, path: str = "", issues: list[Issue] | None = None
    ) -> None:
        self.path = path
        self.file = file
        self.issues: list[Issue] = [] if issues is None else issues
        self._children: list[Node] = []
        self._seen: set[str] = set()
        self._missing: set[str] = set()
        self._raw: dict[str, Any] = raw if isinstance(raw, dict) else {}
        if not isinstance(raw, dict):
            self.fault("", raw, "a table")

    def fault(self, key: str, value: object, allowed: str) -> None:
        """Record that ``key`` holds ``value`` where only ``allowed`` will do."""
        if key in self._missing:
            return
        where = ".".join(part for part in (self.path, key) if part)
        message = f"{where} is {clip(repr(value))}; allowed: {allowed}"
        self.issues.append(
            Issue("bad-codebook", message, file=self.file, column=where, value=clip(value))
        )

    def has(self, key: str) -> bool:
        """Whether the table holds ``key``."""
        return key in self._raw

    def text(self, key: str) -> str:
        """Return a non-empty text."""
        value = self._take(key)
        if isinstance(value, str) and value.strip():
            return value
        self.fault(key, value, "a text that is not empty")
        return key

    def texts(self, key: str, *, allowed: Sequence[str] = ()) -> tuple[str, ...]:
        """Return a list of texts, each one of ``allowed`` where that is given."""
        value = self._take(key)
        names = ", ".join(allowed) or "texts"
        if not isinstance(value, list) or not all(isinstance(item, str) for item in value):
            self.fault(key, value, f"a list of {names}")
            return ()
        for item in value:
            if allowed and item not in allowed:
                self.fault(key, item, f"one of {names}")
        return tuple(value)

    def choice(self, key: str, allowed: Sequence[Any]) -> Any:  # noqa: ANN401 - text or number
        """Return a value that is one of ``allowed``."""
        value = self._take(key)
        if value in allowed and not isinstance(value, bool):
            return value
        self.fault(key, value, " or ".join(repr(item) for item in allowed) or "nothing")
        return allowed[0] if allowed else ""

    def flag(self, key: str) -> bool:
        """Return true or false."""
        value = self._take(key)
        if isinstance(value, bool):
            return value
        self.fault(key, value, "true or false")
        return False

    def number(self, key: str, *, low: float, high: float = math.inf) -> float:
        """Return a number from ``low`` to ``high``."""
        value = self._take(key)
        good = isinstance(value, int | float) and not isinstance(value, bool)
        if good and low <= value <= high and math.isfinite(value):
            return float(value)
        self.fault(key, value, _span(low, high))
        return low

    def integer(self, key: str, *, low: int, high: int) -> int:
        """Return a whole number from ``low`` to ``high``."""
        value = self._take(key)
        if isinstance(value, int) and not isinstance(value, bool) and low <= value <= high:
            return value
        self.fault(key, value, "a whole " + _span(low, high).removeprefix("a "))
        return low

    def length(self, key: str) -> str:
        """Return a length such as ``3 months``."""
        value = self._take(key)
        if isinstance(value, str) and LENGTH.fullmatch(value):
            return value
        self.fault(key, value, "a length such as '10 sessions', '2 weeks' or '6 months'")
        return "1 month"

    def clock(self, key: str) -> int:
        """Return a time of day written HH:MM as minutes after midnight."""
        value = self._take(key)
        if isinstance(value, str) and CLOCK.fullmatch(value):
            hours, minutes = value.split(":")
            return int(hours) * 60 + int(minutes)
        self.fault(key, value, "a time of day from '00:00' to '24:00'")
        return 0

    def table(self, key: str) -> Node:
        """Return the table under ``key``."""
        return self._child(key, self._take(key, missing={}))

    def tables(self, key: str) -> Iterator[tuple[str, Node]]:
        """Yield the named tables under ``key``."""
        node = self.table(key)
        for name in list(node._raw):
            yield name, node.table(name)

    def rows(self, key: str) -> Iterator[Node]:
        """Yield the rows of the list of tables under ``key``."""
        value = self._take(key, missing=[])
        if not isinstance(value, list) or not value:
            self.fault(key, value, "a list of tables, at least one")
            return
        for number, item in enumerate(value, start=1):
            yield self._child(f"{key}[{number}]", item)

    def finish(self) -> None:
        """Record every key that no reader asked for."""
        for key in self._raw:
            if key not in self._seen:
                known = ", ".join(sorted(self._seen)) or "nothing"
                self.fault(key, self._raw[key], f"no such key here (known: {known})")
        for child in self._children:
            child.finish()

    def _take(self, key: str, *, missing: object = None) -> Any:  # noqa: ANN401 - from TOML
        self._seen.add(key)
        if key not in self._raw:
            where = ".".join(part for part in (self.path, key) if part)
            message = f"{where} is missing"
            self.issues.append(Issue("bad-codebook", message, file=self.file, column=where))
            self._missing.add(key)
            return missing
        return self._raw[key]

    def _child(self, key: str, raw: object) -> Node:
        path = ".".join(part for part in (self.path, key) if part)
        child = Node(raw, file=self.file, path=path, issues=self.issues)
        self._children.append(child)
        return child


def _span(low: float, high: float) -> str:
    if high == math.inf:
        return f"a number of at least {low:g}"
    return f"a number from {low:g} to {high:g}"
