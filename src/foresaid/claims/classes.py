"""Classes of a call: how far ahead it looks and how much it says."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.claims.horizons import add_months
from foresaid.claims.registry import KINDS

if TYPE_CHECKING:
    from datetime import date

    from foresaid.claims.claim import Claim
    from foresaid.claims.horizons import Horizon
    from foresaid.model.codebook import Codebook


def horizon_class(horizon: Horizon, *, said: date, codebook: Codebook) -> str:
    """Return the name of the first class whose bound the deadline does not pass."""
    if horizon.imputed:
        return codebook.undated
    for one in codebook.horizon_classes:
        if one.months is None:
            return one.name
        if horizon.deadline is not None:
            inside = horizon.deadline <= add_months(said, one.months)
        else:
            inside = (horizon.sessions or 0) <= one.months * codebook.sessions_per_month
        if inside:
            return one.name
    raise ValueError(f"codebook={codebook.name!r} has no open last horizon class")


def specificity_class(
    claim: Claim, *, dated: bool, has_probability: bool, codebook: Codebook
) -> str:
    """Return the name of the last class all of whose needs the call meets."""
    met = set()
    if claim.is_call:
        met.add("checkable")
        if dated:
            met.add("dated")
        if has_probability:
            met.add("probability")
        if KINDS[claim.kind].is_sized:
            met.add("sized")
    names = [one.name for one in codebook.specificity_classes if met.issuperset(one.needs)]
    return names[-1] if names else codebook.specificity_classes[0].name
