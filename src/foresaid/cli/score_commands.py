"""Commands that read a ledger: calls, trace, score."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from foresaid.cli.console import Format, console, counted, give_out, say, write
from foresaid.cli.options import LedgerPath, OutputFormat

if TYPE_CHECKING:
    from rich.console import Console

GroupKeys = Annotated[
    str,
    typer.Option(
        help="Group by any of forecaster, horizon, specificity, direction, instrument, "
        "desk, year, with commas; 'all' for one group."
    ),
]
NOTHING_SETTLED = "Nothing is settled yet, so outcomes are empty. Run: foresaid settle"


def calls(
    ledger: LedgerPath,
    forecaster: Annotated[
        str | None, typer.Option(help="Only this forecaster's calls.")
    ] = None,
    instrument: Annotated[
        str | None, typer.Option(help="Only calls on this instrument.")
    ] = None,
    outcome: Annotated[
        str | None, typer.Option(help="Only hit, miss, open, void or 'not a call'.")
    ] = None,
    format_: OutputFormat = Format.table,
) -> None:
    """List the calls with their outcomes under the latest settlement.

    Example: foresaid calls --ledger desk.foresaid --outcome open --format csv
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.listing import CALL_COLUMNS, call_rows
    from foresaid.report.tables import call_columns, make_table

    wanted = {"forecaster": forecaster, "instrument": instrument, "outcome": outcome}
    with Ledger.open(ledger) as opened:
        rows, stale = call_rows(opened, {k: v for k, v in wanted.items() if v is not None})
    if stale is None:
        say(NOTHING_SETTLED)
    _tell_stale(stale or ())
    if format_ is not Format.table:
        give_out(rows, CALL_COLUMNS, format_)
        return
    screen = console()
    screen.print(make_table(call_columns(), rows, width=screen.width))
    say(f"{counted(len(rows), 'call')}.")


