"""One row of a calls file: its cells to a coded call, with every fault in it."""

from __future__ import annotations

import difflib
import hashlib
import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any
from zoneinfo import ZoneInfo

from foresaid.claims.claim import Claim, PhraseError
from foresaid.claims.classes import horizon_class, specificity_class
from foresaid.claims.conditions import parse_condition
from foresaid.claims.horizons import Horizon, parse_horizon
from foresaid.claims.likelihood import Likelihood, parse_likelihood_word
from foresaid.claims.phrases import (
    parse_claim,
    print_claim,
    stated_probability,
)
from foresaid.claims.units import unit_faults
from foresaid.ingest.cells import parse_probability
from foresaid.ingest.dates import parse_date, parse_said_at
from foresaid.ingest.faults import nearest
from foresaid.ingest.rows import RowReader
from foresaid.model.issues import clip
from foresaid.model.records import CodedCall
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from datetime import date

    from foresaid.ingest.tables import RawTable
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Instrument
    from foresaid.model.said import SaidAt

REQUIRED = ("ref", "forecaster", "said_at", "instrument", "claim", "horizon")
OPTIONAL = (
    "currency", "probability", "given", "quote", "outlet", "link", "collection", "coder",
    "coded_at", "revises", "copy_of", "note",
)  # fmt: skip
LONGEST_REF = 200
TEXTS = ("currency", "quote", "outlet", "link", "collection", "coder", "note")
LAYOUT = dict.fromkeys(map(ord, "\n\r\t\u2028\u2029"))


@dataclass(frozen=True)
class CallContext:
    """What a calls file is read against.

    Attributes
    ----------
    instruments : mapping of str to Instrument
        By symbol.
    handles : mapping of str to str
        From every handle and alias to the handle.
    owners : mapping of str to str
        Who made each statement that the ledger holds, by ref.
    codebook : Codebook
        Rules in force.
    today : date
        Nothing may have been said later.
    order : str
        How dates are written: iso, dmy or mdy.
    """

    instruments: Mapping[str, Instrument]
    handles: Mapping[str, str]
    owners: Mapping[str, str]
    codebook: Codebook
    today: date
    order: str = "iso"


