"""Data to standard output, talk to standard error."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from enum import StrEnum
from typing import TYPE_CHECKING, Any

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence

    from foresaid.model.issues import Issue

CONTROL: dict[int, str] = dict.fromkeys((*range(32), *range(127, 160)), "\ufffd")
CONTROL |= {ord("\n"): "\n", ord("\t"): "\t"}
PIPE_WIDTH = 120
SHOWN_ISSUES = 1_000


class Format(StrEnum):
    """How a table is given out."""

    table = "table"
    csv = "csv"
    json = "json"


def console(*, stderr: bool = False) -> Console:
    """Return a console that shows text as it is: no markup, no emoji, no highlighting."""
    stream = sys.stderr if stderr else sys.stdout
    width = None if stream.isatty() else PIPE_WIDTH
    return Console(
        stderr=stderr, markup=False, emoji=False, highlight=False, soft_wrap=False, width=width
    )


def say(text: str) -> None:
    """Tell the user something that is not data; no control character reaches the screen."""
    console(stderr=True).print(text.translate(CONTROL), soft_wrap=True)


def counted(number: int, noun: str) -> str:
    """Return a number with its noun, in the plural where it is not one.

    Examples
    --------
    >>> counted(1, "row"), counted(2, "row")
    ('1 row', '2 rows')
    """
    return f"{number} {noun}" + ("" if number == 1 else "s")


def write(text: str) -> None:
    """Give out data, exactly as it is."""
    sys.stdout.write(text if text.endswith("\n") else text + "\n")
    sys.stdout.flush()


def give_out(rows: Sequence[dict[str, Any]], columns: Sequence[str], form: Format) -> None:
    """Give out rows as CSV or JSON, with exactly these columns."""
    from foresaid.report.exports import as_csv, as_json

    if form is Format.csv:
        write(as_csv(columns, rows))
    else:
        write(as_json([{name: row[name] for name in columns} for row in rows]))


def show_issues(issues: Iterable[Issue]) -> None:
    """Tell the faults of a file, the first ones in full."""
    from foresaid.report.tables import issue_lines

    found = tuple(issues)
    counts = [issue for issue in found if issue.code == "more-issues"]  # those not listed
    lines = issue_lines(issue for issue in found if issue.code != "more-issues")
    for line in (*lines[:SHOWN_ISSUES], *issue_lines(counts)):
        say(line)
    if len(lines) > SHOWN_ISSUES:
        say(f"... and {len(lines) - SHOWN_ISSUES} more of the same file.")


@contextmanager
def file_progress(label: str) -> Iterator[Callable[[int, int], None] | None]:
    """Show a bar for a long file where somebody is looking, nothing elsewhere."""
    if not sys.stderr.isatty():
        yield None
        return
    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        TextColumn("{task.percentage:.0f} %"),
    )
    with Progress(*columns, console=console(stderr=True), transient=True) as bar:
        task = bar.add_task(label, total=None)
        yield lambda done, total: bar.update(task, completed=done, total=total)
