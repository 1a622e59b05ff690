"""The closed list of claim kinds: one registration each, used by every room.

Registering a kind here is all that a new kind takes.
"""

from __future__ import annotations

from foresaid.claims.distribution_kernels import BinsKernel, QuantilesKernel
from foresaid.claims.distributions import most_in_bins, span_of_quantiles
from foresaid.claims.kernels import Bound, On, Over
from foresaid.claims.kind import Kind, Mark
from foresaid.claims.paths import (
    DrawdownKernel,
    OldExtremeKernel,
    RaceKernel,
    VolatilityKernel,
)
from foresaid.claims.shapes import (
    GAIN,
    HERE,
    LEVEL,
    LOSS,
    SHARE,
    between_kind,
    distribution_kind,
    end_kind,
    path_kind,
    range_kind,
    returns_kind,
    sense_kind,
    target_kind,
)

KINDS: dict[str, Kind] = {}


def register(kind: Kind) -> Kind:
    """Add ``kind`` to the closed list and return it.

    Raises
    ------
    ValueError
        If a kind of that name is there already.
    """
    if kind.name in KINDS:
        raise ValueError(f"kind={kind.name!r} is registered already")
    KINDS[kind.name] = kind
    return kind


register(
    end_kind(
        "ends higher",
        "the deadline close is above the reference; an equal close is a miss",
        HERE,
        1,
        strict=True,
    )
)
register(
    end_kind(
        "ends lower",
        "the deadline close is below the reference; an equal close is a miss",
        HERE,
        -1,
        strict=True,
    )
)
register(
    end_kind(
        "ends higher by {size}",
        "the deadline close is above the reference by at least the size",
        GAIN,
        1,
        strict=False,
    )
)
register(
    end_kind(
        "ends lower by {size}",
        "the deadline close is below the reference by at least the size",
        LOSS,
        -1,
        strict=False,
    )
)


register(
    sense_kind(
        "strengthens",
        "the thing named has gained at the deadline close: `ends higher`, or "
        "`ends lower` where a lower quote is a gain",
        KINDS["ends higher"],
        KINDS["ends lower"],
    )
)
register(
    sense_kind(
        "weakens",
        "the thing named has lost at the deadline close: `ends lower`, or "
        "`ends higher` where a higher quote is a loss",
        KINDS["ends lower"],
        KINDS["ends higher"],
    )
)
register(
    sense_kind(
        "strengthens by {size}",
        "the thing named has gained at least the size at the deadline close",
        KINDS["ends higher by"],
        end_kind(
            "ends lower by {size}",
            "the quote has fallen so far that the thing named has gained at least the size",
            Mark("gain of thing"),
            -1,
            strict=False,
        ),
    )
)
register(
    sense_kind(
        "weakens by {size}",
        "the thing named has lost at least the size at the deadline close",
        KINDS["ends lower by"],
        end_kind(
            "ends higher by {size}",
            "the quote has risen so far that the thing named has lost at least the size",
            Mark("loss of thing"),
            1,
            strict=False,
        ),
    )
)

register(
    between_kind(
        "ends within {size}",
        "the deadline close is off the reference by at most the size",
        (LOSS, GAIN),
        Over.END,
    )
)
register(
    end_kind(
        "ends above {level}", "the deadline close is above the level", LEVEL, 1, strict=True
    )
)
register(
    end_kind(
        "ends below {level}", "the deadline close is below the level", LEVEL, -1, strict=True
    )
)
register(
    end_kind(
        "ends at least {level}",
        "the deadline close is at or above the level",
        LEVEL,
        1,
        strict=False,
    )
)
register(
    end_kind(
        "ends at most {level}",
        "the deadline close is at or below the level",
        LEVEL,
        -1,
        strict=False,
    )
)
register(
    between_kind(
        "ends between {level} and {level}",
        "the deadline close is in the range, ends included",
        (LEVEL, Mark("level", 1)),
        Over.END,
    )
)

