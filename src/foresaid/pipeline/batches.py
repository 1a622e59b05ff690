"""What an import would add: the rows of one file that the ledger lacks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from foresaid.ingest import calls as calls_file
from foresaid.ingest.actions import parse_actions
from foresaid.ingest.prices import parse_prices
from foresaid.ingest.things import parse_forecasters, parse_instruments
from foresaid.ledger import queries, writes
from foresaid.model.issues import Issue, clip
from foresaid.pipeline.kinds import check_kinds

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence
    from datetime import date
    from pathlib import Path

    from foresaid.ingest.prices import PriceRows as PriceFile
    from foresaid.ingest.tables import RawTable
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Forecaster, SeriesKind

What = Literal["instruments", "prices", "actions", "forecasters", "calls"]


@dataclass(frozen=True)
class ImportRequest:
    """What to import and how.

    ``today`` and ``at`` are the clock's; ``keep_good`` takes the good rows of a faulty file
    and writes the rest to a reject file.
    """

    what: What
    path: Path
    today: date
    at: str
    dates: Literal["iso", "dmy", "mdy"] = "iso"
    series: SeriesKind = "raw"
    instrument: str | None = None
    dry_run: bool = False
    keep_good: bool = False


@dataclass(frozen=True)
class Batch:
    """Rows of a file that the ledger lacks, and how to add them."""

    added: int
    known: int
    issues: tuple[Issue, ...]
    remarks: tuple[str, ...]
    write: Callable[[int], None]
    bad_lines: Sequence[int] = ()


@dataclass(frozen=True)
class Job:
    """One file against one ledger."""

    ledger: Ledger
    table: RawTable
    request: ImportRequest
    codebook: Codebook


def _fresh(
    rows: Sequence[Any], lines: Sequence[int], known: dict[str, Any], key: str, job: Job
) -> tuple[list[Any], list[Issue]]:
    """Return the rows the ledger lacks; a row that differs from the known one is a fault.

    ``key`` is the field of a row that names it; its column is called after what is imported.
    """
    fresh, issues = [], []
    file, column = job.table.file, job.request.what.removesuffix("s")
    for row, line in zip(rows, lines, strict=True):
        name = getattr(row, key)
        if name not in known:
            fresh.append(row)
        elif known[name] != row:
            message = f"`{clip(name)}` is in the ledger with other details"
            hint = "The ledger only grows: give it another name, or leave the row out."
            issues.append(
                Issue("known-otherwise", message, file, line, column, clip(name), hint)
            )
    return fresh, issues


def _instruments(job: Job) -> Batch:
    parsed = parse_instruments(
        job.table,
        kinds=job.codebook.instrument_kinds,
        known=queries.instruments(job.ledger),
    )
    known = {symbol: one for symbol, (_, one) in queries.instruments(job.ledger).items()}
    fresh, issues = _fresh(parsed.rows, parsed.lines, known, "symbol", job)
    return Batch(
        len(fresh),
        len(parsed.rows) - len(fresh) - len(issues),
        (*parsed.issues, *issues),
        parsed.remarks,
        lambda load: writes.add_instruments(job.ledger, fresh, load),
    )


def _forecasters(job: Job) -> Batch:
    parsed = parse_forecasters(job.table)
    held = queries.forecasters(job.ledger)
    known = {handle: one for handle, (_, one) in held.items()}
    fresh, issues = _fresh(parsed.rows, parsed.lines, known, "handle", job)
    n_known = len(parsed.rows) - len(fresh) - len(issues)
    lines = dict(zip((one.handle for one in parsed.rows), parsed.lines, strict=True))
    taken = _taken_names(fresh, known, lines, job.table.file)
    bad_lines = {issue.line for issue in taken}
    fresh = [one for one in fresh if lines[one.handle] not in bad_lines]
    return Batch(
        len(fresh),
        n_known,
        (*parsed.issues, *issues, *taken),
        parsed.remarks,
        lambda load: writes.add_forecasters(job.ledger, fresh, load),
    )


def _taken_names(
    fresh: Sequence[Forecaster],
    known: dict[str, Forecaster],
    lines: dict[str, int],
    file: str,
) -> list[Issue]:
    """Return the handles and aliases of new forecasters that stand for one in the ledger."""
    owners = {alias: one.handle for one in known.values() for alias in one.aliases}
    owners |= {handle: handle for handle in known}
    hint = "A handle or alias belongs to one forecaster: write another, or take it out."
    return [
        Issue(
            "double-alias",
            f"`{clip(name)}` stands for `{clip(owners[name])}` in the ledger already",
            file,
            lines[one.handle],
            column,
            clip(name),
            hint,
        )
        for one in fresh
        for column, names in (("forecaster", (one.handle,)), ("aliases", one.aliases))
        for name in names
        if name in owners
    ]


def _actions(job: Job) -> Batch:
    instruments = queries.instruments(job.ledger)
    parsed = parse_actions(job.table, known=instruments, dates=job.request.dates)
    held = queries.actions(job.ledger, vintage=queries.vintage(job.ledger))
    known = {(one.instrument, one.effective, one.kind): one for one in held}
    fresh, issues = [], []
    for row, line in zip(parsed.rows, parsed.lines, strict=True):
        same = known.get((row.instrument, row.effective, row.kind))
        if same is None:
            fresh.append(row)
        elif same != row:
            message = f"the ledger holds another {row.kind} of {row.instrument} on that day"
            hint = "Leave the row out, or mend it."
            issues.append(
                Issue(
                    "known-otherwise", message, job.table.file, line, "action", row.kind, hint
                )
            )
    ids = {symbol: key for symbol, (key, _) in instruments.items()}
    return Batch(
        len(fresh),
        len(parsed.rows) - len(fresh) - len(issues),
        (*parsed.issues, *issues),
        parsed.remarks,
        lambda load: writes.add_actions(job.ledger, fresh, load, ids),
    )


def _prices(job: Job) -> Batch:
    instruments = queries.instruments(job.ledger)
    check_kinds((one for _, one in instruments.values()), job.codebook)
    parsed = parse_prices(
        job.table,
        instrument=job.request.instrument,
        known={symbol: one for symbol, (_, one) in instruments.items()},
        allows_negative=lambda kind: job.codebook.instrument_kinds[kind].negative,
        today=job.request.today,
        dates=job.request.dates,
    )
    ids = {symbol: key for symbol, (key, _) in instruments.items()}
    # a name that is not known has no rows left
    numbers = np.array([ids.get(symbol, -1) for symbol in parsed.symbols], dtype=np.int64)
    numbers = numbers[parsed.instrument] if len(numbers) else numbers
    mixed = _mixed_series(job, parsed)
    fresh = _unlike_known(job.ledger, numbers, parsed)
    return Batch(
        int(fresh.sum()),
        int((~fresh).sum()),
        (*parsed.issues, *mixed),
        parsed.remarks,
        lambda load: writes.add_prices(job.ledger, _price_rows(numbers, parsed, fresh, load)),
        parsed.bad_lines.tolist(),
    )


def _mixed_series(job: Job, parsed: PriceFile) -> list[Issue]:
    """Return a fault for each instrument whose prices are of another series kind so far."""
    held = queries.series_kinds(job.ledger, vintage=queries.vintage(job.ledger))
    series = job.request.series
    return [
        Issue(
            "mixed-series",
            f"the ledger holds {held[symbol]} prices of {symbol}, the file is {series}",
            job.table.file,
            hint=f"Import it with --series {held[symbol]}, or keep it in another ledger.",
        )
        for symbol in parsed.symbols
        if held.get(symbol, series) != series
    ]


def _unlike_known(ledger: Ledger, numbers: Any, parsed: PriceFile) -> Any:  # noqa: ANN401
    """Return which rows the ledger lacks or holds with other prices; boolean, shape (n,)."""
    held = queries.prices(ledger, vintage=queries.vintage(ledger))
    day = parsed.session.astype("datetime64[D]").astype(np.int64)
    base = int(min([*day[:1], *held.day[:1], 0]))
    width = int(max([day.max(initial=0), held.day.max(initial=0)])) - base + 100_000
    held_keys = held.instrument * width + held.day
    keys = numbers * width + day
    at = np.searchsorted(held_keys, keys)
    inside = np.minimum(at, max(len(held_keys) - 1, 0))
    same = np.zeros(len(keys), dtype=bool)
    if len(held_keys):
        same = held_keys[inside] == keys
        for name in ("open", "high", "low", "close", "volume", "total"):
            new, old = getattr(parsed, name), getattr(held, name)[inside]
            same &= (new == old) | (np.isnan(new) & np.isnan(old))
    return ~same


def _price_rows(numbers: Any, parsed: PriceFile, rows: Any, load: int) -> Any:  # noqa: ANN401
    """Yield the rows to add, plain Python values with None for what the file lacks."""
    columns = [numbers[rows].tolist(), parsed.session[rows].astype("datetime64[D]").astype(str)]
    columns[1] = columns[1].tolist()
    columns.append([load] * len(columns[0]))
    for name in ("open", "high", "low", "close", "volume", "total"):
        values = getattr(parsed, name)[rows].tolist()
        columns.append([None if value != value else value for value in values])  # noqa: PLR0124
    return zip(*columns, strict=True)


def _calls(job: Job) -> Batch:
    instruments, forecasters = queries.instruments(job.ledger), queries.forecasters(job.ledger)
    check_kinds((one for _, one in instruments.values()), job.codebook)
    handles = {handle: handle for handle in forecasters}
    for handle, (_, one) in forecasters.items():
        handles |= {alias: handle for alias in one.aliases if alias not in forecasters}
    context = calls_file.CallContext(
        instruments={symbol: one for symbol, (_, one) in instruments.items()},
        handles=handles,
        owners=queries.statement_owners(job.ledger),
        codebook=job.codebook,
        today=job.request.today,
        order=job.request.dates,
    )
    parsed = calls_file.parse_calls(job.table, context)
    digests = queries.statement_digests(job.ledger)
    fresh, issues = [], []
    for row, line in zip(parsed.rows, parsed.lines, strict=True):
        if row.ref not in digests:
            fresh.append(row)
        elif digests[row.ref] != row.digest:
            message = f"the ledger holds another row under the ref `{clip(row.ref)}`"
            hint = (
                "Calls are never changed: give the row a new ref, with `revises` for the old."
            )
            issues.append(
                Issue(
                    "known-otherwise", message, job.table.file, line, "ref", clip(row.ref), hint
                )
            )
    return Batch(
        len(fresh),
        len(parsed.rows) - len(fresh) - len(issues),
        (*parsed.issues, *issues),
        parsed.remarks,
        lambda load: writes.add_calls(
            job.ledger,
            fresh,
            load,
            forecasters={handle: key for handle, (key, _) in forecasters.items()},
            instruments={symbol: key for symbol, (key, _) in instruments.items()},
            codebook=job.codebook.digest,
        ),
    )


BATCHES: dict[str, Callable[[Job], Batch]] = {
    "instruments": _instruments,
    "prices": _prices,
    "actions": _actions,
    "forecasters": _forecasters,
    "calls": _calls,
}
