"""How long a record has to be before skill can show in it."""

from __future__ import annotations

import math
from bisect import bisect_left
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

MOST_CALLS = 1_000_000  # independent calls; no longer record is thought of
_SAME = 1e-12  # relative; a tail this near the level reaches it


@dataclass(frozen=True, slots=True)
class Power:
    """What a test of a record of given length can find.

    Attributes
    ----------
    power : float
        Chance that a forecaster with the skill passes, from 0 to 1.
    attained_level : float
        Chance that one without skill passes: at most the level over the field, mostly less.
    independent : int
        Calls that count after the overlap.
    hits_needed : int or None
        Fewest hits among ``independent`` that pass; None where all right would not pass.
    """

    power: float
    attained_level: float
    independent: int
    hits_needed: int | None


def calls_needed(
    chance: float,
    skill: float,
    *,
    level: float = 0.05,
    power: float = 0.8,
    field: int = 1,
    overlap: float = 1.0,
) -> int | None:
    r"""Return how many matured calls are needed to tell skill from chance.

    Parameters
    ----------
    chance : float
        Chance that a call is right without skill, from 0 to 1.
    skill : float
        Chance that a call of the forecaster is right, from 0 to 1.
    level : float
        One-sided level of the whole field, strictly between 0 and 1.
    power : float
        Chance of passing that is asked for, above ``level`` and below 1.
    field : int
        Forecasters that are looked at, at least 1.
    overlap : float
        Mean number of calls that share one window, at least 1.

    Returns
    -------
    int or None
        Calls from which on the power is reached and stays reached. None where the skill is no
        better than the chance, or a million independent calls are not enough.

    Raises
    ------
    ValueError
        If an argument is outside its range.

    Notes
    -----
    The exact test passes a forecaster with at least :math:`c` hits of :math:`n`, :math:`c` the
    smallest count with :math:`P(X \ge c) \le level / field` at the chance. Its power is
    :math:`P(X \ge c)` at the skill. It rises with :math:`n` while :math:`c` stays and drops
    where :math:`c` grows, so the first :math:`n` that reaches the power may be followed by ones
    that do not. The answer is one more than the last :math:`n` that does not.

    By Hoeffding's inequality no :math:`n` fails from

    .. math:: \frac{\big(\sqrt{\ln(field / level)} + \sqrt{-\ln(1 - power)}\big)^2}
              {2 (skill - chance)^2}

    on. Below it, stretches from :math:`a` to :math:`b` are halved, the later half first, until
    the count needed at :math:`b` is reached with the power at :math:`a` already. Lengths above
    a million are not looked at.

    The level is divided by the field (Bonferroni), which holds however records hang together.
    Calls that share a window count as one: :math:`n` independent calls take
    :math:`n \cdot overlap` calls, rounded up. That is too strict where they are not all right
    or wrong together, and too lenient where windows of different instruments move together.

    References
    ----------
    .. [1] M. Chernick, C. Y. Liu (2002). The saw-toothed behavior of power versus sample size
       and software solutions. The American Statistician 56(2), 149-155.
       doi:10.1198/000313002317572835
    .. [2] W. Hoeffding (1963). Probability inequalities for sums of bounded random variables.
       J. Amer. Statist. Assoc. 58(301), 13-30. doi:10.1080/01621459.1963.10500830
    .. [3] L. Kish (1965). Survey Sampling. Wiley (design effect).

    Examples
    --------
    >>> calls_needed(0.5, 0.6)
    169
    >>> calls_needed(0.5, 0.5) is None
    True
    """
    test = _Test(_checked("chance", chance), _share_of_level(level, field))
    _check_power(power, level)
    _check_overlap(overlap)
    if _checked("skill", skill) <= chance:
        return None
    widths = math.sqrt(-math.log(test.level)) + math.sqrt(-math.log1p(-power))
    root = widths / (skill - chance)
    most = math.ceil(min(root * root / 2.0, MOST_CALLS))
    last = _last_failure(range(most + 1), test, skill, power) or 0  # no call never passes
    return None if last == MOST_CALLS else math.ceil((last + 1) * overlap * (1.0 - _SAME))


def achieved_power(
    n: int,
    chance: float,
    skill: float,
    *,
    level: float = 0.05,
    field: int = 1,
    overlap: float = 1.0,
) -> Power:
    r"""Return the exact power of the test of a record of n calls.

    Parameters
    ----------
    n : int
        Matured calls, at least 0.
    chance : float
        Chance that a call is right without skill, from 0 to 1.
    skill : float
        Chance that a call of the forecaster is right, from 0 to 1; below ``chance`` as well.
    level : float
        One-sided level of the whole field, strictly between 0 and 1.
    field : int
        Forecasters that are looked at, at least 1.
    overlap : float
        Mean number of calls that share one window, at least 1.

    Returns
    -------
    Power
        Power and attained level, both 0 where even a perfect record does not pass.

    Raises
    ------
    ValueError
        If an argument is outside its range.

    Notes
    -----
    The test is that of ``calls_needed``, on :math:`n / overlap` independent calls, rounded
    down.

    References
    ----------
    .. [1] M. Chernick, C. Y. Liu (2002). The saw-toothed behavior of power versus sample size
       and software solutions. The American Statistician 56(2), 149-155.
       doi:10.1198/000313002317572835

    Examples
    --------
    >>> found = achieved_power(20, 0.5, 0.7)
    >>> found.hits_needed, round(found.power, 4), round(found.attained_level, 4)
    (15, 0.4164, 0.0207)
    """
    test = _Test(_checked("chance", chance), _share_of_level(level, field))
    independent = _independent(n, overlap)
    hits = test.hits_needed(independent)
    return Power(
        _upper_tail(hits, independent, _checked("skill", skill)),
        _upper_tail(hits, independent, chance),
        independent,
        hits if hits <= independent else None,
    )