def trace(
    ref: Annotated[str, typer.Argument(metavar="REF", help="The call's ref.")],
    ledger: LedgerPath,
    format_: OutputFormat = Format.table,
) -> None:
    """Show step by step how one call was settled.

    Example: foresaid trace C-0412 --ledger desk.foresaid
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.tracing import trace_call
    from foresaid.report.exports import as_json
    from foresaid.report.traces import trace_rows, trace_text

    with Ledger.open(ledger) as opened:
        found = trace_call(opened, ref)
    if format_ is Format.json:
        write(as_json(vars(found)))
    elif format_ is Format.csv:
        give_out(
            trace_rows(found.steps, found.prices, found.alternates), ["step", "text"], format_
        )
    else:
        width = min(console().width, 110)
        write(trace_text(found.call, found.steps, found.prices, found.alternates, width=width))


def score(
    ledger: LedgerPath,
    by: GroupKeys = "forecaster",
    weighted: Annotated[
        bool, typer.Option("--weighted", help="Count the codebook's class weights, too.")
    ] = False,
    field: Annotated[
        bool, typer.Option("--field", help="Rank the field beside the band of luck.")
    ] = False,
    format_: OutputFormat = Format.table,
) -> None:
    """Score the settled calls against four kinds of chance.

    A coin; the market's own past; the same calls at other times; and the best of the field
    under those.

    Example: foresaid score --ledger desk.foresaid --by forecaster,horizon
    """
    show_scores(ledger, _keys(by), format_, weighted=weighted, field=field)


def show_scores(
    ledger: Path, keys: list[str], form: Format, *, weighted: bool = False, field: bool = False
) -> None:
    """Give out the scores of one ledger, with the cautions beside the table."""
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.scoring import score_columns_of, score_ledger
    from foresaid.report import tables
    from foresaid.report.cautions import CAUTIONS

    with Ledger.open(ledger) as opened:
        scores = score_ledger(opened, keys, weighted=weighted)
    _tell_stale(scores.stale)
    if form is not Format.table:
        give_out(scores.rows, score_columns_of(keys), form)
        return
    if not scores.rows:
        say("There is no call to score yet.")
        return
    screen = console()
    if field:
        _show_field(screen, keys, scores.rows)
    else:
        shown = tables.score_columns(keys, has_weights=weighted)
        screen.print(tables.make_table(shown, scores.rows, width=screen.width))
        screen.print(f"\n{tables.SCORE_GUIDE}\n")
        beside = [row for row in scores.rows if tables.has_something_beside(row)]
        if beside:
            columns = tables.beside_columns(keys)
            screen.print(tables.make_table(columns, beside, width=screen.width))
            screen.print(f"\n{tables.BESIDE_GUIDE}\n")
    for text in CAUTIONS:
        screen.print(text)


def _show_field(screen: Console, keys: list[str], rows: list[dict[str, Any]]) -> None:
    from foresaid.report import field
    from foresaid.report.tables import make_table

    members = field.ranked(rows)
    if members:
        shown = field.field_columns(keys)
        screen.print(make_table(shown, members, width=screen.width))
        screen.print(f"\n{field.FIELD_GUIDE}\n")
        if field.shares_text(members[0]):
            screen.print(f"{field.shares_text(members[0])}\n")
    apart = [row for row in rows if not field.in_field(row)]
    if apart:
        screen.print(field.APART_GUIDE)
        screen.print(make_table(field.apart_columns(keys), apart, width=screen.width))
        screen.print("")


def errors(
    ledger: LedgerPath,
    by: GroupKeys = "forecaster",
    format_: OutputFormat = Format.table,
) -> None:
    """Show how far off targets, ranges, quantiles and bins were.

    Each is set against a forecast that takes no skill: no change for targets, the
    instrument's own past moves for the others.

    Example: foresaid errors --ledger desk.foresaid --by forecaster,horizon
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.forecast_errors import error_columns, forecast_errors
    from foresaid.pipeline.groups import grouped_calls
    from foresaid.report import tables
    from foresaid.report.cautions import CAUTIONS

    keys = _keys(by)
    with Ledger.open(ledger) as opened:
        found = grouped_calls(opened, keys)
    rows = forecast_errors(found)
    _tell_stale(found.stale)
    if format_ is not Format.table:
        give_out(rows, error_columns(keys), format_)
        return
    if not rows:
        say("No target, range, quantiles or bins have matured with a stated date.")
        return
    screen = console()
    screen.print(tables.make_table(tables.error_columns(keys), rows, width=screen.width))
    screen.print(f"\n{tables.ERROR_GUIDE}\n")
    for text in CAUTIONS:
        screen.print(text)


def compare(
    first: Annotated[str, typer.Argument(metavar="FIRST", help="A forecaster.")],
    second: Annotated[str, typer.Argument(metavar="SECOND", help="Another one.")],
    ledger: LedgerPath,
    format_: OutputFormat = Format.table,
) -> None:
    """Compare two forecasters on the calls that both made.

    Only matured calls on the same instrument with the same window count.

    Example: foresaid compare a.lind b.kroll --ledger desk.foresaid
    """
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.comparing import COMPARE_COLUMNS, compare_forecasters
    from foresaid.report.cautions import CAUTIONS
    from foresaid.report.comparisons import comparison_lines

    with Ledger.open(ledger) as opened:
        row = compare_forecasters(opened, first, second)
    if format_ is not Format.table:
        give_out([row], COMPARE_COLUMNS, format_)
        return
    screen = console()
    for text in (*comparison_lines(row), "", *CAUTIONS):
        screen.print(text)


def _keys(by: str) -> list[str]:
    """Return the keys of ``--by``; ``all`` stands for none."""
    return [] if by.strip() == "all" else [key.strip() for key in by.split(",") if key.strip()]


def _tell_stale(parts: tuple[str, ...]) -> None:
    if parts:
        say(f"Since the last settlement there are {' and '.join(parts)}. Run: foresaid settle")


def add_to(app: typer.Typer) -> None:
    """Add the commands of this file to the tree."""
    app.command("calls")(calls)
    app.command("trace")(trace)
    app.command("score")(score)
    app.command("errors")(errors)
    app.command("compare")(compare)
