"""Records of arrays taken apart and put together by rows, so that work needs little memory."""

from __future__ import annotations

from dataclasses import fields, is_dataclass, replace
from typing import TYPE_CHECKING, Any, TypeVar, cast

import numpy as np

if TYPE_CHECKING:
    from _typeshed import DataclassInstance

    Record = TypeVar("Record", bound=DataclassInstance)
Part = TypeVar("Part")


def take_rows(record: Record, rows: slice) -> Record:
    """Return a dataclass of arrays with some of their rows; what is None stays None."""
    kept: dict[str, Any] = {}
    for field in fields(record):
        column = getattr(record, field.name)
        kept[field.name] = None if column is None else column[rows]
    return replace(record, **kept)


def blank_like(part: Part, n: int) -> Part:
    """Return arrays for ``n`` rows of the kinds that ``part`` holds, to be filled in.

    ``part`` may be an array, a dictionary or a dataclass of such, or None.
    """
    blank: Any = None
    if isinstance(part, np.ndarray):
        blank = np.empty((n, *part.shape[1:]), dtype=part.dtype)
    elif isinstance(part, dict):
        blank = {name: blank_like(one, n) for name, one in part.items()}
    elif is_dataclass(part):
        columns = {one.name: blank_like(getattr(part, one.name), n) for one in fields(part)}
        blank = replace(cast("Any", part), **columns)
    return cast("Part", blank)


def put_rows(whole: object, part: object, rows: slice) -> None:
    """Fill in rows of what ``blank_like`` returned."""
    if isinstance(whole, np.ndarray):
        whole[rows] = part
    elif isinstance(whole, dict) and isinstance(part, dict):
        for name, one in part.items():
            put_rows(whole[name], one, rows)
    elif is_dataclass(whole):
        for one in fields(whole):
            put_rows(getattr(whole, one.name), getattr(part, one.name), rows)
