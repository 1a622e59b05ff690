"""One group of calls to one line of scores; too little data is an answer, not an error."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from foresaid.score.direction import (
    direction_table,
    henriksson_merton,
    hit_less_false_alarm,
    pesaran_timmermann,
)
from foresaid.score.overlap import disjoint_windows
from foresaid.score.poisson_binomial import poisson_binomial_tails
from foresaid.score.power import best_possible_p, calls_needed
from foresaid.score.probability import brier_score_band, brier_skill
from foresaid.score.proportions import binomial_tails, wilson_interval
from foresaid.score.record import Record, effective_n, is_one_sided, pointing
from foresaid.score.verdict import Evidence, Shifted, Verdict, verdict

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray
    from foresaid.model.codebook import Codebook


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
    n_direction: int
    hit_less_false_alarm: float | None
    p_henriksson_merton: float | None
    p_pesaran_timmermann: float | None
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
    >>> from foresaid.score.record import empty_record
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
    directions = direction_table(pointing(record), record.went)
    timed, skilled = henriksson_merton(directions), pesaran_timmermann(directions)
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
        n_direction=directions.n,
        hit_less_false_alarm=None
        if directions.is_one_sided
        else hit_less_false_alarm(directions),
        p_henriksson_merton=timed.upper if timed else None,
        p_pesaran_timmermann=skilled.p_upper if skilled else None,
        n_probability=brier.n,
        brier=brier.score,
        brier_chance=brier.chance,
        brier_skill=brier.skill,
        weighted_hit_rate=_weighted(record.right.astype(float), record.weight),
        weighted_expected_rate=_weighted(record.chance_right, record.weight),
        verdict=said.words,
        verdict_reason=said.reason,
    )


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


def _weighted(values: FloatArray, weight: FloatArray) -> float | None:
    known = np.isfinite(values)
    total = float(weight[known].sum())
    return float((values[known] * weight[known]).sum() / total) if total > 0 else None


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
