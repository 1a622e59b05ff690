"""Direction: whether saying up and saying down went with what the market did."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from foresaid.score.tails import Tails

if TYPE_CHECKING:
    from foresaid.model.bars import IntArray


@dataclass(frozen=True, slots=True)
class DirectionTable:
    """Calls by what was said and what the market did; a rise is the event.

    Attributes
    ----------
    up_up, up_down : int
        Calls for a rise after which it rose, or fell.
    down_up, down_down : int
        Calls for a fall after which it rose, or fell.
    """

    up_up: int
    up_down: int
    down_up: int
    down_down: int

    @property
    def n(self) -> int:
        """All calls in the table."""
        return self.up_up + self.up_down + self.down_up + self.down_down

    @property
    def is_one_sided(self) -> bool:
        """Whether only one thing was said, or only one thing happened."""
        said_up, rose = self.up_up + self.up_down, self.up_up + self.down_up
        return said_up in (0, self.n) or rose in (0, self.n)

    @property
    def hit_rate(self) -> float | None:
        """Share of rises that were called, from 0 to 1; None where it never rose."""
        rose = self.up_up + self.down_up
        return self.up_up / rose if rose else None

    @property
    def false_alarm_rate(self) -> float | None:
        """Share of falls that were called a rise, from 0 to 1; None where it never fell."""
        fell = self.up_down + self.down_down
        return self.up_down / fell if fell else None


@dataclass(frozen=True, slots=True)
class DirectionTest:
    """A statistic that is standard normal without skill; positive in the direction of skill.

    ``p_upper`` and ``p_lower`` are one-sided and add up to 1, ``p_two_sided`` counts both.
    """

    z: float
    p_upper: float
    p_lower: float
    p_two_sided: float


def direction_table(said: IntArray, went: IntArray) -> DirectionTable:
    """Return the table of calls for a rise and for a fall.

    Parameters
    ----------
    said : ndarray of int, shape (n,)
        1 for a rise, -1 for a fall; 0 has no direction and is left out.
    went : ndarray of int, shape (n,)
        1 where the price rose, -1 where it fell; an unchanged price, 0, is left out.

    Returns
    -------
    DirectionTable
        All zero for no call.

    Raises
    ------
    ValueError
        If the arrays are not flat, differ in length, or hold anything but -1, 0 and 1; true
        and false are no directions.

    References
    ----------
    Common practice, no source.

    Examples
    --------
    >>> direction_table(np.array([1, 1, -1, 0]), np.array([1, -1, -1, 1]))
    DirectionTable(up_up=1, up_down=1, down_up=0, down_down=1)
    """
    s, w = _signs("said", said), _signs("went", went)
    if len(s) != len(w):
        raise ValueError(f"said has length {len(s)}, went {len(w)}")
    counts = [int(np.count_nonzero((s == a) & (w == b))) for a in (1, -1) for b in (1, -1)]
    return DirectionTable(*counts)


def hit_less_false_alarm(table: DirectionTable) -> float | None:
    r"""Return the share of rises that were called less the share of falls called a rise.

    Parameters
    ----------
    table : DirectionTable
        Counts.

    Returns
    -------
    float or None
        From -1 to 1, 0 for whoever always says the same; None where the market went one way.

    Raises
    ------
    ValueError
        If a count is negative or not whole.

    Notes
    -----
    :math:`a / (a + c) - b / (b + d)` with a, b calls for a rise and c, d for a fall, after
    which it rose (a, c) or fell (b, d). The same with rise and fall exchanged.

    References
    ----------
    .. [1] C. S. Peirce (1884). The numerical measure of the success of predictions. Science
       4(93), 453-454.
    .. [2] A. W. Hanssen, W. J. A. Kuipers (1965). On the relationship between the frequency of
       rain and various meteorological parameters. Mededelingen en Verhandelingen 81, KNMI.

    Examples
    --------
    >>> hit_less_false_alarm(DirectionTable(3, 1, 1, 3))
    0.5
    """
    counts = _checked(table)
    if counts.hit_rate is None or counts.false_alarm_rate is None:
        return None
    return counts.hit_rate - counts.false_alarm_rate


def henriksson_merton(table: DirectionTable) -> Tails | None:
    r"""Return the exact conditional test of market timing.

    Parameters
    ----------
    table : DirectionTable
        Counts.

    Returns
    -------
    Tails or None
        Chance of at least, and of at most, as many rises among the calls for a rise, given how
        often it rose and how often a rise was called; None where the table is one-sided.

    Raises
    ------
    ValueError
        If a count is negative or not whole.

    Notes
    -----
    The count of rises among the calls for a rise is hypergeometric without skill:
    Fisher's exact test. Summed in whole numbers, so exact to the last digit of a float; a tail
    below 5e-324 is 0. The time grows with the square of the calls: 100,000 take seconds.
    Calls are taken as independent.

    References
    ----------
    .. [1] R. D. Henriksson, R. C. Merton (1981). On market timing and investment performance
       II: Statistical procedures for evaluating forecasting skills. Journal of Business 54(4),
       513-533.
    .. [2] R. A. Fisher (1935). The logic of inductive inference. Journal of the Royal
       Statistical Society 98(1), 39-82.

    Examples
    --------
    >>> tails = henriksson_merton(DirectionTable(3, 1, 1, 3))
    >>> round(tails.upper, 4)
    0.2429
    """
    counts = _checked(table)
    if counts.is_one_sided:
        return None
    n, rose = counts.n, counts.up_up + counts.down_up
    said = counts.up_up + counts.up_down
    least, most = max(0, said + rose - n), min(said, rose)
    term = math.comb(rose, least) * math.comb(n - rose, said - least)
    below = at = above = 0
    for count in range(least, most + 1):
        if count < counts.up_up:
            below += term
        elif count == counts.up_up:
            at = term
        else:
            above += term
        # from one count to the next, a division without remainder
        term = (
            term
            * (rose - count)
            * (said - count)
            // ((count + 1) * (n - rose - said + count + 1))
        )
    whole = below + at + above
    return Tails((at + above) / whole, (below + at) / whole)


def pesaran_timmermann(
    table: DirectionTable, *, cross_term: bool = True
) -> DirectionTest | None:
    r"""Return the test of Pesaran and Timmermann for skill in direction.

    Parameters
    ----------
    table : DirectionTable
        Counts.
    cross_term : bool
        Whether the variance of the expected hit rate keeps its term in :math:`1/n^2`, as the
        paper is commonly quoted. Some programs leave it out.

    Returns
    -------
    DirectionTest or None
        None where the table is one-sided: then, and only then, the variance is not positive.

    Raises
    ------
    ValueError
        If a count is negative or not whole.

    Notes
    -----
    With hit rate :math:`\hat P`, shares of rises :math:`y` and of calls for a rise :math:`x`,
    :math:`P_* = xy + (1-x)(1-y)` and
    :math:`S = (\hat P - P_*) / \sqrt{v - v_*}`, where :math:`v = P_*(1-P_*)/n` and
    :math:`v_* = ((2y-1)^2 x(1-x) + (2x-1)^2 y(1-y))/n + 4xy(1-x)(1-y)/n^2`. Standard normal
    for large n; calls are taken as independent.

    The counts a, b, c, d of the table give :math:`\hat P - P_* = 2(ad - bc)/n^2` and
    :math:`v - v_* = 4xy(1-x)(1-y)(1/n - 1/n^2)`, without the last term where it is left out.
    These are worked with, so nothing cancels. So S is the correlation of what was said with
    what happened, times :math:`n/\sqrt{n-1}`, or times :math:`\sqrt n` without the term: its
    square is then Pearson's chi-squared of the table, without a continuity correction.

    References
    ----------
    .. [1] M. H. Pesaran, A. Timmermann (1992). A simple nonparametric test of predictive
       performance. Journal of Business & Economic Statistics 10(4), 461-465.

    Examples
    --------
    >>> round(pesaran_timmermann(DirectionTable(30, 20, 20, 30)).z, 4)
    2.0101
    """
    counts = _checked(table)
    if counts.is_one_sided:
        return None
    n, rose = counts.n, counts.up_up + counts.down_up
    said = counts.up_up + counts.up_down
    together = counts.up_up * counts.down_down - counts.up_down * counts.down_up
    correlation = together / math.sqrt(said * (n - said) * rose * (n - rose))
    z = correlation * (n / math.sqrt(n - 1) if cross_term else math.sqrt(n))
    upper, lower = float(special.ndtr(-z)), float(special.ndtr(z))
    return DirectionTest(z, upper, lower, 2.0 * float(special.ndtr(-abs(z))))


def _checked(table: DirectionTable) -> DirectionTable:
    """Return the table in Python's whole numbers, which never overflow."""
    counts = (table.up_up, table.up_down, table.down_up, table.down_down)
    if not all(count >= 0 and count % 1 == 0 for count in counts):
        raise ValueError(f"table={table!r} has a negative count or one that is not whole")
    return DirectionTable(*(int(count) for count in counts))


def _signs(name: str, values: IntArray) -> IntArray:
    array = np.asarray(values)
    if array.ndim != 1:
        raise ValueError(f"{name} has shape {array.shape}, must be flat")
    wrong = ~np.isin(array, (-1, 0, 1)) | (array.dtype.kind == "b")
    if wrong.any():
        at = int(np.argmax(wrong))
        raise ValueError(f"{name}[{at}]={array[at].item()!r} must be -1, 0 or 1")
    return array.astype(np.int64)
