"""Verdicts: what may be said of a record, in plain words, in one place."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from foresaid.model.codebook import VerdictRules

AHEAD = "ahead of chance"
AHEAD_ALONE = "ahead alone, not once the field is counted"
BEHIND = "behind chance"
BEHIND_ALONE = "behind alone, not once the field is counted"
NO_DIFFERENT = "no different from chance"
TOO_FEW = "too few to tell"
NOT_ESTIMABLE = "not estimable"


@dataclass(frozen=True, slots=True)
class Shifted:
    """Where a record stands among its own shifts, and in the field.

    Attributes
    ----------
    n : int
        Calls of the record that take part.
    hits : int
        How many of them were right.
    mean, deviation : float
        How many are on average over the shifts, and their standard deviation.
    p_upper, p_lower : float
        Share of shifts with at least, and at most, as many.
    best_upper, best_lower : float
        The smallest values the two could have taken.
    shifts : int
        How many shifts there are, the record itself among them.
    p_field, p_field_low : float or None
        The two p-values adjusted for the field; None where the record has no part in it.
    field_size : int
        Records in the field.
    """

    n: int
    hits: int
    mean: float
    deviation: float
    p_upper: float
    p_lower: float
    best_upper: float
    best_lower: float
    shifts: int
    p_field: float | None
    p_field_low: float | None
    field_size: int


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
    shifted : Shifted or None
        The timing and field hurdles; None where no call takes part in them.
    n_needed : int or None
        Calls that would be needed to find the codebook's edge; None where none would do.
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
    shifted: Shifted | None = None
    n_needed: int | None = None


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
    A record is ahead of chance when it passes the base rate, the timing and the field hurdle,
    each at the codebook's level; ahead alone when it passes all but the last. The lower tail
    has the same three hurdles.

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
    refused = _too_short(evidence, rules) or _not_estimable(evidence, rules)
    if refused is not None:
        return refused
    shifted = evidence.shifted
    assert shifted is not None, "a record without shifts is refused"
    for up in (True, False):
        tails = _tails(evidence, shifted, up=up)
        if max(tails[:2]) <= rules.level:
            alone = tails[2] > rules.level
            words = (AHEAD_ALONE if alone else AHEAD) if up else _behind(alone=alone)
            return Verdict(words, _sentence(evidence, shifted, up=up))
    return Verdict(NO_DIFFERENT, _sentence(evidence, shifted, up=True))


def _behind(*, alone: bool) -> str:
    return BEHIND_ALONE if alone else BEHIND


def _tails(evidence: Evidence, shifted: Shifted, *, up: bool) -> tuple[float, float, float]:
    """Return the p-values of base rate, timing and field in one tail."""
    base = evidence.p_upper if up else evidence.p_lower
    field = shifted.p_field if up else shifted.p_field_low
    timing = shifted.p_upper if up else shifted.p_lower
    # a record that has no part in the field has not passed it
    return (1.0 if base is None else base, timing, 1.0 if field is None else field)


def _sentence(evidence: Evidence, shifted: Shifted, *, up: bool) -> str:
    base, timing, field = _tails(evidence, shifted, up=up)
    where = "" if up else " in the lower tail"
    of_those = "" if shifted.n == evidence.n_base else f"{shifted.hits} of {shifted.n} "
    return (
        f"{evidence.hits} right of {evidence.n_base}, {evidence.expected:.1f} expected by the "
        f"base rate (p = {base:.2g}){where}; {of_those}against {shifted.mean:.1f} over "
        f"{shifted.shifts} shifts (p = {timing:.2g}); p = {field:.2g} in a field of "
        f"{shifted.field_size}."
    )


def _too_short(evidence: Evidence, rules: VerdictRules) -> Verdict | None:
    if evidence.n < rules.minimum_matured or evidence.n_effective < rules.minimum_disjoint:
        return Verdict(
            TOO_FEW,
            f"{evidence.n} matured calls in {evidence.n_effective} windows without overlap; "
            f"at least {rules.minimum_matured} and {rules.minimum_disjoint} are needed"
            f"{_needed(evidence, rules)}.",
        )
    if evidence.n_base < rules.minimum_matured or evidence.p_upper is None:
        return Verdict(
            NOT_ESTIMABLE, f"only {evidence.n_base} of {evidence.n} calls have a base rate."
        )
    best = min(evidence.p_best or 0.0, evidence.p_worst or 0.0)
    if best > rules.level:
        return Verdict(
            TOO_FEW,
            f"even a perfect record would only reach p = {best:.2g} on these calls"
            f"{_needed(evidence, rules)}.",
        )
    return None


def _needed(evidence: Evidence, rules: VerdictRules) -> str:
    if evidence.n_needed is None:
        return ""
    return (
        f"; to find an edge of {100 * rules.edge:.0f} points in {100 * rules.power:.0f} % of "
        f"cases takes about {evidence.n_needed}"
    )


def _not_estimable(evidence: Evidence, rules: VerdictRules) -> Verdict | None:
    shifted = evidence.shifted
    if evidence.is_one_sided:
        return Verdict(
            NOT_ESTIMABLE,
            "every call points the same way, so timing cannot be told from the market's drift.",
        )
    if shifted is None or shifted.n < rules.minimum_matured:
        n = 0 if shifted is None else shifted.n
        return Verdict(
            NOT_ESTIMABLE,
            f"only {n} of {evidence.n} calls can be moved along the field's calendar.",
        )
    if 1.0 / shifted.shifts > rules.level:
        return Verdict(
            TOO_FEW,
            f"the calendar has {shifted.shifts} shifts, too few for any p-value to "
            f"reach {rules.level:g}.",
        )
    if min(shifted.best_upper, shifted.best_lower) > rules.level:
        return Verdict(
            NOT_ESTIMABLE,
            "moving the record along the calendar changes next to nothing, so its timing "
            "cannot be judged.",
        )
    return None
