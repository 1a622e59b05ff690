"""Outcomes: each call judged by its kind's kernel, with the alternates kept beside."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.binding import bind
from foresaid.claims.kernels import Unfit
from foresaid.claims.paths import LOOK_BACK
from foresaid.claims.registry import KINDS
from foresaid.claims.relative import NO_RETURN
from foresaid.settle.blocks import blank_like, put_rows, take_rows
from foresaid.settle.windows import (
    REASONS,
    VOID_REASONS,
    legs_lack_returns,
    resolve_windows,
    uncountable,
)

if TYPE_CHECKING:
    from collections.abc import Iterator

    from foresaid.claims.kernels import Judged, Kernel
    from foresaid.claims.kind import Kind
    from foresaid.market.known import Market
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows
    from foresaid.model.codebook import SettlementRules
    from foresaid.settle.windows import CallTimes, Resolved

CHUNK = 16_384  # windows judged at once: small enough to stay in the processor's cache
BLOCK = 32_768  # calls settled at once: all that is needed besides the answers is about these
NONE, MISS, HIT = -1, 0, 1
CLOSE_BEFORE = "close_before"
UNCOUNTABLE = "sessions cannot be counted on an instrument that has ended"
PRICE_QUERY = "a price in query decides it"
SHORTER, LONGER = "shorter", "longer"  # of imputed horizons, filled in by the pipeline


@dataclass(frozen=True)
class CallClaims:
    """What calls say; arrays over the n calls.

    Attributes
    ----------
    kind : ndarray of str, shape (n,)
        Names of registered kinds.
    values, units : ndarray, shape (n, n_quantities)
        The numbers of the phrases and their unit codes (``claims.binding``).
    blocked : ndarray of str, shape (n,)
        Why a call cannot be settled whatever the prices say; empty for most.
    is_void : ndarray of bool, shape (n,), or None
        Whether such a call is void for good instead of open; None for none.
    """

    kind: np.ndarray[Any, np.dtype[np.object_]]
    values: FloatArray
    units: IntArray
    blocked: np.ndarray[Any, np.dtype[np.object_]]
    is_void: BoolArray | None = None


@dataclass(frozen=True)
class Group:
    """Calls that one kernel judges: ``rows`` of the input, ordered by reference."""

    kind: Kind
    rows: IntArray


@dataclass(frozen=True)
class Outcomes:
    """What became of each call; arrays (n,) in the order of the input.

    Attributes
    ----------
    result : ndarray of str
        hit, miss, void or open.
    reason : ndarray of str
        Why a call is void or open, empty otherwise.
    resolved : Resolved
        The windows.
    marks : ndarray of float, shape (n, n_marks)
        Thresholds relative to the reference, NaN where there is none.
    decided : ndarray of int
        Position of the session that decided, -1 where nothing did.
    value : ndarray of float
        The price that decided, in continuous units, NaN where nothing did.
    measured : ndarray of float
        What was compared with the mark (``claims.kernels.Judged``), NaN where nothing did.
    direction : ndarray of str
        up, down or none; empty where the level decides and there is no reference yet.
    alternates : dict of str to ndarray of int
        Other readings: 1 hit, 0 miss, -1 where they do not apply.
    tie : ndarray of bool
        Whether the price that decided equals the mark of a strict comparison.
    """

    result: np.ndarray[Any, np.dtype[np.object_]]
    reason: np.ndarray[Any, np.dtype[np.object_]]
    resolved: Resolved
    marks: FloatArray
    decided: IntArray
    value: FloatArray
    measured: FloatArray
    direction: np.ndarray[Any, np.dtype[np.object_]]
    alternates: dict[str, IntArray]
    tie: BoolArray

    @property
    def is_early(self) -> BoolArray:
        """Whether a call was settled before its deadline session was known."""
        return (self.decided >= 0) & ~self.resolved.matured


def alternate_names() -> list[str]:
    """Return the names of all alternates that any kind keeps, in a fixed order."""
    names = {name for kind in KINDS.values() for name in kind.alternates}
    return [*sorted(names), CLOSE_BEFORE, SHORTER, LONGER]


def group_calls(
    kinds: np.ndarray[Any, np.dtype[np.object_]], inverse: BoolArray, order: IntArray
) -> Iterator[Group]:
    """Yield the calls of each kind, the inverse sense apart, in the given order."""
    # strings are looked up, not sorted: there are few of them
    codes_of = {name: code for code, name in enumerate(sorted(set(kinds.tolist())))}
    codes = np.fromiter(map(codes_of.__getitem__, kinds), dtype=np.int16, count=len(kinds))
    codes = 2 * codes[order] + inverse[order]
    for name, code in codes_of.items():
        for sense in (False, True):
            rows = order[codes == 2 * code + sense]
            if len(rows):
                yield Group(KINDS[str(name)].in_sense(inverse=sense), rows)


def settle_calls(
    times: CallTimes,
    claims: CallClaims,
    market: Market,
    inverse: BoolArray,
    rules: SettlementRules,
) -> Outcomes:
    """Return what became of each call as of the market's day.

    Parameters
    ----------
    times, claims : CallTimes, CallClaims
        The n calls.
    market : Market
        Prices known by the day of settlement.
    inverse : ndarray of bool, shape (n,)
        Whether the call's instrument has inverse sense.
    rules : SettlementRules
        The codebook's conventions.

    Returns
    -------
    Outcomes
        Nothing in it depends on prices after a call's deadline session.
    """
    n, whole = len(times.instrument), None
    for begin in range(0, max(n, 1), BLOCK):
        rows = slice(begin, min(begin + BLOCK, n))
        own, said = take_rows(times, rows), take_rows(claims, rows)
        part = _settle_block(own, said, market, inverse[rows], rules)
        if n <= BLOCK:
            return part
        whole = blank_like(part, n) if whole is None else whole
        put_rows(whole, part, rows)
        del part  # or two blocks would be held at once
    assert whole is not None
    return whole


def _settle_block(
    times: CallTimes,
    claims: CallClaims,
    market: Market,
    inverse: BoolArray,
    rules: SettlementRules,
) -> Outcomes:
    """Return what became of the calls of one block."""
    resolved = resolve_windows(times, market, rules)
    work = _Work(claims, market, resolved, rules, level_factors(times, market))
    work.leave(claims.blocked != "", "open", claims.blocked)
    if claims.is_void is not None:
        work.leave(claims.is_void, "void", claims.blocked)
    total_return = market.venue.total_return[times.instrument]
    order = np.argsort(resolved.windows.reference, kind="stable")
    for group in group_calls(claims.kind, inverse, order):
        if group.kind.direction != "by level":
            work.direction[group.rows] = group.kind.direction
        if group.kind.kernel.needs_legs:
            endless = uncountable(times, resolved, market, group.rows)
            work.leave(endless, "void", UNCOUNTABLE)
            work.leave(legs_lack_returns(times, market, group.rows), "void", NO_RETURN)
        if any(mark.role == "level" for mark in group.kind.marks):
            barred = np.zeros(len(order), dtype=bool)
            barred[group.rows] = total_return[group.rows]
            work.leave(barred, "void", "a total-return series has no levels")
        live = group.rows[work.is_live[group.rows]]
        for start in range(0, len(live), CHUNK):
            work.settle(group.kind, live[start : start + CHUNK])
    return work.outcomes()


def level_factors(times: CallTimes, market: Market) -> FloatArray:
    """Return continuous price over stated price on the day of each statement."""
    stated = times.said_day if times.stated_day is None else times.stated_day
    return market.level_factor(times.instrument, stated)


@dataclass(frozen=True)
class _Answer:
    """What calls come to on some prices.

    ``code`` is 1 hit, 0 miss, -1 where more sessions have to come, and below that where the
    call cannot be judged, for one of ``reasons``. ``judged`` is about those that are fit.
    """

    code: IntArray
    reasons: dict[int, tuple[str, str]]
    is_fit: BoolArray
    judged: Judged


class _Work:
    """The arrays of ``Outcomes`` while they are being filled."""

    def __init__(
        self,
        claims: CallClaims,
        market: Market,
        resolved: Resolved,
        rules: SettlementRules,
        level_factor: FloatArray,
    ) -> None:
        n = len(claims.kind)
        self.claims, self.market, self.resolved = claims, market, resolved
        self.rules, self.level_factor = rules, level_factor
        self.result = np.full(n, "open", dtype=object)
        self.result[np.isin(resolved.reason, VOID_REASONS)] = "void"
        self.reason = np.array(REASONS, dtype=object)[resolved.reason]
        self.is_live = resolved.matured | resolved.running
        self.marks = np.full((n, max(2, claims.values.shape[1])), np.nan)
        self.decided = np.full(n, -1, dtype=np.int64)
        self.value = np.full(n, np.nan)
        self.measured = np.full(n, np.nan)
        self.direction = np.full(n, "", dtype=object)
        self.tie = np.zeros(n, dtype=bool)
        self.alternates = {name: np.full(n, NONE, dtype=np.int64) for name in alternate_names()}

    def leave(self, rows: BoolArray, result: str, reason: object) -> None:
        """Keep calls from being judged, with the reason."""
        self.result[rows] = result
        self.reason[rows] = reason[rows] if isinstance(reason, np.ndarray) else reason
        self.is_live[rows] = False

    def settle(self, kind: Kind, rows: IntArray) -> None:
        """Judge calls of one kind and keep what is final."""
        windows = self.resolved.windows.take(rows)
        marks = self._bind(kind, rows, windows)
        self.marks[rows, : marks.shape[1]] = marks
        here = np.where(windows.additive, 0.0, 1.0)
        if kind.direction == "by level":
            self.direction[rows] = np.where(marks[:, 0] > here, "up", "down")
        answer = self._answer(kind.kernel, rows, windows, marks, self.market.bars)
        doubtful = self._is_doubtful(kind, rows, windows, answer)
        self.leave_rows(rows[doubtful], PRICE_QUERY, "open")
        for code, (reason, result) in answer.reasons.items():
            self.leave_rows(rows[(answer.code == code) & ~doubtful], reason, result)
        sure = (answer.code >= MISS) & ~doubtful
        self._keep(rows[sure], answer.judged, sure[answer.is_fit])
        kept = answer.is_fit & ~doubtful & self.resolved.matured[rows]
        self._keep_alternates(kind, rows[kept], windows.take(kept), marks[kept])

    def _answer(
        self, kernel: Kernel, rows: IntArray, windows: Windows, marks: FloatArray, bars: Bars
    ) -> _Answer:
        """Return what calls come to on some prices: a result, or why they have none."""
        code, reasons = self._unfit(kernel, rows, windows, marks, bars)
        fit = code == NONE
        judged = kernel.judge(bars, windows.take(fit), marks[fit], self.rules.tolerance)
        final = self.resolved.matured[rows[fit]] | judged.final
        code[fit] = np.where(final, judged.hit.astype(np.int64), NONE)
        return _Answer(code, reasons, fit, judged)

    def _unfit(
        self, kernel: Kernel, rows: IntArray, windows: Windows, marks: FloatArray, bars: Bars
    ) -> tuple[IntArray, dict[int, tuple[str, str]]]:
        """Return a code for each call that cannot be judged, and what the codes mean."""
        sunk = ~windows.additive & (bars.close[windows.reference] <= 0)
        unfit = [Unfit(sunk, "the reference price is not above zero")]
        unfit += kernel.unsound(bars, windows, marks, self.rules.tolerance)
        code = np.full(len(rows), NONE, dtype=np.int64)
        reasons = {}
        for number, (found, reason, result) in enumerate(unfit):
            # what later sessions may mend is no fault yet
            due = True if result == "void" else self.resolved.matured[rows]
            code[found & due & (code == NONE)] = NONE - 1 - number
            reasons[NONE - 1 - number] = reason, result.split()[0]
        return code, reasons

    def _is_doubtful(
        self, kind: Kind, rows: IntArray, windows: Windows, answer: _Answer
    ) -> BoolArray:
        """Return where prices in query decide: without them the answer is another."""
        result = np.zeros(len(rows), dtype=bool)
        doubts = self.market.doubts
        if doubts is None:
            return result
        some = np.flatnonzero(self._meets_query(windows))
        if len(some):
            own = windows.take(some)
            marks = self._bind(kind, rows[some], own, doubts.bars)
            other = self._answer(kind.kernel, rows[some], own, marks, doubts.bars)
            result[some] = other.code != answer.code[some]
        return result

    def _meets_query(self, windows: Windows) -> BoolArray:
        """Return which windows, with what kinds look back to, hold a price in query."""
        bars, doubts = self.market.bars, self.market.doubts
        assert doubts is not None
        count = np.concatenate(([0], np.cumsum(doubts.any)))
        start = np.maximum(windows.floor, windows.reference - LOOK_BACK)
        found = count[windows.last + 1] > count[start]
        if windows.legs is not None:
            queried = count[bars.offsets[1:]] > count[bars.offsets[:-1]]
            found |= np.append(queried, False)[windows.legs].any(axis=1)
        result: BoolArray = found
        return result

    def _bind(
        self, kind: Kind, rows: IntArray, windows: Windows, bars: Bars | None = None
    ) -> FloatArray:
        return bind(
            kind,
            self.claims.values[rows],
            self.claims.units[rows],
            reference=(bars or self.market.bars).close[windows.reference],
            level_factor=self.level_factor[rows],
            additive=windows.additive,
        )

    def leave_rows(self, rows: IntArray, reason: str, result: str = "void") -> None:
        """Keep calls from being judged, by row number."""
        chosen = np.zeros(len(self.result), dtype=bool)
        chosen[rows] = True
        if len(rows):
            self.leave(chosen, result, reason)

    def _keep(self, rows: IntArray, judged: Judged, kept: BoolArray) -> None:
        self.result[rows] = np.where(judged.hit[kept], "hit", "miss")
        self.reason[rows] = ""
        self.decided[rows] = judged.decided[kept]
        self.value[rows] = judged.value[kept]
        self.measured[rows] = judged.measured[kept]
        self.tie[rows] = judged.tie[kept]

    def _keep_alternates(
        self, kind: Kind, rows: IntArray, windows: Windows, marks: FloatArray
    ) -> None:
        """Judge other readings, of which those without a meaning stay empty."""
        bars, tolerance = self.market.bars, self.rules.tolerance
        for name, kernel in kind.alternates.items():
            self.alternates[name][rows] = kernel.hits(bars, windows, marks, tolerance)
        has_before = np.flatnonzero(windows.reference > windows.floor)
        before = windows.take(has_before)
        before = replace(before, reference=before.reference - 1)
        marks = self._bind(kind, rows[has_before], before)
        code, _ = self._unfit(kind.kernel, rows[has_before], before, marks, bars)
        hit = kind.kernel.hits(bars, before, marks, tolerance).astype(np.int64)
        self.alternates[CLOSE_BEFORE][rows[has_before]] = np.where(code == NONE, hit, NONE)

    def outcomes(self) -> Outcomes:
        """Return the filled arrays."""
        return Outcomes(
            result=self.result,
            reason=self.reason,
            resolved=self.resolved,
            marks=self.marks,
            decided=self.decided,
            value=self.value,
            measured=self.measured,
            direction=self.direction,
            alternates=self.alternates,
            tie=self.tie,
        )
