"""Verdicts: what may be said of a record, in plain words, in one place."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from foresaid.model.codebook import VerdictRules

AHEAD = "ahead of the base rate"
BEHIND = "behind the base rate"
NO_DIFFERENT = "no different from chance"
TOO_FEW = "too few to tell"
NOT_ESTIMABLE = "not estimable"


@dataclass(frozen=True, slots=True)
class Evidence:
    """What a verdict rests on.

    Attributes
    ----------
    n : int
        Matured calls with a stated horizon.
    n_base : int
        Those of them that have a base rate.
    n_effective : int
        Windows of theirs that do not overlap, by instrument.
    hits : int
        How many of ``n_base`` were right.
    expected : float
        How many would have been with no skill.
    p_upper, p_lower : float or None
        One-sided base-rate p-values in the direction of skill and against it.
    p_best, p_worst : float or None
        The smallest values the two could have taken, all right or all wrong.
    is_one_sided : bool
        Whether every call points the same way.
    """

    n: int
    n_base: int
    n_effective: int
    hits: int
    expected: float
    p_upper: float | None
    p_lower: float | None
    p_best: float | None
    p_worst: float | None
    is_one_sided: bool


@dataclass(frozen=True, slots=True)
class Verdict:
    """A verdict with its reason in one sentence."""

    words: str
    reason: str


def verdict(evidence: Evidence, rules: VerdictRules) -> Verdict:
    """Return the verdict on a record.

    Parameters
    ----------
    evidence : Evidence
        Counts and p-values.
    rules : VerdictRules
        Level and minimum record of the codebook.

    Returns
    -------
    Verdict
        Never better than the evidence: short records, records that could not have reached
        the level, one-sided records and missing base rates are refused.

    Raises
    ------
    ValueError
        If the counts contradict each other.

    Notes
    -----
    The base rate alone gives false alarms when calls overlap, so a record that passes it is
    called ahead of the base rate and no more.

    References
    ----------
    The minimum record is common practice, no source.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> few = Evidence(9, 9, 5, 8, 4.1, 0.01, 0.99, 0.001, 0.01, False)
    >>> verdict(few, default_codebook().verdict).words
    'too few to tell'
    """
    if not 0 <= evidence.hits <= evidence.n_base <= evidence.n:
        raise ValueError(f"evidence={evidence!r} has counts that contradict each other")
    refused = _refusal(evidence, rules)
    if refused is not None:
        return refused
    numbers = (
        f"{evidence.hits} right of {evidence.n_base}, {evidence.expected:.1f} expected by "
        "the base rate"
    )
    if evidence.p_upper is not None and evidence.p_upper <= rules.level:
        return Verdict(AHEAD, f"{numbers}; p = {evidence.p_upper:.2g}.")
    if evidence.p_lower is not None and evidence.p_lower <= rules.level:
        return Verdict(BEHIND, f"{numbers}; p = {evidence.p_lower:.2g} in the lower tail.")
    return Verdict(NO_DIFFERENT, f"{numbers}; p = {evidence.p_upper or 0:.2g}.")


def _refusal(evidence: Evidence, rules: VerdictRules) -> Verdict | None:
    if evidence.n < rules.minimum_matured or evidence.n_effective < rules.minimum_disjoint:
        return Verdict(
            TOO_FEW,
            f"{evidence.n} matured calls in {evidence.n_effective} windows without overlap; "
            f"at least {rules.minimum_matured} and {rules.minimum_disjoint} are needed.",
        )
    if evidence.n_base < rules.minimum_matured or evidence.p_upper is None:
        return Verdict(
            NOT_ESTIMABLE, f"only {evidence.n_base} of {evidence.n} calls have a base rate."
        )
    best = min(evidence.p_best or 0.0, evidence.p_worst or 0.0)
    if best > rules.level:
        return Verdict(
            TOO_FEW, f"even a perfect record would only reach p = {best:.2g} on these calls."
        )
    if evidence.is_one_sided:
        return Verdict(
            NOT_ESTIMABLE,
            "every call points the same way, so timing cannot be told from the market's drift.",
        )
    return None
