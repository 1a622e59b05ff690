"""The rows of a file that were refused, written so that they can be mended and read again."""

from __future__ import annotations

import csv
import re
from typing import TYPE_CHECKING

from foresaid.ingest.cells import NUMBER
from foresaid.ingest.tables import REASON_COLUMN
from foresaid.model.errors import UsageError

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence
    from pathlib import Path
    from typing import TextIO

    from foresaid.ingest.tables import RawTable
    from foresaid.model.issues import Issue

_OWN_NAME = re.compile(r"\.rejects(-[0-9]+)?$")
_FORMULA = ("=", "+", "-", "@")
_MOST_FILES = 10_000


def rejected_lines(
    table: RawTable, issues: Iterable[Issue], lines: Iterable[int] = ()
) -> dict[int, list[Issue]]:
    """Return the rows that errors keep out, with their issues.

    Parameters
    ----------
    table : RawTable
        The file; its own issues and broken rows are taken in.
    issues : iterable of Issue
        What the rows were refused for.
    lines : iterable of int
        Further refused lines, such as ``PriceRows.bad_lines``, whose issues may not be listed.
    """
    rejected: dict[int, list[Issue]] = {line: [] for line in (*table.broken, *lines)}
    rows = {*table.lines, *table.broken}
    for issue in (*table.issues, *issues):
        if issue.severity == "error" and issue.line in rows:
            rejected.setdefault(issue.line, []).append(issue)
    return dict(sorted(rejected.items()))


def write_rejects(path: Path, table: RawTable, bad_lines: Mapping[int, list[Issue]]) -> Path:
    """Write the refused rows beside their file and return where they are.

    Parameters
    ----------
    path : Path
        The file they came from; ``name.csv`` gives ``name.rejects.csv``, or the first of
        ``name.rejects-2.csv`` and so on that does not exist.
    table : RawTable
        The file as read.
    bad_lines : mapping of int to list of Issue
        Lines to write, with the reasons.

    Returns
    -------
    Path
        The new file: the columns as they were, and ``why`` behind them.

    Raises
    ------
    UsageError
        If the file cannot be written.

    Notes
    -----
    A cell that a spreadsheet would run as a formula gets an apostrophe before it; reading
    takes it off again. No file is ever overwritten.
    """
    try:
        target, stream = _create(path)
        with stream:
            writer = csv.writer(stream, delimiter=table.delimiter, lineterminator="\n")
            writer.writerow([_safe(cell) for cell in (*_headers(table), REASON_COLUMN)])
            writer.writerows(_rows(table, bad_lines))
    except OSError as fault:
        message = f"the refused rows of {path} cannot be written: {fault.strerror or fault}"
        raise UsageError(message) from fault
    return target


def _create(path: Path) -> tuple[Path, TextIO]:
    """Open the first file name that is free."""
    stem = _OWN_NAME.sub("", path.stem)
    for number in range(1, _MOST_FILES):
        suffix = "" if number == 1 else f"-{number}"
        target = path.with_name(f"{stem}.rejects{suffix}{path.suffix or '.csv'}")
        try:
            stream = target.open("x", encoding="utf-8", errors="surrogateescape", newline="")
        except FileExistsError:
            continue
        return target, stream
    message = f"there are {_MOST_FILES:,} reject files of {path} already"
    raise UsageError(message)


def _headers(table: RawTable) -> list[str]:
    """Return the columns as written, without the reasons of an earlier pass."""
    return [table.header(name) for name in _columns(table)]


def _columns(table: RawTable) -> list[str]:
    return [name for name in table.columns if name != REASON_COLUMN]


def _rows(table: RawTable, bad_lines: Mapping[int, list[Issue]]) -> Iterator[list[str]]:
    places = {line: index for index, line in enumerate(table.lines)}
    columns = _columns(table)
    for line in sorted(bad_lines):
        if line in places:
            cells: Sequence[str] = [table.cells[name][places[line]] for name in columns]
        elif line in table.broken:
            cells = _broken_cells(table, table.broken[line])
        else:
            continue
        yield [_safe(cell) for cell in (*cells, _why(bad_lines[line]))]


def _broken_cells(table: RawTable, row: Sequence[str]) -> list[str]:
    """Return a broken row in the order of the columns, with what it has too much behind."""
    cells = [
        row[at] if at < len(row) else ""
        for at, name in zip(table.positions, table.columns, strict=True)
        if name != REASON_COLUMN
    ]
    return [*cells, *row[max(table.positions, default=-1) + 1 :]]


def _why(issues: Sequence[Issue]) -> str:
    parts = (
        f"{issue.column}: {issue.message}. {issue.hint}"
        if issue.column
        else f"{issue.message}. {issue.hint}"
        for issue in issues
    )
    return " | ".join(part.strip() for part in parts)


def _safe(cell: str) -> str:
    """Return a cell that no spreadsheet runs as a formula; numbers stay as they are."""
    if cell.startswith(_FORMULA) and not NUMBER.fullmatch(cell.replace(",", ".")):
        return f"'{cell}"
    return cell
