"""Both tails of a count, as every exact test here gives them."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Tails:
    """One-sided p-values of an observed count, which both include.

    Attributes
    ----------
    upper : float
        Chance of at least as many hits.
    lower : float
        Chance of at most as many. The two sum to 1 plus the chance of the count itself.
    """

    upper: float
    lower: float
