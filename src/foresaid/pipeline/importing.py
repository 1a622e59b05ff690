"""Importing files: read, check against the ledger, then add all of it or nothing."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from foresaid.ingest.readers import read_table
from foresaid.ingest.rejects import rejected_lines, write_rejects
from foresaid.ledger import writes
from foresaid.model.errors import CheckFailed, InputRejected
from foresaid.pipeline.batches import BATCHES, Batch, ImportRequest, Job

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from foresaid.ingest.tables import RawTable
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook
    from foresaid.model.issues import Issue


@dataclass(frozen=True)
class Imported:
    """What an import did.

    Attributes
    ----------
    added, known : int
        Rows that were new, and rows the ledger held already.
    rejected : int
        Rows left out because of a fault.
    issues : tuple of Issue
        Faults and notes.
    remarks : tuple of str
        What was detected in the file.
    reject_file : Path or None
        Where rejected rows went.
    """

    added: int
    known: int
    rejected: int
    issues: tuple[Issue, ...]
    remarks: tuple[str, ...]
    reject_file: Path | None = None


def import_file(
    ledger: Ledger,
    request: ImportRequest,
    codebook: Codebook,
    *,
    progress: Callable[[int, int], None] | None = None,
) -> Imported:
    """Import one file, entirely or not at all.

    Parameters
    ----------
    ledger : Ledger
        Open for writing.
    request : ImportRequest
        The file and how it is written.
    codebook : Codebook
        Rules by which calls are read.
    progress : callable, optional
        Called with bytes read and bytes in all.

    Raises
    ------
    InputRejected
        If any row has a fault and ``keep_good`` is off; the ledger stays as it was.
    CheckFailed
        The same on a dry run.
    """
    job = Job(ledger, read_table(request.path, progress=progress), request, codebook)
    if request.dry_run:
        return _examined(job)[0]
    with ledger.writing():  # nobody else writes between the comparison and the addition
        result, batch, rejected = _examined(job)
        if rejected:
            reject_file = write_rejects(request.path, job.table, rejected)
            result = replace(result, reject_file=reject_file)
        if batch.added:
            writes.add_codebook(ledger, codebook, at=request.at)
            batch.write(writes.add_load(ledger, _load_row(request, job.table, batch)))
    return result


def _examined(job: Job) -> tuple[Imported, Batch, dict[int, list[Issue]]]:
    """Return what a file would add to the ledger, and its rejected rows; or refuse it."""
    table, request = job.table, job.request
    batch = BATCHES[request.what](job)
    issues = (*table.issues, *batch.issues)
    rejected = rejected_lines(table, batch.issues, batch.bad_lines)
    has_errors = any(issue.severity == "error" for issue in issues)
    spoilt = any(issue.severity == "error" and issue.line not in rejected for issue in issues)
    if has_errors and (spoilt or not request.keep_good):
        if request.dry_run:
            raise CheckFailed(f"{request.path} would be refused.", issues)
        raise InputRejected(f"{request.path} was refused; nothing was imported.", issues)
    remarks = tuple(dict.fromkeys((*table.remarks, *batch.remarks)))
    return Imported(batch.added, batch.known, len(rejected), issues, remarks), batch, rejected


def _load_row(request: ImportRequest, table: RawTable, batch: Batch) -> dict[str, Any]:
    return {
        "what": request.what,
        "file": request.path.name,
        "sha256": table.sha256,
        "series": request.series if request.what == "prices" else "",
        "n_rows": batch.added,
        "loaded_at": request.at,
    }
