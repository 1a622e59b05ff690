"""Settling a ledger: outcomes and chances of every call as of a day, kept in the ledger."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid import __version__
from foresaid.chance.base_rate import Starts
from foresaid.chance.per_call import chances
from foresaid.ledger import queries, writes
from foresaid.model.errors import UsageError
from foresaid.pipeline.conditions import with_conditions
from foresaid.pipeline.losses import losses_of
from foresaid.pipeline.other_horizons import with_other_horizons
from foresaid.pipeline.outcome_rows import Judgement, outcome_rows, screened_out_rows
from foresaid.pipeline.world import coded_calls, load_world, wanted_currencies
from foresaid.settle.outcomes import group_calls, settle_calls

if TYPE_CHECKING:
    from datetime import date

    from foresaid.chance.per_call import Chances
    from foresaid.claims.kind import Kind
    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.pipeline.world import CodedCalls, World
    from foresaid.settle.outcomes import Outcomes


@dataclass(frozen=True)
class Settled:
    """A settlement run: what it counted, and how it differs from the run before.

    Attributes
    ----------
    as_of : date
        The day of settlement.
    counts, reasons : dict of str to int
        Calls by result, and open or void ones by reason.
    is_new : bool
        Whether anything differed from the inputs of the run before.
    changes : list of dict
        Calls whose result differs from the run before: ref, before, after, because.
    """

    as_of: date
    counts: dict[str, int]
    reasons: dict[str, int]
    is_new: bool
    changes: list[dict[str, str]] = field(default_factory=list)


@dataclass(frozen=True)
class Again:
    """Calls settled, with what carries them to other starts."""

    world: World
    calls: CodedCalls
    outcomes: Outcomes
    starts: Starts


def settled(
    ledger: Ledger, frame: pd.DataFrame, codebook: Codebook, *, as_of: date, vintage: int
) -> Again:
    """Return the outcomes of calls, without touching the ledger."""
    currencies = wanted_currencies(ledger, frame)
    world = load_world(ledger, codebook, as_of=as_of, vintage=vintage, currencies=currencies)
    calls = coded_calls(frame, world)
    calls = with_conditions(calls, world, codebook, queries.decisions(ledger, as_of=as_of))
    outcomes = settle_calls(
        calls.times, calls.claims, world.market, calls.inverse, codebook.settlement
    )
    return Again(world, calls, outcomes, starts_of(world, calls, outcomes))


def judge(
    ledger: Ledger, frame: pd.DataFrame, codebook: Codebook, *, as_of: date, vintage: int
) -> Judgement:
    """Return the outcomes, chances and losses of calls, without touching the ledger."""
    found = settled(ledger, frame, codebook, as_of=as_of, vintage=vintage)
    world, calls, starts = found.world, found.calls, found.starts
    outcomes = with_other_horizons(found.outcomes, calls, world, codebook)
    return Judgement(
        world,
        calls,
        outcomes,
        _chances(world, calls, outcomes, starts, codebook),
        losses_of(calls.claims.kind, outcomes, starts, world.market, codebook),
    )


def settle_ledger(
    ledger: Ledger,
    codebook: Codebook,
    *,
    as_of: date,
    at: str,
    vintage: int | None = None,
) -> Settled:
    """Settle every call as of a day and keep the outcomes.

    A run from the very same calls, prices, codebook and day adds nothing.

    Parameters
    ----------
    ledger : Ledger
        Open for writing.
    codebook : Codebook
        The conventions.
    as_of : date
        Statements and prices after this day do not count.
    at : str
        Time of the run, RFC 3339, kept with it.
    vintage : int or None
        Number of the last load of prices and actions that counts; None for the newest.

    Raises
    ------
    UsageError
        If there is no such load.
    """
    newest = queries.vintage(ledger)
    vintage, last_call = _checked_vintage(vintage, newest), queries.last_call(ledger)
    header = {
        "as_of": as_of.isoformat(),
        "codebook": codebook.digest,
        "vintage": vintage,
        "last_call": last_call,
        "last_decision": queries.last_decision(ledger),
        "last_confirmation": queries.last_confirmation(ledger),
        "program": __version__,
    }
    latest = queries.latest_settlement(ledger)
    if latest is not None and _is_same(latest, header):
        return _summary(queries.outcomes(ledger, latest.id), as_of, is_new=False)
    frame = queries.calls(ledger)
    frame = frame[frame["said_at"].str[:10] <= as_of.isoformat()].reset_index(drop=True)
    is_call = frame["not_a_call"] == ""
    real = frame[is_call].reset_index(drop=True)
    judgement = judge(ledger, real, codebook, as_of=as_of, vintage=vintage)
    table = pd.concat(
        [outcome_rows(judgement), screened_out_rows(frame[~is_call])], ignore_index=True
    )
    rows = list(zip(*(table[name].tolist() for name in table.columns), strict=True))
    changes = []
    if latest is not None:
        before = queries.outcomes(ledger, latest.id)
        changes = _changes(frame, before, table, _differences(latest, header))
    with ledger.writing():
        now = queries.latest_settlement(ledger)
        if now is None or not _is_same(now, header):  # another run may have been faster
            writes.add_codebook(ledger, codebook, at=at)
            writes.add_settlement(ledger, header | {"settled_at": at}, rows)
    return replace(_summary(table, as_of, is_new=True), changes=changes)


def _checked_vintage(wanted: int | None, newest: int) -> int:
    if wanted is None:
        return newest
    if not 0 <= wanted <= newest:
        raise UsageError(
            f"There is no price vintage {wanted}; the loads of this ledger go up to {newest}."
        )
    return wanted


def _differences(latest: queries.Settlement, header: dict[str, Any]) -> str:
    """Return what two runs were made from differently, in words."""
    words = {
        "as_of": "another day",
        "codebook": "another codebook",
        "vintage": "other prices or actions",
        "last_call": "new calls",
        "last_decision": "a decision about its condition",
        "last_confirmation": "prices confirmed by a person",
        "program": "another program version",
    }
    changed = [name for name in words if str(getattr(latest, name)) != str(header[name])]
    return " or ".join(words[name] for name in changed if name != "last_call")


def _changes(
    frame: pd.DataFrame, before: pd.DataFrame, after: pd.DataFrame, because: str
) -> list[dict[str, str]]:
    """Return the calls of both runs whose result is not the same."""
    old = dict(zip(before["call"], before["result"], strict=True))
    refs = dict(zip(frame["call"], frame["ref"], strict=True))
    return [
        {"ref": refs[call], "before": old[call], "after": result, "because": because}
        for call, result in zip(after["call"], after["result"], strict=True)
        if call in old and old[call] != result
    ]


def _is_same(latest: queries.Settlement, header: dict[str, Any]) -> bool:
    return all(str(getattr(latest, name)) == str(value) for name, value in header.items())


def _summary(table: pd.DataFrame, as_of: date, *, is_new: bool) -> Settled:
    counts = Counter(table["result"])
    unsettled = table[table["result"].isin(["open", "void"])]
    reasons = Counter(f"{row.result}: {row.reason}" for row in unsettled.itertuples())
    return Settled(as_of, dict(counts), dict(reasons.most_common()), is_new)


def groups_of(calls: CodedCalls, rows: BoolArray) -> list[tuple[Kind, IntArray]]:
    """Return the kinds among some calls, each with its rows."""
    order = np.flatnonzero(rows)
    found = group_calls(calls.claims.kind, calls.inverse, order)
    return [(group.kind, group.rows) for group in found]


def starts_of(world: World, calls: CodedCalls, outcomes: Outcomes) -> Starts:
    """Return what carries the calls to other starts on their instruments."""
    windows, bars = outcomes.resolved.windows, world.market.bars
    reference_day = bars.day[windows.reference] if len(bars.day) else windows.reference
    in_sessions = calls.times.sessions > 0
    span = np.where(in_sessions, calls.times.sessions, calls.times.deadline_day - reference_day)
    return Starts(
        instrument=calls.times.instrument,
        reference=windows.reference,
        span=np.maximum(span, 1),
        in_sessions=in_sessions,
        lag=windows.first - windows.reference,
        additive=windows.additive,
        marks=outcomes.marks,
        legs=calls.times.legs,
    )


def _chances(
    world: World, calls: CodedCalls, outcomes: Outcomes, starts: Starts, codebook: Codebook
) -> Chances:
    """Return the chance of every call whose window has begun and is sound."""
    resolved = outcomes.resolved
    fit = (resolved.matured | resolved.running) & (outcomes.result != "void")
    fit &= np.isfinite(outcomes.marks[:, 0])
    return chances(
        groups_of(calls, fit),
        world.market.bars,
        starts,
        codebook.chance,
        codebook.settlement.tolerance,
    )
