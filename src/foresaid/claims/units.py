"""Whether the units of a claim fit the instrument it is made about."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.claims.claim import Claim, PhraseError, Quantity
from foresaid.claims.numbers import print_number
from foresaid.claims.registry import KINDS

if TYPE_CHECKING:
    from foresaid.model.codebook import InstrumentKind


def unit_faults(
    claim: Claim, kind_name: str, instrument_kind: InstrumentKind
) -> PhraseError | None:
    """Return what is wrong with the units of a claim on an instrument of that kind.

    Parameters
    ----------
    claim : Claim
        Any claim.
    kind_name, instrument_kind : str, InstrumentKind
        The instrument's kind in the codebook, by name and content.

    Returns
    -------
    PhraseError or None
        None when every size has a unit the kind knows.
    """
    if not claim.is_call:
        return None
    slots = KINDS[claim.kind].slots_of(len(claim.quantities))
    for quantity, slot in zip(claim.quantities, slots, strict=True):
        if slot == "percent":
            continue
        if slot == "level":
            if quantity.value <= 0 and not instrument_kind.negative:
                level = print_number(quantity.value)
                return PhraseError(
                    f"the level {level} cannot be a price of {_with_article(kind_name)}",
                    "Write a level above zero.",
                )
        elif quantity.unit not in _units_allowed(claim, instrument_kind):
            return _wrong_unit(
                claim, quantity, kind_name, _units_allowed(claim, instrument_kind)
            )
    return None


def _units_allowed(claim: Claim, instrument_kind: InstrumentKind) -> tuple[str, ...]:
    barred = KINDS[claim.kind].units_barred
    return tuple(unit for unit in instrument_kind.units if unit not in barred)


def _wrong_unit(
    claim: Claim, quantity: Quantity, kind_name: str, units: tuple[str, ...]
) -> PhraseError:
    number = print_number(quantity.value)
    if quantity.unit == "%" and "pp" in units:
        return PhraseError(
            f"`{number}%` of {_with_article(kind_name)} has two readings: {number} percentage "
            f"points, or {number} percent of its value (at 4.00 that is "
            f"{print_number(round(4.0 * quantity.value, 9))}bp)",
            f"Write `{number}pp` for the first, or the second in basis points, such as "
            f"`{print_number(round(4.0 * quantity.value, 9))}bp`.",
        )
    allowed = " or ".join(f"`{number}{unit}`" for unit in units)
    if quantity.unit in KINDS[claim.kind].units_barred:
        return PhraseError(
            f"`{claim.kind}` has no size in `{quantity.unit}`", f"Write {allowed}."
        )
    return PhraseError(
        f"{_with_article(kind_name)} does not move in `{quantity.unit}`", f"Write {allowed}."
    )


def _with_article(name: str) -> str:
    return ("an " if name[:1].lower() in ("a", "e", "i", "o", "u") else "a ") + name