class CallRow(RowReader):
    """One call while it is being read."""

    def __init__(
        self, table: RawTable, index: int, context: CallContext, owners: Mapping[str, str]
    ) -> None:
        super().__init__(table, index)
        self.context, self.owners = context, owners

    def read(self) -> CodedCall | None:
        """Return the coded call, None when the row has a fault."""
        ref, forecaster = self._ref(), self._known("forecaster", self.context.handles)
        claim = self._claim()
        is_call = claim is None or claim.is_call
        instrument = self._instrument(needed=is_call)
        said, said_on = self._said(instrument)
        self._check_claim(claim, instrument, column="claim")
        horizon = self._horizon(said_on, needed=is_call)
        likelihood = self._probability(claim)
        given = self._given(said_on)
        coded_at, link = self._coded_at(said_on), self._link()
        copy_of, revises = (
            self._other("copy_of", forecaster),
            self._other("revises", forecaster),
        )
        for column in TEXTS:
            self.check_text(column, self.cell(column).translate(LAYOUT), limit=None)
        if self.issues or claim is None or said is None or said_on is None:
            return None
        return CodedCall(
            ref=ref,
            forecaster=self.context.handles[forecaster],
            said_at=said.text,
            said_zone=said.zone,
            instrument=instrument.symbol if instrument else "",
            claim_typed=self.cell("claim"),
            claim=print_claim(claim),
            not_a_call=claim.reason,
            horizon_typed=self.cell("horizon"),
            **self._horizon_fields(horizon, said_on, claim, likelihood),
            probability_low=likelihood.low if likelihood else None,
            probability_high=likelihood.high if likelihood else None,
            likelihood=likelihood.text if likelihood else "",
            given=given,
            copy_of=copy_of,
            revises=revises,
            coded_at=coded_at,
            link=link,
            currency=self.cell("currency"),
            quote=self.cell("quote"),
            outlet=self.cell("outlet"),
            collection=self.cell("collection"),
            coder=self.cell("coder"),
            note=self.cell("note"),
            digest=self._digest(),
        )

    def _horizon_fields(
        self,
        horizon: Horizon | None,
        said_on: date,
        claim: Claim,
        likelihood: Likelihood | None,
    ) -> dict[str, Any]:
        book = self.context.codebook
        dated = horizon is not None and not horizon.imputed
        return {
            "horizon": horizon.text if horizon else "",
            "horizon_imputed": bool(horizon and horizon.imputed),
            "deadline": horizon.deadline if horizon else None,
            "sessions": horizon.sessions if horizon else None,
            "horizon_class": horizon_class(horizon, said=said_on, codebook=book)
            if horizon
            else "",
            "specificity_class": specificity_class(
                claim, dated=dated, has_probability=likelihood is not None, codebook=book
            ),
        }

    def _ref(self) -> str:
        ref = self.cell("ref")
        if not ref or len(ref) > LONGEST_REF or not ref.isprintable():
            self.fault(
                "ref", "bad-ref", "a ref is a short text that names the row", "Write one."
            )
        return ref

    def _known(self, column: str, known: Mapping[str, object]) -> str:
        text = self.cell(column)
        if text not in known:
            what = f"`{clip(text)}` is no known {column}" if text else f"there is no {column}"
            close = nearest(text, known)
            hint = f"Import it first: foresaid import {column}s FILE."
            hint = f"The nearest known is `{close}`." if close else hint
            self.fault(column, f"unknown-{column}", what, hint)
        return text

    def _claim(self) -> Claim | None:
        try:
            claim = parse_claim(self.cell("claim"))
        except PhraseError as fault:
            self.fault("claim", "bad-claim", fault.message, fault.hint)
            return None
        reasons = self.context.codebook.not_a_call_reasons
        if not claim.is_call and claim.reason not in reasons:
            close = difflib.get_close_matches(claim.reason, reasons, n=1)
            message = f"`{clip(claim.reason)}` is no reason the codebook knows"
            hint = f"Write one of: {', '.join(reasons)}."
            if close:
                hint = f"The nearest is `not a call: {close[0]}`."
            self.fault("claim", "bad-reason", message, hint)
            return None
        return claim

    def _instrument(self, *, needed: bool) -> Instrument | None:
        text = self.cell("instrument")
        if not text and not needed:
            return None
        return self.context.instruments.get(self._known("instrument", self.context.instruments))

    def _check_claim(
        self, claim: Claim | None, instrument: Instrument | None, *, column: str
    ) -> None:
        """Check a claim against the instrument it is made about."""
        if claim is None or instrument is None:
            return
        for symbol in claim.others:
            if symbol == instrument.symbol:
                message = f"`{clip(symbol)}` is compared with itself"
                self.fault(column, "with-itself", message, "Name another instrument.")
            elif symbol not in self.context.instruments:
                close = nearest(symbol, self.context.instruments)
                message = f"`{clip(symbol)}` is no known instrument"
                hint = f"The nearest known is `{close}`." if close else "Import it first."
                self.fault(column, "unknown-instrument", message, hint)
        kind = self.context.codebook.instrument_kinds[instrument.kind]
        fault = unit_faults(claim, instrument.kind, kind)
        if fault is not None:
            self.fault(column, "bad-unit", fault.message, fault.hint)

    def _said(self, instrument: Instrument | None) -> tuple[SaidAt | None, date | None]:
        """Return when it was said, and the date in the venue's zone."""
        said = parse_said_at(self.cell("said_at"), order=self.context.order)
        if isinstance(said, CellFault):
            self._cell_fault("said_at", said)
            return None, None
        if said.time is not None and said.utc is None:
            zone = instrument.zone if instrument else ""
            if not zone:
                self.fault(
                    "said_at",
                    "no-zone",
                    "the time has no zone, and the instrument has none to lend",
                    "Add an offset, `2025-03-14T12:15+01:00`, or a zone name, "
                    "`2025-03-14 12:15 Europe/Vienna`.",
                )
                return None, None
            said = said.in_zone(zone)
            if isinstance(said, CellFault):
                self._cell_fault("said_at", said)
                return None, None
        said_on = said.date
        if said.utc is not None and instrument is not None and instrument.zone:
            said_on = said.utc.astimezone(ZoneInfo(instrument.zone)).date()
        if said_on > self.context.today:
            self.fault(
                "said_at",
                "future-date",
                f"{said_on} is after today, {self.context.today}",
                "A call is entered once it has been said.",
            )
            return None, None
        return said, said_on

    def _horizon(self, said_on: date | None, *, needed: bool) -> Horizon | None:
        if said_on is None or not needed:
            return None
        horizon: Horizon | None = self._phrase(
            "horizon",
            "bad-horizon",
            lambda text: parse_horizon(text, said=said_on, codebook=self.context.codebook),
        )
        return horizon

    def _given(self, said_on: date | None) -> str:
        if not self.cell("given") or said_on is None:
            return ""
        condition = self._phrase(
            "given", "bad-condition", lambda text: parse_condition(text, said=said_on)
        )
        if condition is None:
            return ""
        if condition.claim is not None:
            instrument = self.context.instruments.get(condition.instrument)
            if instrument is None:
                self.fault(
                    "given",
                    "unknown-instrument",
                    f"`{clip(condition.instrument)}` is no known instrument",
                    "A condition begins with a known instrument or with `fact:`.",
                )
            self._check_claim(condition.claim, instrument, column="given")
        return str(condition.text)

    def _phrase(self, column: str, code: str, read: Callable[[str], Any]) -> Any:  # noqa: ANN401
        try:
            return read(self.cell(column))
        except PhraseError as fault:
            self.fault(column, code, fault.message, fault.hint)
            return None

    def _probability(self, claim: Claim | None) -> Likelihood | None:
        text = self.cell("probability")
        stated = stated_probability(claim) if claim is not None else None
        if not text or stated is not None:
            if text:
                self.fault(
                    "probability",
                    "double-probability",
                    "the claim states its probability itself",
                    "Leave the cell empty.",
                )
            return Likelihood(stated, stated) if stated is not None else None
        number = parse_probability(text)
        if isinstance(number, float):
            return Likelihood(number, number)
        if isinstance(number, CellFault) and text[:1] in "+-.0123456789":
            self._cell_fault("probability", number)
            return None
        word: Likelihood | None = self._phrase(
            "probability",
            "bad-probability",
            lambda said: parse_likelihood_word(said, self.context.codebook),
        )
        return word

    def _coded_at(self, said_on: date | None) -> str:
        text = self.cell("coded_at")
        if not text:
            return ""
        coded: Any = (
            parse_date(text, order=self.context.order)
            if len(text) <= 10
            else parse_said_at(text, order=self.context.order)
        )
        if isinstance(coded, CellFault):
            self._cell_fault("coded_at", coded)
            return ""
        day = coded if not hasattr(coded, "text") else coded.date
        if day > self.context.today:
            self.fault("coded_at", "future-date", f"{day} is after today", "Mend the date.")
        if (
            said_on is not None
            and day < said_on
            and len(text) <= 10
            and (said_on - day).days > 1
        ):
            self.fault(
                "coded_at",
                "coded-before-said",
                f"{day} is before the statement",
                "Mend one of the two dates.",
            )
        return str(coded.text if hasattr(coded, "text") else coded.isoformat())

    def _link(self) -> str:
        link = self.cell("link")
        if link and not link.lower().startswith(("https://", "http://")):
            self.fault(
                "link",
                "bad-link",
                "a link begins with https:// or http://",
                "Write the whole address, or nothing.",
            )
        return link

    def _other(self, column: str, forecaster: str) -> str:
        """Return the ref of another statement of the same forecaster."""
        other = self.cell(column)
        if not other:
            return ""
        owner = self.owners.get(other)
        if owner is None or other == self.cell("ref"):
            self.fault(
                column,
                "unknown-ref",
                f"there is no other statement `{clip(other)}`",
                "Name the ref of a row in this file or in the ledger.",
            )
        elif owner != self.context.handles.get(forecaster):
            self.fault(
                column,
                "other-speaker",
                f"`{clip(other)}` was said by `{clip(owner)}`",
                "A copy or revision has the same forecaster.",
            )
        return other

    def _cell_fault(self, column: str, fault: CellFault) -> None:
        self.fault(column, fault.code, fault.message, fault.hint)

    def _digest(self) -> str:
        typed = {name: self.cell(name) for name in (*REQUIRED, *OPTIONAL)}
        text = json.dumps(typed, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
        return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()
