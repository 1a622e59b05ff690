"""Faults of a file as values: where, what, why, and what to do about it."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Literal


@dataclass(frozen=True, slots=True)
class Issue:
    """One fault found in a file.

    Attributes
    ----------
    code : str
        Stable short name of the fault, such as ``bad-date``; scripts may rely on it.
    message : str
        What is wrong, in words.
    file : str
        Name of the file as the user gave it.
    line : int or None
        Line of the file, counted from 1; None when the fault is the whole file's.
    column : str or None
        Column name, None when the fault is the whole row's.
    value : str or None
        The offending text, cut to a length that fits a screen.
    hint : str
        What to write instead, or what to do; empty when there is nothing to add.
    severity : {"error", "note"}
        An error keeps the row out; a note does not.
    """

    code: str
    message: str
    file: str = ""
    line: int | None = None
    column: str | None = None
    value: str | None = None
    hint: str = ""
    severity: Literal["error", "note"] = "error"

    def to_dict(self) -> dict[str, str | int | None]:
        """Return the issue as a plain dictionary, keys in the order above."""
        return asdict(self)


def clip(value: object, *, limit: int = 60) -> str:
    """Return ``value`` as one line of text of at most ``limit`` characters.

    Examples
    --------
    >>> clip("a" * 100, limit=5)
    'aaaa…'
    """
    text = " ".join(str(value)[: limit * 4].split())
    return text if len(text) <= limit else text[: limit - 1] + "…"
