"""The command tree and the one place where faults become exit statuses."""

from __future__ import annotations

import io
import os
import sys
from typing import Annotated, Any

import typer
from typer.core import TyperGroup

from foresaid import __version__
from foresaid.cli import (
    ledger_commands,
    person_commands,
    planning_commands,
    score_commands,
)
from foresaid.cli.console import say, show_issues
from foresaid.model.errors import ForesaidError

EPILOG = (
    "Exit status: 0 done, 1 a fault of the program, 2 the request makes no sense, 3 a file was "
    "refused, 4 the ledger cannot be used, 5 a check did not hold."
)


class _Boundary(TyperGroup):
    """Turns faults a user may meet into one line and an exit status."""

    def invoke(self, ctx: Any) -> Any:  # noqa: ANN401 - typer keeps the type private
        """Run the command; see ``foresaid.model.errors`` for the statuses."""
        try:
            return super().invoke(ctx)
        except ForesaidError as fault:
            if ctx.params.get("debug"):
                raise
            show_issues(fault.issues)
            say(f"foresaid: {fault}")
            raise typer.Exit(fault.exit_status) from fault
        except BrokenPipeError:
            # whoever read our output has gone; nothing is wrong
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            raise typer.Exit(0) from None


app = typer.Typer(
    cls=_Boundary,
    name="foresaid",
    help="A ledger of market calls: settles dated statements against prices and says whether "
    "a record is better than chance.",
    epilog=EPILOG,
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)


def _show_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"foresaid {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool,
        typer.Option(
            "--version", help="Show the version.", callback=_show_version, is_eager=True
        ),
    ] = False,
    debug: Annotated[
        bool, typer.Option(help="Show where in the program a fault arose.")
    ] = False,
) -> None:
    """Hold the options that go before a command."""


ledger_commands.add_to(app)
person_commands.add_to(app)
score_commands.add_to(app)
planning_commands.add_to(app)


def main() -> None:
    """Run the program; what it writes is UTF-8 whatever the locale says."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(encoding="utf-8", errors="backslashreplace")
    app()
