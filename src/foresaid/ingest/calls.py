"""Calls: rows of a calls file to coded calls, with every fault of every row."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.ingest.call_rows import OPTIONAL, REQUIRED, CallContext, CallRow
from foresaid.ingest.tables import check_columns
from foresaid.model.issues import Issue, clip
from foresaid.model.records import CodedCall, Parsed

if TYPE_CHECKING:
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
    for at in dangling:
        row, line = rows[at], lines[at]
        other = row.copy_of or row.revises
        message = f"`{clip(other)}`, which this row names, is not to be had"
        hint = "It has a fault of its own, or the two name each other."
        issues.append(Issue("bad-ref", message, table.file, line, "ref", clip(row.ref), hint))
    return Parsed(tuple(rows[i] for i in order), tuple(lines[i] for i in order), tuple(issues))


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
