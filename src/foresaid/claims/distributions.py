"""Distributions as they are written: quantiles, and bins with percentages.

Both become numbers in turn, a percentage and a level: ``10%=A, 50%=B`` is 10, A, 50, B and
``<A: 20%, >A: 80%`` is 20, A, 80.
"""

from __future__ import annotations

import re
from itertools import pairwise
from typing import TYPE_CHECKING

from foresaid.claims.claim import PhraseError, Quantity
from foresaid.claims.numbers import print_number, read_number

if TYPE_CHECKING:
    from collections.abc import Sequence

MOST_PARTS = 9
_SEPARATOR = re.compile(r"(?<=%),|,(?!\d{3}(?!\d))|,\s")  # a comma may set off thousands
_QUANTILE = re.compile(r"(?P<percent>[^%\s=]+)\s*%\s*=\s*(?P<level>\S+)")
_BIN = re.compile(
    r"(<\s*(?P<below>[^\s:]+)|>\s*(?P<above>[^\s:]+)|(?P<low>[^\s:]+)\s+to\s+(?P<high>[^\s:]+))"
    r"\s*:\s*(?P<percent>[^%\s]+)\s*%",
    re.IGNORECASE,
)
QUANTILES_EXAMPLE = "10%=4800, 50%=5000, 90%=5300"
BINS_EXAMPLE = "<4800: 20%, 4800 to 5300: 50%, >5300: 30%"


def read_quantiles(text: str) -> list[Quantity]:
    """Return percentage and level of each quantile in turn.

    Raises
    ------
    PhraseError
        If a part cannot be read, or percentages or levels do not rise.

    Examples
    --------
    >>> [one.value for one in read_quantiles("10%=95, 90%=105")]
    [10.0, 95.0, 90.0, 105.0]
    """
    hint = f"Write `quantiles {QUANTILES_EXAMPLE}`."
    percents, levels = [], []
    for part in _parts(text, hint):
        match = _QUANTILE.fullmatch(part)
        if match is None:
            raise PhraseError(f"`{part}` is no quantile", hint)
        percents.append(_percent(match["percent"], hint))
        levels.append(read_number(match["level"]))
    if min(percents) <= 0.0:
        raise PhraseError("a quantile is above 0% and below 100%", hint)
    _must_rise("percentages", percents, hint)
    _must_rise("levels", levels, hint)
    return _in_turn(percents, levels)


def read_bins(text: str) -> list[Quantity]:
    """Return percentage and upper edge of each bin in turn; the last one has no edge.

    Raises
    ------
    PhraseError
        If a part cannot be read, bins do not meet, or percentages do not add up to 100.

    Examples
    --------
    >>> [one.value for one in read_bins("<98: 20%, 98 to 102: 50%, >102: 30%")]
    [20.0, 98.0, 50.0, 102.0, 30.0]
    """
    hint = f"Write `bins {BINS_EXAMPLE}`."
    percents: list[float] = []
    edges: list[float] = []
    parts = _parts(text, hint)
    for at, part in enumerate(parts):
        match = _BIN.fullmatch(part)
        if match is None:
            raise PhraseError(f"`{part}` is no bin", hint)
        percents.append(_percent(match["percent"], hint))
        begin, end = match["above"] or match["low"], match["below"] or match["high"]
        if (begin is None) != (at == 0) or (end is None) != (at == len(parts) - 1):
            raise PhraseError(
                f"`{part}` is out of place: bins go from `<` through ranges to `>`", hint
            )
        if begin is not None and read_number(begin) != edges[-1]:
            before = print_number(edges[-1])
            raise PhraseError(f"`{part}` does not begin at {before}, where the last ends", hint)
        if end is not None:
            edges.append(read_number(end))
    _must_rise("edges", edges, hint)
    if abs(sum(percents) - 100.0) > 1e-6:
        total = print_number(round(sum(percents), 9))
        raise PhraseError(
            f"the percentages add up to {total}, not to 100",
            hint,
        )
    return _in_turn(percents, edges)


def print_quantiles(quantities: Sequence[Quantity]) -> str:
    """Return quantiles in canonical form."""
    pairs = zip(quantities[0::2], quantities[1::2], strict=True)
    return ", ".join(f"{print_number(p.value)}%={print_number(x.value)}" for p, x in pairs)


def print_bins(quantities: Sequence[Quantity]) -> str:
    """Return bins in canonical form."""
    edges = [print_number(one.value) for one in quantities[1::2]]
    inner = [f"{low} to {high}" for low, high in pairwise(edges)]
    names = [f"<{edges[0]}", *inner, f">{edges[-1]}"]
    percents = [print_number(one.value) for one in quantities[0::2]]
    return ", ".join(f"{name}: {p}%" for name, p in zip(names, percents, strict=True))


def span_of_quantiles(values: Sequence[float]) -> float:
    """Return the probability between the lowest and the highest quantile, as a fraction.

    Examples
    --------
    >>> span_of_quantiles([10.0, 95.0, 90.0, 105.0])
    0.8
    """
    return (values[-2] - values[0]) / 100.0


def most_in_bins(values: Sequence[float]) -> float:
    """Return the probability of the bin given the most, or of all given as much.

    Examples
    --------
    >>> most_in_bins([20.0, 98.0, 50.0, 102.0, 30.0])
    0.5
    """
    percents = values[0::2]
    return sum(p for p in percents if p == max(percents)) / 100.0


def _parts(text: str, hint: str) -> list[str]:
    parts = [part.strip() for part in _SEPARATOR.split(text)]
    if not 2 <= len(parts) <= MOST_PARTS:
        raise PhraseError(
            f"there {'is 1 part' if len(parts) == 1 else f'are {len(parts)} parts'} where 2 to "
            f"{MOST_PARTS} are needed",
            hint,
        )
    return parts


def _percent(text: str, hint: str) -> float:
    value = read_number(text)
    if not 0.0 <= value < 100.0:
        raise PhraseError(f"`{text}%` is no share: write 0% to less than 100%", hint)
    return value


def _must_rise(what: str, values: Sequence[float], hint: str) -> None:
    for low, high in pairwise(values):
        if high <= low:
            pair = f"{print_number(low)} comes before {print_number(high)}"
            raise PhraseError(f"the {what} do not rise: {pair}", hint)


def _in_turn(percents: Sequence[float], levels: Sequence[float]) -> list[Quantity]:
    """Return the two lists in turn, beginning with a percentage."""
    result = []
    for at, percent in enumerate(percents):
        result.append(Quantity(percent, "%"))
        if at < len(levels):
            result.append(Quantity(levels[at]))
    return result
