"""Sessions that stand twice in a price file."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from foresaid.ingest.drafts import FIELDS, Draft, Finding, find
from foresaid.model.issues import clip

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, IntArray


def double_sessions(draft: Draft, out: BoolArray) -> tuple[list[Finding], BoolArray]:
    """Return sessions that stand twice, and which rows only repeat an earlier one.

    Parameters
    ----------
    draft : Draft
        Rows.
    out : ndarray of bool, shape (n,)
        Rows that are at fault already and do not count.

    Returns
    -------
    findings : list of Finding
        Rows of one session with different prices (errors), and repeated rows (notes).
    repeats : ndarray of bool, shape (n,)
        Rows equal to an earlier one.
    """
    rows = np.flatnonzero(~out)
    order = rows[np.lexsort((rows, draft.session[rows], draft.instrument[rows]))]
    instrument, session = draft.instrument[order], draft.session[order]
    starts = np.ones(len(order), dtype=np.bool_)
    starts[1:] = (instrument[1:] != instrument[:-1]) | (session[1:] != session[:-1])
    group = np.cumsum(starts) - 1
    first = order[starts][group]
    differs = np.zeros(len(order), dtype=np.bool_)
    for field in FIELDS:
        here, there = draft.values[field][order], draft.values[field][first]
        differs |= (here != there) & ~(np.isnan(here) & np.isnan(there))
    clash = np.zeros(int(starts.sum()), dtype=np.bool_)
    clash[group[differs]] = True
    repeats = np.zeros(len(out), dtype=np.bool_)
    repeats[order[~starts & ~clash[group]]] = True
    witness = np.zeros(len(clash), dtype=np.int64)
    witness[group[differs]] = order[differs]
    partner = np.zeros(len(out), dtype=np.int64)
    partner[order] = np.where(differs | ~clash[group], first, witness[group])
    clashes = np.zeros(len(out), dtype=np.bool_)
    clashes[order[clash[group]]] = True
    told = repeats & ~np.isin(draft.row, draft.row[clashes])
    return [_clashes(draft, clashes, partner), _repeats(draft, told, partner)], repeats


def _clashes(draft: Draft, clashes: BoolArray, partner: IntArray) -> Finding:
    """Return sessions with different prices; ``partner`` is the row each differs from."""

    def words(at: int) -> tuple[str, str, str]:
        lines = sorted((int(draft.lines[at]), int(draft.lines[partner[at]])))
        what = f"{clip(draft.symbol(at))} has different prices for {draft.session[at]}"
        return (
            "double-session",
            f"{what} on lines {lines[0]} and {lines[1]}",
            "Keep one of them.",
        )

    return find(draft, _once_a_line(draft, clashes), "close", words)


def _repeats(draft: Draft, repeats: BoolArray, partner: IntArray) -> Finding:
    """Return rows that repeat an earlier one, as notes."""

    def words(at: int) -> tuple[str, str, str]:
        message = f"the row repeats line {int(draft.lines[partner[at]])} and is passed over"
        return "repeated-row", message, ""

    found = find(draft, _once_a_line(draft, repeats), "close", words)
    return Finding(
        found.lines, lambda at: replace(found.describe(at), severity="note"), is_note=True
    )


def _once_a_line(draft: Draft, mask: BoolArray) -> BoolArray:
    """Return the mask with at most one row of each line."""
    if not draft.is_wide or not mask.any():
        return mask
    rows = np.flatnonzero(mask)
    kept = rows[np.unique(draft.row[rows], return_index=True)[1]]
    result = np.zeros_like(mask)
    result[kept] = True
    return result
