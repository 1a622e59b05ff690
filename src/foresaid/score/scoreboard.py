"""One group of calls to one line of scores; too little data is an answer, not an error."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from foresaid.score.overlap import disjoint_windows
from foresaid.score.poisson_binomial import poisson_binomial_tails
from foresaid.score.power import best_possible_p, calls_needed
from foresaid.score.probability import brier_score_band, brier_skill
from foresaid.score.proportions import binomial_tails, wilson_interval
from foresaid.score.verdict import Evidence, Shifted, Verdict, verdict

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.model.codebook import Codebook


@dataclass(frozen=True)
class Record:
    """The matured calls of one group; arrays (n,).

    Attributes
    ----------
    came_true : ndarray of bool
        Whether the claim as written came true.
    leans_against : ndarray of bool
        Whether the stated probability lies below one half, so that the forecaster was right
        when the claim failed.
    chance : ndarray of float
        The chance of the claim as written, NaN where there is none.
    probability_low, probability_high : ndarray of float
        The stated probability or a word's band, NaN where none was stated.
    instrument, start, end : ndarray of int
        What the window is on, and its first and last day.
    direction : ndarray of int
        1 up, -1 down, 0 neither.
    weight : ndarray of float
        Class weights, all 1 unless weights were asked for.
    """

    came_true: BoolArray
    leans_against: BoolArray
    chance: FloatArray
    probability_low: FloatArray
    probability_high: FloatArray
    instrument: IntArray
    start: IntArray
    end: IntArray
    direction: IntArray
    weight: FloatArray

    @property
    def right(self) -> BoolArray:
        """Whether the forecaster was right."""
        return np.not_equal(self.came_true, self.leans_against)

    @property
    def chance_right(self) -> FloatArray:
        """The chance of being right with no skill, NaN where there is none."""
        return np.where(self.leans_against, 1.0 - self.chance, self.chance)


@dataclass(frozen=True)
class GroupScore:
    """The scores of one group; None where there is too little to give a number.

    ``excess`` is in hits, rates and bounds are fractions. P-values are one-sided: ``p_coin``
    and ``p_base`` in the direction of skill, the ``_low`` ones against it; both tails include
    the observed count. The ``timing`` numbers rest on the calls that can be moved along the
    field's calendar, the ``field`` ones on all records that were looked at together.
    """

    n: int
    n_effective: int
    hits: int
    hit_rate: float | None
    hit_low: float | None
    hit_high: float | None
    n_base: int
    expected_hits: float | None
    excess: float | None
    p_coin: float | None
    p_coin_low: float | None
    p_base: float | None
    p_base_low: float | None
    n_timing: int
    timing_hits: int
    timing_expected: float | None
    timing_deviation: float | None
    p_timing: float | None
    p_timing_low: float | None
    p_field: float | None
    p_field_low: float | None
    field_size: int
    shifts: int
    windows_disjoint: int
    n_probability: int
    brier: float | None
    brier_chance: float | None
    brier_skill: float | None
    weighted_hit_rate: float | None
    weighted_expected_rate: float | None
    verdict: str
    verdict_reason: str


def score_record(
    record: Record, codebook: Codebook, shifted: Shifted | None = None
) -> GroupScore:
    """Return the scores of one group of matured calls.

    Parameters
    ----------
    record : Record
        The n calls, n may be 0.
    codebook : Codebook
        The coin, the coverage of intervals, the level and the minimum record.
    shifted : Shifted, optional
        Where the record stands among its own shifts and in the field.

    Returns
    -------
    GroupScore
        Expected hits, excess and ``p_base`` rest on the calls that have a chance. Brier skill
        is against a forecast of each call's chance, on the calls that have both.

    Raises
    ------
    ValueError
        If the arrays differ in length.

    References
    ----------
    See the functions this one calls.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> score_record(empty_record(), default_codebook()).verdict
    'too few to tell'
    """
    n = len(record.came_true)
    if any(len(column) != n for column in vars(record).values()):
        raise ValueError("record has columns of different length")
    hits = int(record.right.sum())
    interval = wilson_interval(hits, n, level=codebook.verdict.interval_level) if n else None
    coin = binomial_tails(hits, n, chance=codebook.chance.coin) if n else None
    effective = effective_n(record)
    base = _base(record)
    brier = _brier(record)
    said = _verdict(record, base, shifted, codebook)
    return GroupScore(
        n=n,
        n_effective=effective,
        hits=hits,
        hit_rate=hits / n if n else None,
        hit_low=interval.low if interval else None,
        hit_high=interval.high if interval else None,
        n_base=base.n,
        expected_hits=base.expected if base.n else None,
        excess=base.hits - base.expected if base.n else None,
        p_coin=coin.upper if coin else None,
        p_coin_low=coin.lower if coin else None,
        p_base=base.upper,
        p_base_low=base.lower,
        n_timing=shifted.n if shifted else 0,
        timing_hits=shifted.hits if shifted else 0,
        timing_expected=shifted.mean if shifted else None,
        timing_deviation=shifted.deviation if shifted else None,
        p_timing=shifted.p_upper if shifted else None,
        p_timing_low=shifted.p_lower if shifted else None,
        p_field=shifted.p_field if shifted else None,
        p_field_low=shifted.p_field_low if shifted else None,
        field_size=shifted.field_size if shifted else 0,
        shifts=shifted.shifts if shifted else 0,
        windows_disjoint=disjoint_windows(record.start, record.end),
        n_probability=brier.n,
        brier=brier.score,
        brier_chance=brier.chance,
        brier_skill=brier.skill,
        weighted_hit_rate=_weighted(record.right.astype(float), record.weight),
        weighted_expected_rate=_weighted(record.chance_right, record.weight),
        verdict=said.words,
        verdict_reason=said.reason,
    )


def empty_record() -> Record:
    """Return a record without calls."""
    floats, whole, flags = np.zeros(0), np.zeros(0, dtype=np.int64), np.zeros(0, dtype=bool)
    return Record(flags, flags, floats, floats, floats, whole, whole, whole, whole, floats)


@dataclass(frozen=True)
class _Base:
    n: int
    hits: int
    expected: float
    upper: float | None
    lower: float | None
    best: float | None
    worst: float | None


def _base(record: Record) -> _Base:
    known = np.isfinite(record.chance)
    chance = record.chance_right[known]
    hits, n = int(record.right[known].sum()), int(known.sum())
    if not n:
        return _Base(0, 0, 0.0, None, None, None, None)
    tails = poisson_binomial_tails(hits, chance)
    best, worst = best_possible_p(chance), best_possible_p(1.0 - chance)
    return _Base(n, hits, float(chance.sum()), tails.upper, tails.lower, best, worst)


@dataclass(frozen=True)
class _Brier:
    n: int
    score: float | None
    chance: float | None
    skill: float | None


def _brier(record: Record) -> _Brier:
    stated = np.isfinite(record.probability_low)
    n = int(stated.sum())
    if not n:
        return _Brier(0, None, None, None)
    score = _brier_of(record, stated)
    both = stated & np.isfinite(record.chance)
    if not both.any():
        return _Brier(n, score, None, None)
    chance, outcome = record.chance[both], record.came_true[both]
    reference = brier_score_band(chance, chance, outcome)
    return _Brier(n, score, reference, brier_skill(_brier_of(record, both), reference))


def _brier_of(record: Record, rows: BoolArray) -> float:
    low, high = record.probability_low[rows], record.probability_high[rows]
    return brier_score_band(low, high, record.came_true[rows])


def effective_n(record: Record) -> int:
    """Return how many windows do not overlap, counted for each instrument apart.

    Parameters
    ----------
    record : Record
        The n calls, n may be 0.

    Returns
    -------
    int

    Raises
    ------
    ValueError
        If a window ends before it starts.

    References
    ----------
    See ``disjoint_windows``.

    Examples
    --------
    >>> effective_n(empty_record())
    0
    """
    total = 0
    for number in np.unique(record.instrument):
        own = record.instrument == number
        total += disjoint_windows(record.start[own], record.end[own])
    return total


def _weighted(values: FloatArray, weight: FloatArray) -> float | None:
    known = np.isfinite(values)
    total = float(weight[known].sum())
    return float((values[known] * weight[known]).sum() / total) if total > 0 else None


def is_one_sided(record: Record) -> bool:
    """Return whether every call points the same way.

    Parameters
    ----------
    record : Record
        The n calls; False for none.

    Returns
    -------
    bool
        A call that leans against its claim points the other way; one without direction
        keeps a record from being one-sided.

    Raises
    ------
    ValueError
        Never; the columns are those of a record.

    References
    ----------
    Common practice, no source.

    Examples
    --------
    >>> is_one_sided(empty_record())
    False
    """
    pointing = np.where(record.leans_against, -record.direction, record.direction)
    return len(pointing) > 0 and (bool((pointing > 0).all()) or bool((pointing < 0).all()))


def is_long_enough(record: Record, codebook: Codebook) -> bool:
    """Return whether a record may be judged and ranked at all.

    Parameters
    ----------
    record : Record
        The n calls.
    codebook : Codebook
        The minimum record.

    Returns
    -------
    bool
        It depends on which calls were made, never on how they came out.

    Raises
    ------
    ValueError
        If a window ends before it starts.

    References
    ----------
    The minimum record is common practice, no source.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> is_long_enough(empty_record(), default_codebook())
    False
    """
    rules = codebook.verdict
    enough = min(len(record.came_true), int(np.isfinite(record.chance).sum()))
    return enough >= rules.minimum_matured and effective_n(record) >= rules.minimum_disjoint


def _verdict(
    record: Record, base: _Base, shifted: Shifted | None, codebook: Codebook
) -> Verdict:
    effective = effective_n(record)
    evidence = Evidence(
        n=len(record.came_true),
        n_base=base.n,
        n_effective=effective,
        hits=base.hits,
        expected=base.expected,
        p_upper=base.upper,
        p_lower=base.lower,
        p_best=base.best,
        p_worst=base.worst,
        is_one_sided=is_one_sided(record),
        shifted=shifted,
        n_needed=_needed(base, len(record.came_true) / max(effective, 1), codebook),
    )
    return verdict(evidence, codebook.verdict)


def _needed(base: _Base, overlap: float, codebook: Codebook) -> int | None:
    """Return how many calls like these would show the codebook's edge, None where none do."""
    rules = codebook.verdict
    chance = base.expected / base.n if base.n else codebook.chance.coin
    skill = chance + rules.edge
    if skill > 1.0:
        return None
    return calls_needed(
        chance, skill, level=rules.level, power=rules.power, overlap=max(overlap, 1.0)
    )