def detectable_skill(
    n: int,
    chance: float,
    *,
    level: float = 0.05,
    power: float = 0.8,
    field: int = 1,
    overlap: float = 1.0,
) -> float | None:
    r"""Return the smallest skill that a record of n calls shows with the power asked for.

    Parameters
    ----------
    n : int
        Matured calls, at least 0.
    chance : float
        Chance that a call is right without skill, from 0 to 1.
    level : float
        One-sided level of the whole field, strictly between 0 and 1.
    power : float
        Chance of passing that is asked for, above ``level`` and below 1.
    field : int
        Forecasters that are looked at, at least 1.
    overlap : float
        Mean number of calls that share one window, at least 1.

    Returns
    -------
    float or None
        Chance that a call is right, from ``chance`` to 1; None where even a forecaster who is
        always right does not pass.

    Raises
    ------
    ValueError
        If an argument is outside its range.

    Notes
    -----
    The test is that of ``calls_needed``, on :math:`n / overlap` independent calls, rounded
    down. With :math:`c` hits needed the skill :math:`s` solves
    :math:`P(X \ge c) = I_s(c, n - c + 1) = power`, a quantile of a beta distribution.

    References
    ----------
    .. [1] M. Abramowitz, I. A. Stegun (1964). Handbook of Mathematical Functions, 26.5.24.

    Examples
    --------
    >>> round(detectable_skill(20, 0.5), 4)
    0.7987
    >>> detectable_skill(4, 0.5) is None
    True
    """
    test = _Test(_checked("chance", chance), _share_of_level(level, field))
    _check_power(power, level)
    independent = _independent(n, overlap)
    hits = test.hits_needed(independent)
    if hits > independent:
        return None
    return float(special.betaincinv(hits, independent - hits + 1, power))


def best_possible_p(chances: FloatArray) -> float:
    r"""Return the p-value of a record in which every call is right.

    Parameters
    ----------
    chances : ndarray of float, shape (n,)
        Chance of each call to be right, from 0 to 1, no NaN; n may be 0.

    Returns
    -------
    float
        The smallest upper p-value that any outcome of these calls can have; 1 for no call, 0
        where it is too small for a float.

    Raises
    ------
    ValueError
        If a chance is NaN or outside ``[0, 1]``, or the array is not flat.

    Notes
    -----
    :math:`\prod p_i`. A record whose best possible p-value is above the level cannot pass,
    whatever happens. Assumes independent calls.

    References
    ----------
    .. [1] R. E. Tarone (1990). A modified Bonferroni method for discrete data. Biometrics
       46(2), 515-522. doi:10.2307/2531456

    Examples
    --------
    >>> best_possible_p(np.array([0.5, 0.5, 0.5, 0.5]))
    0.0625
    """
    p = np.asarray(chances, dtype=np.float64)
    if p.ndim != 1:
        raise ValueError(f"chances has shape {p.shape}, must be flat")
    is_chance = (p >= 0.0) & (p <= 1.0)
    if not is_chance.all():
        raise ValueError(f"chances holds {float(p[~is_chance][0])!r}, must lie in [0, 1]")
    return float(np.prod(p))


@dataclass(frozen=True, slots=True)
class _Test:
    """The exact one-sided binomial test of one record."""

    chance: float
    level: float

    def hits_needed(self, n: int) -> int:
        """Return the fewest hits of n that pass, n + 1 where all right would not."""
        reached = self.level * (1.0 + _SAME)
        return bisect_left(
            range(n + 1), True, key=lambda hits: _upper_tail(hits, n, self.chance) <= reached
        )


def _last_failure(lengths: range, test: _Test, skill: float, power: float) -> int | None:
    """Return the longest of some lengths at which the power is missed.

    The hits needed never fall and the chance to have them never falls with the length, so
    the shortest length with the hits needed at the longest bounds the power of all from below.
    """
    first, last = lengths[0], lengths[-1]
    bound = _upper_tail(test.hits_needed(last), first, skill)
    if bound >= power * (1.0 - _SAME):
        return None
    if first == last:
        return first
    half = len(lengths) // 2
    later = _last_failure(lengths[half:], test, skill, power)
    return later if later is not None else _last_failure(lengths[:half], test, skill, power)


def _upper_tail(hits: int, n: int, chance: float) -> float:
    if hits == 0:
        return 1.0
    return float(special.betainc(hits, n - hits + 1, chance)) if hits <= n else 0.0


def _independent(n: int, overlap: float) -> int:
    if not (n >= 0 and n % 1 == 0):
        raise ValueError(f"n={n!r} must be a whole number of at least 0")
    _check_overlap(overlap)
    # the slack is wider than that of calls_needed, so that its answer is enough
    return math.floor(n / overlap * (1.0 + 4.0 * _SAME))


def _share_of_level(level: float, field: int) -> float:
    if not 0.0 < level < 1.0:
        raise ValueError(f"level={level!r} must lie strictly between 0 and 1")
    if not (field >= 1 and field % 1 == 0):
        raise ValueError(f"field={field!r} must be a whole number of at least 1")
    return level / field


def _checked(name: str, share: float) -> float:
    if not 0.0 <= share <= 1.0:
        raise ValueError(f"{name}={share!r} must lie in [0, 1]")
    return share


def _check_power(power: float, level: float) -> None:
    if not level < power < 1.0:
        raise ValueError(f"power={power!r} must lie above level={level!r} and below 1")


def _check_overlap(overlap: float) -> None:
    if not 1.0 <= overlap < math.inf:
        raise ValueError(f"overlap={overlap!r} must be at least 1 and finite")
