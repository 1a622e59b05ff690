"""The demo: an invented desk's files, imported, settled and scored in one go."""

from __future__ import annotations

from datetime import date
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING

from foresaid.ledger.store import Ledger
from foresaid.model.codebook import default_codebook
from foresaid.model.errors import UsageError
from foresaid.pipeline.batches import ImportRequest, What
from foresaid.pipeline.importing import import_file
from foresaid.pipeline.settling import Settled, settle_ledger

if TYPE_CHECKING:
    from collections.abc import Callable

LAST_DAY = date(2025, 12, 31)
STEPS: tuple[What, ...] = ("instruments", "prices", "actions", "forecasters", "calls")


def demo_folder() -> Path:
    """Return where the demo's files are, in the installed package or beside the source.

    Raises
    ------
    UsageError
        If they are in neither place.
    """
    package = Path(str(resources.files("foresaid")))
    for folder in (package / "demo_data", package.parents[1] / "data" / "demo"):
        if (folder / "calls.csv").is_file():
            return folder
    raise UsageError("The demo's files are missing from this installation.")


def build_demo(
    path: Path, *, at: str, progress: Callable[[str], None] | None = None
) -> Settled:
    """Make a ledger at ``path`` from the demo's files and settle it as of its last day."""
    folder, codebook = demo_folder(), default_codebook()
    with Ledger.create(path) as ledger:
        for what in STEPS:
            if progress is not None:
                progress(f"importing {what}")
            request = ImportRequest(what, folder / f"{what}.csv", today=LAST_DAY, at=at)
            import_file(ledger, request, codebook)
        if progress is not None:
            progress("settling")
        return settle_ledger(ledger, codebook, as_of=LAST_DAY, at=at)
