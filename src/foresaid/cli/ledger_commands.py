"""Commands that make and fill a ledger: new, import, settle, demo."""

from __future__ import annotations

import tempfile
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from foresaid.cli.console import Format, counted, file_progress, say, show_issues, write
from foresaid.cli.options import CodebookPath, LedgerPath, OutputFormat, now, read_day, today

if TYPE_CHECKING:
    from foresaid.pipeline.importing import Imported
    from foresaid.pipeline.settling import Settled


class What(StrEnum):
    """What a file holds."""

    instruments = "instruments"
    prices = "prices"
    actions = "actions"
    forecasters = "forecasters"
    calls = "calls"


class Series(StrEnum):
    """What the numbers of a price file are."""

    raw = "raw"
    split_adjusted = "split-adjusted"
    total_return = "total-return"


class Dates(StrEnum):
    """How a file writes its dates."""

    iso = "iso"
    dmy = "dmy"
    mdy = "mdy"


def new(
    ledger: Annotated[Path, typer.Argument(metavar="LEDGER", help="The file to make.")],
) -> None:
    """Make an empty ledger.

    Example: foresaid new desk.foresaid
    """
    from foresaid.ledger.store import Ledger

    with Ledger.create(ledger):
        say(f"Made {ledger}. Next: foresaid import instruments FILE --ledger {ledger}")


def import_(
    what: Annotated[What, typer.Argument(metavar="WHAT", help="What the files hold.")],
    files: Annotated[list[Path], typer.Argument(metavar="FILE...", help="CSV files.")],
    ledger: LedgerPath,
    instrument: Annotated[
        str | None,
        typer.Option(help="The instrument of a price file with Date, Open, High, Low, Close."),
    ] = None,
    series: Annotated[Series, typer.Option(help="What the prices are.")] = Series.raw,
    dates: Annotated[
        Dates, typer.Option(help="How dates are written: 2025-03-14, 14/03/2025, 03/14/2025.")
    ] = Dates.iso,
    codebook: CodebookPath = None,
    dry_run: Annotated[
        bool, typer.Option("--dry-run", help="Say what would happen; change nothing.")
    ] = False,
    keep_good: Annotated[
        bool,
        typer.Option("--keep-good", help="Import good rows, write the rest to a reject file."),
    ] = False,
) -> None:
    """Add the rows of files to the ledger.

    A file holds instruments, prices, actions, forecasters or calls; bring them in this
    order. A file with a fault is refused as a whole, with every fault listed. Importing the
    same file again adds nothing.

    Example: foresaid import calls calls.csv --ledger desk.foresaid
    """
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import load_codebook
    from foresaid.pipeline.batches import ImportRequest
    from foresaid.pipeline.importing import import_file

    book = load_codebook(codebook)
    with Ledger.open(ledger) as opened:
        for path in files:
            request = ImportRequest(
                what.value,
                path,
                today=today(),
                at=now(),
                dates=dates.value,
                series=series.value,
                instrument=instrument,
                dry_run=dry_run,
                keep_good=keep_good,
            )
            with file_progress(f"reading {path.name}") as progress:
                done = import_file(opened, request, book, progress=progress)
            _tell_import(what, path, done, dry_run=dry_run)


def _tell_import(what: What, path: Path, done: Imported, *, dry_run: bool) -> None:
    for remark in done.remarks:
        say(f"{path.name}: {remark}")
    show_issues(done.issues)
    verb = "would be added" if dry_run else "added"
    text = f"{path.name}: {counted(done.added, 'row')} of {what} {verb}"
    if done.known:
        text += f", {done.known} already in the ledger"
    if done.rejected:
        text += f", {done.rejected} rejected"
    if not done.added and not done.rejected and done.known:
        what_is_known = f"{counted(done.known, 'row')} already in the ledger"
        text = f"{path.name}: nothing to add, {what_is_known}"
    say(text + ".")
    if done.reject_file is not None:
        say(f"Rejected rows are in {done.reject_file}; mend them there and import it.")


def settle(
    ledger: LedgerPath,
    as_of: Annotated[
        str | None, typer.Option("--as-of", help="The day of settlement; today if not given.")
    ] = None,
    codebook: CodebookPath = None,
    vintage: Annotated[
        int | None,
        typer.Option(help="Count prices and actions only up to this load (its number)."),
    ] = None,
    changes: Annotated[
        bool,
        typer.Option("--changes", help="List the calls whose result is not what it was."),
    ] = False,
    format_: OutputFormat = Format.table,
) -> None:
    """Settle every call as of a day, and work out the chance of each.

    Results are never overwritten: each run is kept beside the ones before it.

    Example: foresaid settle --ledger desk.foresaid --as-of 2025-06-30 --changes
    """
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import load_codebook
    from foresaid.pipeline.settling import settle_ledger

    book = load_codebook(codebook)
    day = read_day(as_of)
    with Ledger.open(ledger) as opened:
        done = settle_ledger(opened, book, as_of=day, at=now(), vintage=vintage)
    if changes:
        _show_changes(done, format_)
    else:
        _show_settled(done, format_)
        if done.changes:
            say(f"Changed since the run before: {counted(len(done.changes), 'result')}.")


def _show_settled(done: Settled, form: Format) -> None:
    from foresaid.cli.console import console, give_out
    from foresaid.report.tables import Column, make_table

    rows = [{"result": name, "calls": count} for name, count in sorted(done.counts.items())]
    rows += [{"result": name, "calls": count} for name, count in done.reasons.items()]
    if form is not Format.table:
        give_out(rows, ["result", "calls"], form)
        return
    if not done.is_new:
        say("Nothing has changed since the last settlement.")
    columns = [
        Column(f"as of {done.as_of}", lambda row: str(row["result"]), "left"),
        Column("calls", lambda row: str(row["calls"])),
    ]
    screen = console()
    screen.print(make_table(columns, rows, width=screen.width))


def _show_changes(done: Settled, form: Format) -> None:
    from foresaid.cli.console import console, give_out
    from foresaid.report.tables import change_columns, make_table

    if form is not Format.table:
        give_out(done.changes, ["ref", "before", "after", "because"], form)
        return
    screen = console()
    screen.print(make_table(change_columns(), done.changes, width=screen.width))
    say(f"Changed since the run before: {counted(len(done.changes), 'result')}.")


def demo(
    ledger: Annotated[
        Path | None,
        typer.Option(
            "--ledger", help="Keep the demo ledger here; a temporary file if not given."
        ),
    ] = None,
    format_: OutputFormat = Format.table,
) -> None:
    """Build, settle and score a demo ledger of an invented desk.

    Everyone and everything in it is invented; the prices are simulated.

    Example: foresaid demo --ledger demo.foresaid
    """
    from foresaid.cli.score_commands import show_scores
    from foresaid.pipeline.demo import build_demo

    with tempfile.TemporaryDirectory() as folder:
        path = ledger or Path(folder) / "demo.foresaid"
        done = build_demo(path, at=now(), progress=lambda text: say(f"{text} ..."))
        say("An invented desk with simulated prices; nobody and nothing in it is real.")
        if format_ is Format.table:
            _show_settled(done, format_)
            write("")
        show_scores(path, ["forecaster"], format_)
    if ledger is None:
        say("To keep the ledger and look around: foresaid demo --ledger demo.foresaid")
    else:
        say(f"Look around: foresaid calls --ledger {ledger}")


def add_to(app: typer.Typer) -> None:
    """Add the commands of this file to the tree."""
    app.command("demo")(demo)
    app.command("new")(new)
    app.command("import")(import_)
    app.command("settle")(settle)
