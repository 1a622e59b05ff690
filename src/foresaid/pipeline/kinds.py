"""Whether a codebook knows every kind of instrument that a ledger holds."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.model.errors import UsageError

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Instrument


def check_kinds(instruments: Iterable[Instrument], codebook: Codebook) -> None:
    """Refuse a codebook by which some instruments cannot be judged.

    Raises
    ------
    UsageError
        If it lacks the kind of an instrument.
    """
    for one in instruments:
        if one.kind not in codebook.instrument_kinds:
            raise UsageError(
                f"The codebook `{codebook.name}` has no instrument kind `{one.kind}`, and "
                f"{one.symbol} is of that kind. Add it under [instrument_kinds]."
            )
