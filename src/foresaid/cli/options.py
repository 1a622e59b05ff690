"""Options that several commands share."""

from __future__ import annotations

from datetime import UTC, date, datetime
from pathlib import Path
from typing import Annotated

import typer

from foresaid.cli.console import Format
from foresaid.model.errors import UsageError

LedgerPath = Annotated[
    Path,
    typer.Option(
        "--ledger", envvar="FORESAID_LEDGER", help="The ledger file.", show_default=False
    ),
]
OutputFormat = Annotated[
    Format, typer.Option("--format", help="A table to read, or every figure in full.")
]
CodebookPath = Annotated[
    Path | None,
    typer.Option("--codebook", help="A codebook of your own (TOML).", show_default=False),
]


def today() -> date:
    """Return the date on this machine; the only clock below is this one and ``now``."""
    return datetime.now().astimezone().date()


def now() -> str:
    """Return the time, RFC 3339 in UTC."""
    return datetime.now(UTC).isoformat(timespec="seconds").replace("+00:00", "Z")


def read_day(text: str | None) -> date:
    """Return the day of ``--as-of``, today when it is not given."""
    if text is None:
        return today()
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise UsageError(
            f"--as-of {text} is not a date; write one such as 2025-06-30."
        ) from None
