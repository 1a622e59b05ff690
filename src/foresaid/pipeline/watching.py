"""Evidence that may be looked at on any day: every call of a group as a bet, open ones lost."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.model.days import day_number, day_of
from foresaid.pipeline.groups import days, floats, is_scored
from foresaid.score.e_process import EProcess, TimedCalls, e_process

if TYPE_CHECKING:
    from datetime import date

    import pandas as pd

    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.score.e_process import Side

WATCH_COLUMNS = ("e_value", "e_passed_on", "e_value_low", "e_passed_low_on")


def watched(
    group: pd.DataFrame, leans: BoolArray, *, as_of: date, level: float
) -> dict[str, Any]:
    """Return the e-values of a group as of a day, and when they reached one over the level.

    Parameters
    ----------
    group : DataFrame
        Calls of ``groups.Grouped``.
    leans : ndarray of bool, shape (n_rows,)
        Which of them are right when their claim fails.
    as_of : date
        The day of the settlement.
    level : float
        Chance of a false alarm at any time.
    """
    row: dict[str, Any] = {}
    sides: tuple[tuple[Side, str, str], ...] = (
        ("upper", "e_value", "e_passed_on"),
        ("lower", "e_value_low", "e_passed_low_on"),
    )
    for side, value, passed_on in sides:
        found = watch(group, leans, as_of=as_of, level=level, side=side)
        row[value] = found.value
        row[passed_on] = None if found.passed is None else day_of(found.passed).isoformat()
    return row


def watch(
    group: pd.DataFrame, leans: BoolArray, *, as_of: date, level: float, side: Side
) -> EProcess:
    """Return the e-process of the calls with a stated horizon and a chance.

    Calls without a result yet, whatever the reason, are open bets; void ones are no bets.
    """
    bet = (
        group["result"].isin(["hit", "miss", "open"])
        & (group["horizon_imputed"] == 0)
        & group["reference_session"].notna()
    ).to_numpy() & np.isfinite(floats(group["chance"]))
    rows, against = group[bet], leans[bet]
    today = day_number(as_of)
    settled = is_scored(rows).to_numpy(dtype=bool)
    reference = days(rows["reference_session"])
    # a path that begins with the reference session tells of the outcome on that very day, and
    # so does a close elsewhere that came earlier on it
    at_once = (rows["first_session"] == rows["reference_session"]).to_numpy(dtype=bool)
    starts = reference - (at_once | (len(set(rows["closing"])) > 1))
    ends = _ends(rows, settled, today)
    chance = floats(rows["chance"])
    calls = TimedCalls(
        starts=starts,
        ends=np.maximum(ends, starts + 1),
        chances=np.where(against, 1.0 - chance, chance),
        right=(rows["result"] == "hit").to_numpy(dtype=bool) ^ against,
        settled=settled,
    )
    return e_process(calls, as_of=today, level=level, side=side)


def _ends(rows: pd.DataFrame, settled: BoolArray, today: int) -> IntArray:
    """Return the day on which each outcome is known, tomorrow while the window runs.

    A call that is open for want of a price after its deadline is lost from then on, so that a
    later answer changes nothing about the calls that came after it.
    """
    ends = np.full(len(rows), today + 1, dtype=np.int64)
    due = rows["deadline"].fillna("9999").to_numpy(dtype=str)
    overdue = ~settled & (due <= day_of(today).isoformat())
    ends[overdue] = days(rows["deadline"][overdue])
    ends[settled] = days(rows["deadline_session"][settled])
    return ends
