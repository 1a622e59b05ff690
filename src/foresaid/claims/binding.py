"""From the numbers of a claim to marks: thresholds relative to a reference price."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.claims.claim import Claim
    from foresaid.claims.kind import Kind, Mark
    from foresaid.model.bars import BoolArray, FloatArray, IntArray

UNIT_CODES = {"": 0, "%": 1, "pp": 2, "bp": 3, "pt": 4}


def quantity_arrays(claims: list[Claim]) -> tuple[FloatArray, IntArray]:
    """Return values and unit codes of claims, each of shape (n, numbers in the longest).

    Values are NaN where a claim has fewer numbers.
    """
    width = max((len(claim.quantities) for claim in claims), default=0)
    values = np.full((len(claims), max(width, 1)), np.nan)
    units = np.zeros(values.shape, dtype=np.int64)
    for row, claim in enumerate(claims):
        for column, quantity in enumerate(claim.quantities):
            values[row, column] = quantity.value
            units[row, column] = UNIT_CODES[quantity.unit]
    return values, units


def bind(
    kind: Kind,
    values: FloatArray,
    units: IntArray,
    *,
    reference: FloatArray,
    level_factor: FloatArray,
    additive: BoolArray,
) -> FloatArray:
    """Return the marks of claims of one kind.

    Parameters
    ----------
    kind : Kind
        The kind, already in the instrument's sense.
    values, units : ndarray, shape (n, n_quantities)
        The numbers as stated and their unit codes.
    reference : ndarray of float, shape (n,)
        Reference prices in continuous units.
    level_factor : ndarray of float, shape (n,)
        Continuous price over stated price on the day of the statement.
    additive : ndarray of bool, shape (n,)
        Whether prices are compared by difference.

    Returns
    -------
    ndarray of float, shape (n, n_marks)
        Price over reference, or price less reference where ``additive``. Marks of numbers that
        no claim here has are left out.
    """
    columns = [
        _mark(mark, values, units, reference, level_factor, additive)
        for mark in kind.marks
        if mark.quantity < values.shape[1]
    ]
    return columns[0][:, None] if len(columns) == 1 else np.stack(columns, axis=1)


def _mark(
    mark: Mark,
    values: FloatArray,
    units: IntArray,
    reference: FloatArray,
    level_factor: FloatArray,
    additive: BoolArray,
) -> FloatArray:
    here = np.where(additive, 0.0, 1.0)
    if mark.role in ("here", "nothing"):
        return here if mark.role == "here" else np.zeros(len(reference))
    stated = values[:, mark.quantity]
    if mark.role == "share":
        return stated / 100.0
    divisor = np.where(additive, 1.0, reference)
    if mark.role == "level":
        level = stated * level_factor
        return np.where(additive, level - reference, level / divisor)
    size = _size(stated, units[:, mark.quantity], divisor, level_factor)
    if mark.role in ("gain", "loss"):
        return here + size if mark.role == "gain" else here - size
    change = size if mark.role == "gain of thing" else -size
    # a size in points is one of the quote, a percentage one of the thing it prices
    in_quote = additive | (units[:, mark.quantity] == UNIT_CODES["pt"])
    return np.where(in_quote, here - change, 1.0 / (1.0 + np.where(in_quote, 0.0, change)))


def _size(
    stated: FloatArray, unit: IntArray, divisor: FloatArray, level_factor: FloatArray
) -> FloatArray:
    """Return a size as a part of the reference, or in price units where additive."""
    scale: FloatArray = np.choose(unit, [1.0, 0.01, 1.0, 0.01, level_factor / divisor])
    return stated * scale