register(
    path_kind(
        "closes above {level}",
        "any close in the window is above the level",
        LEVEL,
        Bound(1, strict=True, over=Over.ANY),
    )
)
register(
    path_kind(
        "closes below {level}",
        "any close in the window is below the level",
        LEVEL,
        Bound(-1, strict=True, over=Over.ANY),
    )
)
register(
    path_kind(
        "touches {level}",
        "a high at or above the level, or a low at or below "
        "it, whichever lies beyond the reference",
        LEVEL,
        Bound(0, strict=False, over=Over.ANY, on=On.RANGE),
    )
)
register(
    path_kind(
        "trades above {level}",
        "any high in the window is above the level",
        LEVEL,
        Bound(1, strict=True, over=Over.ANY, on=On.RANGE),
    )
)
register(
    path_kind(
        "trades below {level}",
        "any low in the window is below the level",
        LEVEL,
        Bound(-1, strict=True, over=Over.ANY, on=On.RANGE),
    )
)
register(
    path_kind(
        "stays above {level}",
        "no low in the window is below the level",
        LEVEL,
        Bound(1, strict=False, over=Over.ALL, on=On.RANGE),
    )
)
register(
    path_kind(
        "stays below {level}",
        "no high in the window is above the level",
        LEVEL,
        Bound(-1, strict=False, over=Over.ALL, on=On.RANGE),
    )
)
register(
    between_kind(
        "stays between {level} and {level}",
        "no low and no high in the window is outside the range",
        (LEVEL, Mark("level", 1)),
        Over.ALL,
    )
)
register(
    path_kind(
        "rises {size}",
        "any close in the window is above the reference by at least the size",
        GAIN,
        Bound(1, strict=False, over=Over.ANY),
    )
)
register(
    path_kind(
        "falls {size}",
        "any close in the window is below the reference by at least the size",
        LOSS,
        Bound(-1, strict=False, over=Over.ANY),
    )
)

register(
    Kind(
        "drawdown {size}",
        "a close is under the highest close since 252 sessions before the call by at least "
        "the size, newly so within the window",
        (LOSS,),
        DrawdownKernel(),
        "down",
        units_barred=("pt",),
        measures="the deepest fall from the running peak in the window, as a part of it",
    )
)
register(
    Kind(
        "low holds",
        "no close in the window is below the lowest close of the 252 sessions before the call",
        (HERE,),
        OldExtremeKernel(1),
        "none",
        measures="the move from the lowest close before the call to the deciding close, as a "
        "part of it or in points",
        names_level=True,
    )
)
register(
    Kind(
        "high holds",
        "no close in the window is above the highest close of the 252 sessions before the call",
        (HERE,),
        OldExtremeKernel(-1),
        "none",
        measures="the move from the highest close before the call to the deciding close, as a "
        "part of it or in points",
        names_level=True,
    )
)
register(
    Kind(
        "touches {level} before {level}",
        "the first level is touched, and the second was not touched by then",
        (LEVEL, Mark("level", 1)),
        RaceKernel(),
        "by level",
    )
)


register(target_kind())
register(
    range_kind(
        "range {level} to {level} at {percent}",
        "the deadline close is in the range, ends included; the percentage is the stated "
        "probability of that",
    )
)
register(
    distribution_kind(
        "quantiles {quantiles}",
        "the deadline close lies between the lowest and the highest quantile, both included",
        QuantilesKernel(),
        span_of_quantiles,
        "pinball",
    )
)
register(
    distribution_kind(
        "bins {bins}",
        "the deadline close falls into the bin that was given the most, or into one of "
        "several given as much",
        BinsKernel(),
        most_in_bins,
        "ranked",
    )
)
register(
    Kind(
        "volatility above {percent}",
        "the annualised standard deviation of the daily log moves from reference to deadline "
        "is above the percentage",
        (SHARE,),
        VolatilityKernel(1),
        "none",
        measures="the annualised volatility of the window, as a fraction",
    )
)
register(
    Kind(
        "volatility below {percent}",
        "the annualised standard deviation of the daily log moves from reference to deadline "
        "is below the percentage",
        (SHARE,),
        VolatilityKernel(-1),
        "none",
        measures="the annualised volatility of the window, as a fraction",
    )
)


_SPAN = "from the reference close to the deadline close, dividends reinvested where known"
register(
    returns_kind("beats {instrument}", f"its return is above the other's, {_SPAN}", 1, by=False)
)
register(
    returns_kind(
        "beats {instrument} by {percent}",
        f"its return is above the other's by at least that many percentage points, {_SPAN}",
        1,
        by=True,
    )
)
register(
    returns_kind("lags {instrument}", f"its return is below the other's, {_SPAN}", -1, by=False)
)
register(
    returns_kind(
        "lags {instrument} by {percent}",
        f"its return is below the other's by at least that many percentage points, {_SPAN}",
        -1,
        by=True,
    )
)
register(
    returns_kind(
        "tops {instruments}",
        f"its return is strictly the best of them all, {_SPAN}",
        1,
        by=False,
    )
)

NOT_A_CALL = "not a call"
