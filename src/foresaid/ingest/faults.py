"""Lists of issues that stay short, and the nearest known spelling of a name."""

from __future__ import annotations

import difflib
from typing import TYPE_CHECKING

from foresaid.model.issues import Issue, clip

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.model.said import CellFault

LISTED = 1000
"""Issues of one file that are listed one by one."""

_LONGEST_NAME = 100
_MOST_NAMES = 20_000


class IssueList:
    """Issues of one file as they turn up; past ``LISTED`` of them they are only counted."""

    def __init__(self, file: str) -> None:
        self.file = file
        self._issues: list[Issue] = []
        self._more = 0
        self._more_errors = False

    def add(self, issue: Issue) -> None:
        """Add one issue."""
        if len(self._issues) < LISTED:
            self._issues.append(issue)
        else:
            self._more += 1
            self._more_errors |= issue.severity == "error"

    def result(self) -> tuple[Issue, ...]:
        """Return the issues by line, with a last one that counts those not listed."""
        issues = sorted(self._issues, key=by_line)
        if self._more:
            issues.append(more_issues(self._more, self.file, are_errors=self._more_errors))
        return tuple(issues)


def by_line(issue: Issue) -> tuple[int, str]:
    """Return the place of an issue in its file, for sorting."""
    return issue.line or 0, issue.column or ""


def more_issues(count: int, file: str, *, are_errors: bool) -> Issue:
    """Return the issue that stands for ``count`` further ones."""
    return Issue(
        "more-issues",
        f"{count} more issues of this file are not listed",
        file,
        hint="Mend those listed and read the file again.",
        severity="error" if are_errors else "note",
    )


def cell_issue(fault: CellFault, file: str, line: int, column: str, value: str) -> Issue:
    """Return a cell's fault as an issue with its place."""
    return Issue(fault.code, fault.message, file, line, column, clip(value), fault.hint)


def nearest(name: str, known: Iterable[str]) -> str:
    """Return the known name that ``name`` was probably meant to be, empty if none is close.

    Letter case does not count. Very long names and very long lists are not searched.

    Examples
    --------
    >>> nearest("marb", ["MARB", "TESX"])
    'MARB'
    """
    by_spelling: dict[str, str] = {}
    for number, candidate in enumerate(known):
        if number >= _MOST_NAMES:
            break
        by_spelling.setdefault(candidate.casefold(), candidate)
    if len(name) > _LONGEST_NAME:
        return ""
    close = difflib.get_close_matches(name.casefold(), by_spelling, n=1, cutoff=0.7)
    return by_spelling[close[0]] if close else ""
