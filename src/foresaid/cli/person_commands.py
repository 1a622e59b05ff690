"""Commands by which a person says what no price file can: decide, confirm, withdraw."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated, Any

import typer

from foresaid.cli.console import Format, say
from foresaid.cli.options import LedgerPath, OutputFormat, now, today


class Answer(StrEnum):
    """Whether a condition has come true."""

    met = "met"
    not_met = "not-met"


def decide(
    ref: Annotated[str, typer.Argument(metavar="REF", help="The call's ref.")],
    answer: Annotated[
        Answer, typer.Argument(metavar="met|not-met", help="Whether the fact came true.")
    ],
    ledger: LedgerPath,
    at: Annotated[
        str, typer.Option("--at", help="When it came true, or when it was clear it had not.")
    ],
    evidence: Annotated[str, typer.Option("--evidence", help="How anyone can check it.")],
    who: Annotated[str, typer.Option("--who", help="Who decided.")] = "",
) -> None:
    """Say whether the plain fact on which a call depends came true.

    The call's clock starts at that time. A later decision about the same call stands in for
    an earlier one; both stay in the ledger.

    Example: foresaid decide C-0412 met --at 2025-03-14 --evidence "Gazette no. 12, page 3"
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.deciding import DecisionRequest, decide_condition

    request = DecisionRequest(
        ref, answer is Answer.met, at, who, evidence, today=today(), at=now()
    )
    with Ledger.open(ledger) as opened:
        condition = decide_condition(opened, request)
    say(f"{ref}: {condition}: {answer.value}. Next: foresaid settle")


def confirm(
    ledger: LedgerPath,
    instrument: Annotated[
        str, typer.Argument(metavar="[INSTRUMENT]", help="The instrument's symbol.")
    ] = "",
    session: Annotated[
        str, typer.Argument(metavar="[SESSION]", help="The day of its prices.")
    ] = "",
    evidence: Annotated[str, typer.Option("--evidence", help="How anyone can check it.")] = "",
    who: Annotated[str, typer.Option("--who", help="Who looked.")] = "",
    format_: OutputFormat = Format.table,
) -> None:
    """Say that a price in query is right; alone, list such prices.

    A wrong price is mended by importing a file with the right one.

    Example: foresaid confirm ABC 2025-03-10 --evidence "Bulletin of the exchange, no. 47"
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.confirming import Confirmation, confirm_prices, prices_in_query

    with Ledger.open(ledger) as opened:
        if not instrument:
            _show_queries(prices_in_query(opened), format_)
            return
        request = Confirmation(instrument, session, who, evidence, at=now())
        close = confirm_prices(opened, request)
    say(f"{instrument} {session}: right as it stands, close {close}. Next: foresaid settle")


def _show_queries(rows: list[dict[str, Any]], form: Format) -> None:
    from foresaid.cli.console import console, give_out
    from foresaid.pipeline.confirming import QUERY_COLUMNS
    from foresaid.report.tables import Column, make_table

    if form is not Format.table:
        give_out(rows, QUERY_COLUMNS, form)
        return
    if not rows:
        say("No call waits for a price.")
        return
    columns = [
        Column("instrument", lambda row: str(row["instrument"]), "left"),
        Column("session", lambda row: str(row["session"]), "left"),
        Column("price", lambda row: str(row["price"]), "left"),
        Column("value", lambda row: f"{row['value']:g}"),
        Column("close", lambda row: f"{row['close']:g}"),
        Column("close before", lambda row: f"{row['close_before']:g}"),
        Column("calls", lambda row: str(row["calls"]), "left"),
    ]
    screen = console()
    screen.print(make_table(columns, rows, width=screen.width))


def withdraw(
    ref: Annotated[str, typer.Argument(metavar="REF", help="The call's ref.")],
    ledger: LedgerPath,
    at: Annotated[str, typer.Option("--at", help="When it was withdrawn.")],
    why: Annotated[str, typer.Option("--why", help="The reason given.")],
    who: Annotated[str, typer.Option("--who", help="Who keeps the record of it.")] = "",
) -> None:
    """Mark a call as withdrawn; it stays, and is settled all the same.

    Scores tell how many calls of a group were withdrawn.

    Example: foresaid withdraw C-0412 --at 2025-03-14 --why "Said on air to be a slip"
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.withdrawing import WithdrawalRequest, withdraw_call

    request = WithdrawalRequest(ref, at, who, why, today=today(), at=now())
    with Ledger.open(ledger) as opened:
        withdraw_call(opened, request)
    say(f"{ref}: marked as withdrawn. It still settles.")


def add_to(app: typer.Typer) -> None:
    """Register the commands."""
    app.command("decide")(decide)
    app.command("confirm")(confirm)
    app.command("withdraw")(withdraw)
