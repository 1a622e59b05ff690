"""The timing and field hurdles of groups of calls: all moved along one calendar together."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.chance.field import field_test, luck_band, timing_test
from foresaid.chance.null_worlds import Field, ShiftRules, null_worlds
from foresaid.chance.volatility import rolling_volatility
from foresaid.ledger import queries
from foresaid.model.days import day_of
from foresaid.pipeline.groups import is_headline
from foresaid.pipeline.settling import groups_of, settled
from foresaid.score.verdict import Shifted

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import date

    from foresaid.chance.field import FieldTest, TimingTest
    from foresaid.chance.null_worlds import NullWorlds
    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.pipeline.groups import Grouped
    from foresaid.pipeline.settling import Again

BAND_COLUMNS = ("luck_middle", "luck_high", "luck_low")
BAND = (0.5, 0.95)  # shares of shifts in which the best of the field stays below the band


@dataclass(frozen=True)
class Hurdles:
    """What moving the field along its calendar says of each group.

    Attributes
    ----------
    shifted : list of Shifted or None
        One for each group, None where no call takes part.
    band : list of dict
        For each group what luck alone gives the best and the worst of the field, in hits of
        its own calls (``BAND_COLUMNS``); None outside the field.
    shifts : int
        How many shifts there are.
    first_day, last_day : date or None
        The ends of the calendar.
    """

    shifted: list[Shifted | None]
    band: list[dict[str, float | None]]
    shifts: int
    first_day: date | None
    last_day: date | None


@dataclass(frozen=True)
class Headline:
    """The calls in the headline scores, settled again.

    ``rows`` are their rows of the table, in the order of ``again``.
    """

    rows: IntArray
    again: Again

    def went(self, n: int) -> IntArray:
        """Return which way the price went from reference to deadline, 0 elsewhere; (n,)."""
        windows, close = (
            self.again.outcomes.resolved.windows,
            self.again.world.market.bars.close,
        )
        result = np.zeros(n, dtype=np.int64)
        if len(self.rows):
            result[self.rows] = np.sign(close[windows.last] - close[windows.reference])
        return result


def settle_headline(ledger: Ledger, found: Grouped) -> Headline:
    """Return the matured calls with a stated horizon, settled again as they were."""
    rows = np.flatnonzero(is_headline(found.table).to_numpy(dtype=bool))
    frame = queries.calls(ledger).set_index("call", drop=False)
    again = settled(
        ledger,
        frame.loc[found.table["call"].iloc[rows].tolist()].reset_index(drop=True),
        found.codebook,
        as_of=found.settlement.as_of,
        vintage=found.settlement.vintage,
    )
    return Headline(rows, again)


def field_hurdles(
    headline: Headline,
    found: Grouped,
    right: BoolArray,
    turned: BoolArray,
    ranked: Sequence[bool],
) -> Hurdles:
    """Return the hurdles of every group.

    Parameters
    ----------
    headline : Headline
        The calls that take part.
    found : Grouped
        All calls with their groups.
    right, turned : ndarray of bool, shape (n_rows,)
        Whether each row of the table came right, and whether it leans against its claim.
    ranked : sequence of bool
        Which groups make up the field: those that may be judged, whatever came of their calls.
    """
    record = np.zeros(len(found.table), dtype=np.int64)
    for number, (_, rows) in enumerate(found.groups):
        record[rows] = number
    own = headline.rows
    worlds = _worlds(headline.again, found, record[own], right[own], turned[own])
    counts = _padded(worlds, len(found.groups))
    n_calls = np.zeros(len(found.groups), dtype=np.int64)
    n_calls[: len(worlds.n_calls)] = worlds.n_calls
    members = np.flatnonzero(np.asarray(ranked, dtype=bool) & (n_calls > 0))
    chosen = timing_test(counts[members])
    field = field_test(counts[members], chosen)
    is_empty = worlds.last_day < worlds.first_day
    return Hurdles(
        shifted=_shifted(timing_test(counts), n_calls, worlds.n_shifts, members, field),
        band=_bands(chosen, field, members, len(found.groups)),
        shifts=0 if is_empty else worlds.n_shifts,
        first_day=None if is_empty else day_of(worlds.first_day),
        last_day=None if is_empty else day_of(worlds.last_day),
    )


def _worlds(
    again: Again, found: Grouped, record: IntArray, right: BoolArray, turned: BoolArray
) -> NullWorlds:
    codebook, market = found.codebook, again.world.market
    volatility = None
    if codebook.chance.shift_marks == "volatility":
        volatility = rolling_volatility(
            market.bars,
            market.venue.additive,
            sessions=codebook.chance.volatility_sessions,
            minimum=codebook.chance.volatility_minimum,
        )
    rules = ShiftRules(codebook.settlement.tolerance, codebook.chance.shift_span, volatility)
    done = again.outcomes.resolved.matured & (again.outcomes.decided >= 0)
    field = Field(again.starts, right, turned, record)
    return null_worlds(groups_of(again.calls, done), market.bars, field, rules)


def _padded(worlds: NullWorlds, n_groups: int) -> Any:  # noqa: ANN401 - an int array
    """Return the counts with a row for every group, also for those without a call."""
    counts = np.zeros((n_groups, worlds.n_shifts), dtype=np.int32)
    counts[: len(worlds.counts)] = worlds.counts
    return counts


def _shifted(
    timing: TimingTest, n_calls: IntArray, shifts: int, members: IntArray, field: FieldTest
) -> list[Shifted | None]:
    place = {int(group): at for at, group in enumerate(members)}
    result: list[Shifted | None] = []
    for group, n in enumerate(n_calls.tolist()):
        if not n:
            result.append(None)
            continue
        at = place.get(group)
        result.append(
            Shifted(
                n=n,
                hits=int(timing.hits[group]),
                mean=float(timing.mean[group]),
                deviation=float(timing.deviation[group]),
                p_upper=float(timing.p_upper[group]),
                p_lower=float(timing.p_lower[group]),
                best_upper=float(timing.best_upper[group]),
                best_lower=float(timing.best_lower[group]),
                shifts=shifts,
                p_field=None if at is None else float(field.p_upper[at]),
                p_field_low=None if at is None else float(field.p_lower[at]),
                field_size=field.n_records,
            )
        )
    return result


def _bands(
    timing: TimingTest, field: FieldTest, members: IntArray, n_groups: int
) -> list[dict[str, float | None]]:
    result: list[dict[str, float | None]] = [
        dict.fromkeys(BAND_COLUMNS) for _ in range(n_groups)
    ]
    band = luck_band(timing, field, BAND)
    for at, group in enumerate(members):
        ends = (band.hits_upper[0, at], band.hits_upper[1, at], band.hits_lower[1, at])
        result[group] = dict(zip(BAND_COLUMNS, map(float, ends), strict=True))
    return result
