"""How much record is needed: power."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from foresaid.cli.console import Format, console, give_out
from foresaid.cli.options import OutputFormat

if TYPE_CHECKING:
    from foresaid.pipeline.planning import Plan


def power(
    forecaster: Annotated[
        str, typer.Argument(metavar="[FORECASTER]", help="Whose record, with --ledger.")
    ] = "",
    chance: Annotated[float, typer.Option(help="How often a call is right by chance.")] = 0.5,
    skill: Annotated[
        float | None, typer.Option(help="How often with the skill to be found.")
    ] = None,
    level: Annotated[float, typer.Option(help="One-sided level of the test.")] = 0.05,
    surely: Annotated[
        float, typer.Option("--power", help="How surely the skill is to be found.")
    ] = 0.8,
    field: Annotated[int | None, typer.Option(help="Records that are looked at.")] = None,
    overlap: Annotated[
        float, typer.Option(help="Mean number of calls that share one window.")
    ] = 1.0,
    calls: Annotated[int | None, typer.Option(help="Matured calls there are.")] = None,
    ledger: Annotated[
        Path | None,
        typer.Option(
            "--ledger", envvar="FORESAID_LEDGER", help="The ledger.", show_default=False
        ),
    ] = None,
    format_: OutputFormat = Format.table,
) -> None:
    """Say how many calls are needed to tell a skill from chance.

    With a forecaster: what their record could have shown at best. Without --skill ten
    points above chance are looked for.

    Example: foresaid power --chance 0.5 --skill 0.6 --field 20
    """
    from foresaid.model.errors import UsageError
    from foresaid.pipeline.planning import PLAN_COLUMNS, Plan, check_plan, planned

    if forecaster and ledger is None:
        raise UsageError("A forecaster's record is in a ledger: name it with --ledger.")
    if forecaster and ledger is not None:
        plan = _of_record(ledger, forecaster, field)
    else:
        wanted = min(chance + 0.1, 0.999999) if skill is None else skill
        plan = Plan(
            chance, wanted, level, surely, 1 if field is None else field, overlap, calls
        )
        check_plan(plan)
    row = planned(plan)
    if format_ is not Format.table:
        give_out([row], PLAN_COLUMNS, format_)
        return
    from foresaid.report.plans import plan_lines

    screen = console()
    for line in plan_lines(row):
        screen.print(line)


def _of_record(ledger: Path, forecaster: str, field: int | None) -> Plan:
    from foresaid.ledger.store import Ledger
    from foresaid.pipeline.planning import plan_of_record

    with Ledger.open(ledger) as opened:
        return plan_of_record(opened, forecaster, field=field)


def add_to(app: typer.Typer) -> None:
    """Add the commands of this file to the tree."""
    app.command("power")(power)
