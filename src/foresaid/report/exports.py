"""Rows as CSV and JSON: nothing cut, nothing rounded."""

from __future__ import annotations

import csv
import json
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")


def as_csv(columns: Sequence[str], rows: Iterable[dict[str, Any]]) -> str:
    """Return rows as CSV (RFC 4180, LF line ends), None as an empty cell.

    Text that a spreadsheet would run as a formula gets a leading apostrophe, which importing
    takes off again.

    Examples
    --------
    >>> as_csv(["ref", "chance"], [{"ref": "=A1", "chance": 0.1}]).splitlines()
    ['ref,chance', "'=A1,0.1"]
    """
    lines = _Lines()
    writer = csv.writer(lines)
    writer.writerow(columns)
    for row in rows:
        writer.writerow([_cell(row.get(name)) for name in columns])
    return "".join(lines.texts)


class _Lines:
    """Takes rows that end in CR LF, so that either is quoted in a cell, and ends them in LF."""

    def __init__(self) -> None:
        self.texts: list[str] = []

    def write(self, text: str) -> None:
        self.texts.append(text.removesuffix("\r\n") + "\n")


def _cell(value: Any) -> Any:  # noqa: ANN401 - any cell
    if value is None:
        return ""
    if isinstance(value, str) and value.startswith(FORMULA_STARTS):
        return "'" + value
    return value


def as_json(value: object) -> str:
    """Return ``value`` as indented JSON in plain Unicode; NaN is refused.

    Raises
    ------
    ValueError
        If a number is NaN or infinite, which JSON cannot hold.
    """
    return json.dumps(value, indent=2, ensure_ascii=False, allow_nan=False, default=str)
