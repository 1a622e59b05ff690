"""Frozen records of the things a ledger knows by name, and the form of a read file."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Generic, Literal, TypeVar

if TYPE_CHECKING:
    from datetime import date

    from foresaid.model.issues import Issue

Row = TypeVar("Row")

Sense = Literal["direct", "inverse"]
SeriesKind = Literal["raw", "split-adjusted", "total-return"]


@dataclass(frozen=True, slots=True)
class Instrument:
    """One thing with a price.

    ``zone`` is a tz database name, ``opens`` and ``closes`` are local ``HH:MM``; all three
    are empty when unknown. ``sense`` is ``inverse`` where a lower quote means that the thing
    named has gained (a yield; a pair quoted the other way round). A pair quotes units of
    ``term`` for one unit of ``base``.
    """

    symbol: str
    name: str = ""
    currency: str = ""
    zone: str = ""
    opens: str = ""
    closes: str = ""
    sense: Sense = "direct"
    kind: str = "index"
    market: str = ""
    benchmark: str = ""
    base: str = ""
    term: str = ""


@dataclass(frozen=True, slots=True)
class Forecaster:
    """One person, desk or outlet whose calls are kept."""

    handle: str
    name: str = ""
    role: str = ""
    desk: str = ""
    aliases: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Action:
    """One corporate action, in force from the open of ``effective``.

    ``ratio`` is new shares for each old one (split), or the new level over the old (rebase).
    """

    instrument: str
    effective: date
    kind: str
    ratio: float | None = None
    amount: float | None = None
    currency: str = ""
    into: str = ""


@dataclass(frozen=True, slots=True)
class CodedCall:
    """One statement as read: a call in canonical form, or a reason why it is none.

    ``deadline`` is a calendar date, or None where the horizon counts ``sessions``. A stated
    probability has ``probability_low == probability_high``; a likelihood word spans a band.
    ``digest`` is the SHA-256 of the row as typed, by which a row is known again.
    """

    ref: str
    forecaster: str
    said_at: str
    said_zone: str
    instrument: str
    claim_typed: str
    claim: str
    not_a_call: str
    horizon_typed: str
    horizon: str
    horizon_imputed: bool
    deadline: date | None
    sessions: int | None
    probability_low: float | None
    probability_high: float | None
    likelihood: str
    given: str
    currency: str
    horizon_class: str
    specificity_class: str
    quote: str
    outlet: str
    link: str
    collection: str
    copy_of: str
    coder: str
    coded_at: str
    revises: str
    note: str
    digest: str


@dataclass(frozen=True)
class Parsed(Generic[Row]):
    """What came out of one file: good rows with their lines, faults, and remarks.

    Attributes
    ----------
    rows : tuple of Row
        The rows without a fault.
    lines : tuple of int
        The file line of each good row, same order.
    issues : tuple of Issue
        Every fault, ordered by line and column.
    remarks : tuple of str
        What was detected and assumed (delimiter, decimal mark), to be echoed to the user.
    """

    rows: tuple[Row, ...]
    lines: tuple[int, ...]
    issues: tuple[Issue, ...] = ()
    remarks: tuple[str, ...] = ()

    @property
    def has_errors(self) -> bool:
        """Whether any issue keeps a row out."""
        return any(issue.severity == "error" for issue in self.issues)
