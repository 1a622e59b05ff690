"""The trace of one call: everything a stranger needs to settle it again by hand."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.kernels import Over
from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS
from foresaid.ledger import queries
from foresaid.model.codebook import parse_codebook
from foresaid.model.days import day_of
from foresaid.model.errors import UsageError
from foresaid.pipeline.confirming import describe_query, queried_sessions
from foresaid.pipeline.groups import listed_calls
from foresaid.pipeline.listing import CALL_COLUMNS
from foresaid.pipeline.settling import judge
from foresaid.pipeline.trace_words import (
    action_text,
    chance_text,
    clock_text,
    loss_text,
    price_text,
)

if TYPE_CHECKING:
    from foresaid.claims.kernels import Bound
    from foresaid.claims.kind import Kind
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Instrument
    from foresaid.pipeline.outcome_rows import Judgement

TINY = 1e-12


@dataclass(frozen=True)
class Trace:
    """A settlement step by step.

    Attributes
    ----------
    call : dict
        The row of ``foresaid calls``.
    steps : list of (str, str)
        What is looked at and what it says, in the order of the reasoning.
    prices : list of dict
        Every price used: what for, session, the file's numbers, file and SHA-256.
    alternates : dict
        Other readings and their results.
    """

    call: dict[str, Any]
    steps: list[tuple[str, str]]
    prices: list[dict[str, Any]]
    alternates: dict[str, str]


def trace_call(ledger: Ledger, ref: str) -> Trace:
    """Return the trace of one call under the latest settlement.

    Raises
    ------
    UsageError
        If there is no such call, or nothing is settled yet.
    """
    table, settlement = listed_calls(ledger)
    if settlement is None:
        raise UsageError("Nothing is settled yet. Run: foresaid settle")
    found = table[table["ref"] == ref]
    if found.empty:
        raise UsageError(f"There is no call {ref!r} in this ledger.")
    row = {str(name): value for name, value in found.iloc[0].items()}
    if row["result"] is None:
        raise UsageError(f"{ref} came after the last settlement. Run: foresaid settle")
    if row["given"] and queries.last_decision(ledger) != settlement.last_decision:
        raise UsageError(
            "Conditions were decided since the last settlement. Run: foresaid settle"
        )
    if queries.last_confirmation(ledger) != settlement.last_confirmation:
        raise UsageError(
            "Prices were confirmed since the last settlement. Run: foresaid settle"
        )
    listed = {name: row[name] for name in CALL_COLUMNS}
    alternates = json.loads(row["alternates"] or "{}")
    if row["not_a_call"]:
        return Trace(listed, _screened(row), [], {})
    book = parse_codebook(queries.codebook_source(ledger, settlement.codebook), file="ledger")
    frame = queries.calls(ledger)
    frame = frame[frame["ref"] == ref].reset_index(drop=True)
    judged = judge(ledger, frame, book, as_of=settlement.as_of, vintage=settlement.vintage)
    teller = _Teller(row, judged, book, settlement)
    return Trace(listed, teller.steps(), teller.prices(ledger), alternates)


def _screened(row: dict[str, Any]) -> list[tuple[str, str]]:
    return [
        ("statement", f"{row['forecaster']}, {row['said_at']}: {row['quote'] or 'no quote'}"),
        ("result", f"not a call ({row['not_a_call']}); counted as screened, never scored"),
    ]


class _Teller:
    """Puts the arrays of one call into words."""

    def __init__(
        self,
        row: dict[str, Any],
        judged: Judgement,
        book: Codebook,
        settlement: queries.Settlement,
    ) -> None:
        self.row, self.judged, self.book, self.settlement = row, judged, book, settlement
        self.claim = parse_claim(row["claim"])
        self.market = judged.world.market
        self.number = int(judged.calls.times.instrument[0])
        self.instrument: Instrument = judged.world.instruments[self.number]
        self.kind: Kind = KINDS[self.claim.kind].in_sense(
            inverse=self.instrument.sense == "inverse"
        )
        self.windows = judged.outcomes.resolved.windows

    def steps(self) -> list[tuple[str, str]]:
        """Return the reasoning, one line a step."""
        row = self.row
        steps = [
            (
                "statement",
                f"{row['forecaster']}, {row['said_at']}: {row['quote'] or 'no quote'}",
            ),
            ("source", " ".join(t for t in (row["outlet"], row["link"]) if t) or "none given"),
            ("claim", f"{row['instrument']} {row['claim']} (typed: {row['claim_typed']})"),
            ("rule", f"{self.kind.reads}"),
            ("condition", self._condition()),
            ("publication", self._publication()),
            ("currency", self._currency()),
            ("reference", self._reference()),
            ("horizon", self._horizon()),
            ("window", self._window()),
            ("actions", self._actions()),
            ("threshold", self._threshold()),
            ("arithmetic", self._arithmetic()),
            ("loss", loss_text(self.kind.loss, row)),
            ("in query", self._queries()),
            ("result", self._result()),
            ("chance", chance_text(row, enough=self.book.chance.enough_windows)),
            ("flags", row["flags"] or "none"),
            ("withdrawn", self._withdrawn()),
            (
                "settled",
                f"as of {self.settlement.as_of}, price vintage "
                f"{self.settlement.vintage}, codebook {self.settlement.codebook}",
            ),
        ]
        return [(name, text) for name, text in steps if text]

    def prices(self, ledger: Ledger) -> list[dict[str, Any]]:
        """Return the price rows behind the result, as they stand in their files."""
        wanted = {
            "reference": self.row["reference_session"],
            "decided": self.row["decided_session"],
            "deadline": self.row["deadline_session"],
        }
        for at, position in enumerate(queried_sessions(self.judged, 0), 1):
            day = day_of(int(self.market.bars.day[position])).isoformat()
            wanted[f"in query {at}"] = day
        if self._extreme_session() is not None:
            wanted["nearest in the window"] = self._extreme_session()
        found = []
        for session in dict.fromkeys(filter(None, wanted.values())):
            source = queries.price_source(
                ledger, self.row["instrument"], session, vintage=self.settlement.vintage
            )
            uses = ", ".join(use for use, at in wanted.items() if at == session)
            if source:
                found.append({"use": uses} | source)
        return found

    def _withdrawn(self) -> str:
        row = self.row
        if not row["withdrawn_at"]:
            return ""
        return (
            f"on {row['withdrawn_at']} ({row['withdrawn_why']}); it is still settled, and "
            "scores say how many of their calls were withdrawn"
        )

    def _condition(self) -> str:
        if not self.row["given"]:
            return ""
        start = day_of(int(self.judged.calls.times.said_day[0]))
        if self.row["reference_session"] is None:
            return f"{self.row['given']}: {self.row['reason']}"
        return f"{self.row['given']}: came true; the clock of the call starts on {start}"

    def _currency(self) -> str:
        if self.instrument.symbol == self.row["instrument"]:
            return ""
        return (
            f"judged on {self.instrument.symbol}: each price at the pair's last close by that "
            "day, the same rate for high, low and close"
        )

    def _publication(self) -> str:
        times = self.judged.calls.times
        day, minute = day_of(int(times.said_day[0])), float(times.said_minute[0])
        zone = self.instrument.zone or "the time as written (the instrument has no zone)"
        if minute < 0:
            rule = self.book.settlement.day_only.replace("-", " that day's ")
            return f"{day:%A} {day}, no time given: counts as {rule}"
        venue = self.market.venue
        opens, closes = (
            clock_text(venue.opens[self.number]),
            clock_text(venue.closes[self.number]),
        )
        hours = f"opens {opens}, closes {closes}"
        if not venue.hours_known[self.number]:
            hours += " (hours assumed by the codebook)"
        return (
            f"{self.row['said_at']} is {day:%A} {day} {clock_text(minute)} in {zone}; {hours}"
        )

    def _reference(self) -> str:
        if self.row["reference_session"] is None:
            return f"none: {self.row['reason'] or 'no session at or after publication yet'}"
        return (
            f"{self.row['reference_session']}, the first session whose close is at or after "
            f"publication: {price_text(self.row['reference_price'])}"
        )

    def _horizon(self) -> str:
        row = self.row
        said = day_of(int(self.judged.calls.times.said_day[0]))
        typed = row["horizon_typed"] or "nothing said"
        if row["sessions"]:
            return f"{typed}: {row['sessions']} sessions after the reference session"
        text = f"{typed}: from {said} to {row['deadline']}"
        return text + (" (imputed by the codebook)" if row["horizon_imputed"] else "")

    def _window(self) -> str:
        row = self.row
        if row["first_session"] is None:
            return ""
        until = row["deadline_session"] or "the last session known"
        rolled = ""
        if (
            row["deadline"]
            and row["deadline_session"]
            and row["deadline"] != row["deadline_session"]
        ):
            rolled = f", rolled back from {row['deadline']}, which is no session"
        n = int(self.windows.last[0] - self.windows.first[0]) + 1
        if self._over is Over.END:
            return f"judged on the close of {until}{rolled}"
        return f"{row['first_session']} through {until}{rolled}: {n} sessions"

    @property
    def _over(self) -> Over | None:
        bounds = self.kind.kernel.bounds
        if bounds:
            return bounds[0].over
        # what has a loss and no bounds is a distribution of the deadline close
        return Over.END if self.kind.loss else None

    def _actions(self) -> str:
        """Return the corporate actions that bear on the result."""
        if self.row["reference_session"] is None:
            return "none looked at: there is no reference yet"
        said = day_of(int(self.judged.calls.times.said_day[0]))
        end = day_of(int(self.market.bars.day[self.windows.last[0]]))
        texts = [
            action_text(one)
            for one in self.judged.world.actions
            if one.instrument == self.instrument.symbol
            and said < one.effective <= end
            and one.kind != "dividend"
        ]
        return "; ".join(texts) or "none from statement to deadline but dividends"

    def _queries(self) -> str:
        """Return the prices in query that the call looks at, or looked back to."""
        if self.row["reference_session"] is None:
            return ""
        found = [
            f"{one['instrument']} {one['session']}, {one['price']} {price_text(one['value'])} "
            f"(close {price_text(one['close'])}, the close before "
            f"{price_text(one['close_before'])})"
            for position in queried_sessions(self.judged, 0)
            for one in describe_query(self.judged, position)
        ]
        if not found:
            return ""
        if self.row["reason"]:
            return "; ".join(found) + "; the answer hangs on them"
        return "; ".join(found) + "; without them the answer is the same"

    def _threshold(self) -> str:
        marks = self.judged.outcomes.marks[0]
        if self.row["reference_price"] is None or not np.isfinite(marks[0]):
            return ""
        texts = [
            self._mark_text(i, float(marks[i]))
            for i, mark in enumerate(self.kind.marks[: len(marks)])
            if np.isfinite(marks[i])
            and (self.kind.kernel.bounds or mark.role in ("level", "share"))
        ]
        return "; ".join(texts)

    def _mark_text(self, index: int, mark: float) -> str:
        reference = float(self.row["reference_price"])
        if self.kind.marks[index].role == "share":
            return f"{100 * mark:.10g} %"
        if bool(self.windows.additive[0]):
            return f"{price_text(reference)} {mark:+.10g} = {price_text(reference + mark)}"
        price = reference * mark
        if self.kind.marks[index].role == "level":
            return f"{price_text(price)}, which is {mark:.6f} times the reference"
        return f"{price_text(reference)} x {mark:.10g} = {price_text(price)}"

    def _arithmetic(self) -> str:
        row = self.row
        if row["decided_price"] is None:
            return ""
        factor = self.market.bars.factor
        scale = float(
            factor[self.judged.outcomes.decided[0]] / factor[self.windows.reference[0]]
        )
        value = float(row["decided_price"])
        shown = price_text(value)
        if abs(scale - 1.0) > TINY:
            shown += f" x {price_text(scale)} = {price_text(value * scale)}"
        reference = float(row["reference_price"])
        move = f"{row['move_points']:+.10g}"
        if row["move_frac"] is not None:
            move = f"{100 * row['move_frac']:+.4f} %"
        tests = [self._test(bound, value * scale) for bound in self.kind.kernel.bounds]
        if self.kind.measures:
            tests.append(f"{self.kind.measures}: {row['measured']:.6g}")
        whole = (
            f"{self._field_name()} of {row['decided_session']} is {shown}, {move} from the "
            f"reference {price_text(reference)}"
        )
        return "; ".join([whole, *tests])

    def _test(self, bound: Bound, value: float) -> str:
        """Return how the price that decided stands to one mark, in words."""
        mark = float(self.judged.outcomes.marks[0][bound.mark])
        additive = bool(self.windows.additive[0])
        reference = float(self.row["reference_price"])
        limit = reference + mark if additive else reference * mark
        side = bound.side or (1 if mark > (0.0 if additive else 1.0) else -1)
        size = max(abs(limit), abs(reference)) if additive else abs(limit)
        slack = self.book.settlement.tolerance * size
        edge = limit + side * slack * (1 if bound.strict else -1)
        holds = (value - edge) * side > 0 if bound.strict else (value - edge) * side >= 0
        words = {1: "above", -1: "below"}[side]
        words = words if bound.strict else f"at or {words}"
        return f"{price_text(value)} is {'' if holds else 'not '}{words} {price_text(limit)}"

    def _field_name(self) -> str:
        outcomes = self.judged.outcomes
        bars, at = self.market.bars, outcomes.decided[0]
        value = outcomes.value[0]
        if value == bars.close[at]:
            return "the close"
        return "the high" if value == bars.high[at] else "the low"

    def _extreme_session(self) -> str | None:
        """Return the session of the nearest approach of a path that never got there."""
        bounds = self.kind.kernel.bounds
        if self._over is not Over.ANY or self.row["result"] != "miss" or len(bounds) != 1:
            return None
        up = self.judged.outcomes.marks[0][0] > (0.0 if self.windows.additive[0] else 1.0)
        up = bounds[0].side > 0 or (bounds[0].side == 0 and bool(up))
        own = slice(int(self.windows.first[0]), int(self.windows.last[0]) + 1)
        bars = self.market.bars
        field = bars.close
        if "RANGE" in bounds[0].on.name:
            field = bars.high if up else bars.low
        at = own.start + int(np.argmax(field[own]) if up else np.argmin(field[own]))
        return day_of(int(bars.day[at])).isoformat()

    def _result(self) -> str:
        row = self.row
        return str(row["result"]) + (f": {row['reason']}" if row["reason"] else "")
