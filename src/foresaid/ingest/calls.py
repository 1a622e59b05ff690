"""Calls: rows of a calls file to coded calls, with every fault of every row."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.ingest.call_rows import OPTIONAL, REQUIRED, CallContext, CallRow
from foresaid.ingest.tables import check_columns
from foresaid.model.issues import Issue, clip
from foresaid.model.records import CodedCall, Parsed

if TYPE_CHECKING:
    from collections.abc import Collection

    from foresaid.ingest.tables import RawTable

__all__ = ["OPTIONAL", "REQUIRED", "CallContext", "parse_calls"]


def parse_calls(table: RawTable, context: CallContext) -> Parsed[CodedCall]:
    """Return the calls of a file with every fault found in it.

    Parameters
    ----------
    table : RawTable
        A read file with the columns of ``REQUIRED`` and any of ``OPTIONAL``.
    context : CallContext
        What the rows may refer to.

    Returns
    -------
    Parsed of CodedCall
        Rows without a fault, those that others copy or revise first.
    """
    rows: list[CodedCall] = []
    lines: list[int] = []
    issues = list(check_columns(table, REQUIRED, OPTIONAL))
    if any(issue.severity == "error" for issue in issues) or not table.columns:
        return Parsed((), (), tuple(issues))
    owners, doubled = _owners(table, context)
    issues += doubled
    doubled_lines = {issue.line for issue in doubled}
    for index, line in enumerate(table.lines):
        reader = CallRow(table, index, context, owners)
        row = reader.read()
        issues += reader.issues
        if row is not None and line not in doubled_lines:
            rows.append(row)
            lines.append(line)
    order, dangling = _referred_first(rows, set(context.owners))
    had = {rows[at].ref for at in order} | set(context.owners)
    issues += [_dangling(table.file, rows[at], lines[at], had) for at in dangling]
    issues.sort(key=lambda issue: issue.line or 0)
    return Parsed(tuple(rows[i] for i in order), tuple(lines[i] for i in order), tuple(issues))


def _dangling(file: str, row: CodedCall, line: int, had: Collection[str]) -> Issue:
    """Return the issue of a row that names a row which cannot be imported before it."""
    column = "revises" if not row.copy_of or row.copy_of in had else "copy_of"
    other = clip(getattr(row, column))
    message = f"`{other}` cannot be imported before this row, which names it"
    hint = "Mend the faults of that row; no two rows may name each other, not even in a circle."
    return Issue("bad-ref", message, file, line, column, other, hint)


def _referred_first(rows: list[CodedCall], known: set[str]) -> tuple[list[int], list[int]]:
    """Return an order in which what a row names comes first, and the rows that have none."""
    order: list[int] = []
    waiting = list(range(len(rows)))
    while waiting:
        ready = [i for i in waiting if {rows[i].copy_of, rows[i].revises} - {""} <= known]
        if not ready:
            return order, waiting
        order += ready
        known |= {rows[i].ref for i in ready}
        chosen = set(ready)
        waiting = [i for i in waiting if i not in chosen]
    return order, []


def _owners(table: RawTable, context: CallContext) -> tuple[dict[str, str], list[Issue]]:
    """Return who made each statement of ledger and file, and the refs that stand twice."""
    owners = dict(context.owners)
    first: dict[str, int] = {}
    issues = []
    refs, names = table.cells["ref"], table.cells["forecaster"]
    for ref, name, line in zip(refs, names, table.lines, strict=True):
        if ref and ref in first:
            message = f"the ref `{clip(ref)}` stands on line {first[ref]} already"
            hint = "Give every row a ref of its own."
            issues.append(
                Issue("double-ref", message, table.file, line, "ref", clip(ref), hint)
            )
        first.setdefault(ref, line)
        owners.setdefault(ref, context.handles.get(name, name))
    return owners, issues
