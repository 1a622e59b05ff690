"""The closed list of claim kinds: one registration each, used by every room.

Registering a kind here is all that a new kind takes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

from foresaid.claims.bounds import BoundKernel, at_any_time, at_deadline, on_closes
from foresaid.claims.kernels import Bound, On, Over
from foresaid.claims.kind import Direction, Kind, Mark
from foresaid.claims.paths import (
    DrawdownKernel,
    OldExtremeKernel,
    RaceKernel,
    VolatilityKernel,
)
from foresaid.claims.relative import RelativeKernel

if TYPE_CHECKING:
    from foresaid.claims.kernels import Kernel

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


def _end(side: Literal[1, -1], *, strict: bool, mark: int = 0) -> Bound:
    return Bound(side, strict=strict, over=Over.END, mark=mark)


def _end_kind(form: str, reads: str, mark: Mark, side: Literal[1, -1], *, strict: bool) -> Kind:
    """Return a kind judged on the deadline close, with its touch kept beside."""
    kernel = BoundKernel((_end(side, strict=strict),))
    other: dict[str, Kernel] = {}
    if mark.role != "here":
        other["any_time"] = at_any_time(kernel)
    direction: Direction = "up" if side > 0 else "down"
    return Kind(form, reads, (mark,), kernel, direction, other)


def _path_kind(form: str, reads: str, mark: Mark, bound: Bound) -> Kind:
    """Return a kind judged along the path, with the end and the closes kept beside."""
    kernel = BoundKernel((bound,))
    other: dict[str, Kernel] = {"deadline": at_deadline(kernel)}
    if bound.on is On.RANGE:
        other["closes"] = on_closes(kernel)
    elif bound.over is Over.ANY:
        other["any_time"] = at_any_time(kernel)
    directions: dict[int, Direction] = {1: "up", -1: "down", 0: "by level"}
    return Kind(form, reads, (mark,), kernel, directions[bound.side], other)


def _between(form: str, reads: str, marks: tuple[Mark, Mark], over: Over) -> Kind:
    on = On.CLOSE if over is Over.END else On.RANGE
    kernel = BoundKernel(
        (
            Bound(1, strict=False, over=over, on=on, mark=0),
            Bound(-1, strict=False, over=over, on=on, mark=1),
        )
    )
    other: dict[str, Kernel] = {}
    if over is Over.ALL:
        other = {"deadline": at_deadline(kernel), "closes": on_closes(kernel)}
    ascending = marks[0].role == "level"
    return Kind(form, reads, marks, kernel, "none", other, ascending=ascending)


HERE, LEVEL, GAIN, LOSS = Mark("here"), Mark("level"), Mark("gain"), Mark("loss")

register(
    _end_kind(
        "ends higher",
        "the deadline close is above the reference; an equal close is a miss",
        HERE,
        1,
        strict=True,
    )
)
register(
    _end_kind(
        "ends lower",
        "the deadline close is below the reference; an equal close is a miss",
        HERE,
        -1,
        strict=True,
    )
)
register(
    _end_kind(
        "ends higher by {size}",
        "the deadline close is above the reference by at least the size",
        GAIN,
        1,
        strict=False,
    )
)
register(
    _end_kind(
        "ends lower by {size}",
        "the deadline close is below the reference by at least the size",
        LOSS,
        -1,
        strict=False,
    )
)


def _sense_kind(form: str, reads: str, direct: Kind, inverse: Kind) -> Kind:
    """Return a kind that follows the instrument's sense."""
    return Kind(
        form,
        reads,
        direct.marks,
        direct.kernel,
        direct.direction,
        direct.alternates,
        inverse=inverse,
    )


register(
    _sense_kind(
        "strengthens",
        "the thing named has gained at the deadline close: `ends higher`, or "
        "`ends lower` where a lower quote is a gain",
        KINDS["ends higher"],
        KINDS["ends lower"],
    )
)
register(
    _sense_kind(
        "weakens",
        "the thing named has lost at the deadline close: `ends lower`, or "
        "`ends higher` where a higher quote is a loss",
        KINDS["ends lower"],
        KINDS["ends higher"],
    )
)
register(
    _sense_kind(
        "strengthens by {size}",
        "the thing named has gained at least the size at the deadline close",
        KINDS["ends higher by"],
        _end_kind(
            "ends lower by {size}",
            "the quote has fallen so far that the thing named has gained at least the size",
            Mark("gain of thing"),
            -1,
            strict=False,
        ),
    )
)
register(
    _sense_kind(
        "weakens by {size}",
        "the thing named has lost at least the size at the deadline close",
        KINDS["ends lower by"],
        _end_kind(
            "ends higher by {size}",
            "the quote has risen so far that the thing named has lost at least the size",
            Mark("loss of thing"),
            1,
            strict=False,
        ),
    )
)

register(
    _between(
        "ends within {size}",
        "the deadline close is off the reference by at most the size",
        (LOSS, GAIN),
        Over.END,
    )
)
register(
    _end_kind(
        "ends above {level}", "the deadline close is above the level", LEVEL, 1, strict=True
    )
)
register(
    _end_kind(
        "ends below {level}", "the deadline close is below the level", LEVEL, -1, strict=True
    )
)
register(
    _end_kind(
        "ends at least {level}",
        "the deadline close is at or above the level",
        LEVEL,
        1,
        strict=False,
    )
)
register(
    _end_kind(
        "ends at most {level}",
        "the deadline close is at or below the level",
        LEVEL,
        -1,
        strict=False,
    )
)
register(
    _between(
        "ends between {level} and {level}",
        "the deadline close is in the range, ends included",
        (LEVEL, Mark("level", 1)),
        Over.END,
    )
)

register(
    _path_kind(
        "closes above {level}",
        "any close in the window is above the level",
        LEVEL,
        Bound(1, strict=True, over=Over.ANY),
    )
)
register(
    _path_kind(
        "closes below {level}",
        "any close in the window is below the level",
        LEVEL,
        Bound(-1, strict=True, over=Over.ANY),
    )
)
register(
    _path_kind(
        "touches {level}",
        "a high at or above the level, or a low at or below "
        "it, whichever lies beyond the reference",
        LEVEL,
        Bound(0, strict=False, over=Over.ANY, on=On.RANGE),
    )
)
register(
    _path_kind(
        "trades above {level}",
        "any high in the window is above the level",
        LEVEL,
        Bound(1, strict=True, over=Over.ANY, on=On.RANGE),
    )
)
register(
    _path_kind(
        "trades below {level}",
        "any low in the window is below the level",
        LEVEL,
        Bound(-1, strict=True, over=Over.ANY, on=On.RANGE),
    )
)
register(
    _path_kind(
        "stays above {level}",
        "no low in the window is below the level",
        LEVEL,
        Bound(1, strict=False, over=Over.ALL, on=On.RANGE),
    )
)
register(
    _path_kind(
        "stays below {level}",
        "no high in the window is above the level",
        LEVEL,
        Bound(-1, strict=False, over=Over.ALL, on=On.RANGE),
    )
)
register(
    _between(
        "stays between {level} and {level}",
        "no low and no high in the window is outside the range",
        (LEVEL, Mark("level", 1)),
        Over.ALL,
    )
)
register(
    _path_kind(
        "rises {size}",
        "any close in the window is above the reference by at least the size",
        GAIN,
        Bound(1, strict=False, over=Over.ANY),
    )
)
register(
    _path_kind(
        "falls {size}",
        "any close in the window is below the reference by at least the size",
        LOSS,
        Bound(-1, strict=False, over=Over.ANY),
    )
)

SHARE = Mark("share")

register(
    Kind(
        "drawdown {size}",
        "a close is under the highest close since 252 sessions before the call by at least "
        "the size, newly so within the window",
        (LOSS,),
        DrawdownKernel(),
        "down",
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
        measures="the deciding close over the lowest close before the call, less 1",
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
        measures="the deciding close over the highest close before the call, less 1",
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


def _target() -> Kind:
    kernel = BoundKernel((Bound(0, strict=False, over=Over.END),))
    return Kind(
        "targets {level}",
        "the deadline close is at the level or beyond it, as seen from the reference",
        (LEVEL,),
        kernel,
        "by level",
        {"any_time": at_any_time(kernel)},
    )


register(_target())
register(
    _between(
        "range {level} to {level} at {percent}",
        "the deadline close is in the range, ends included; the percentage is the stated "
        "probability of that",
        (LEVEL, Mark("level", 1)),
        Over.END,
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


def _relative(form: str, reads: str, side: Literal[1, -1], *, by: bool) -> Kind:
    """Return a kind that compares returns, with the price returns kept beside."""
    kernel = RelativeKernel(side, strict=not by)
    return Kind(
        form,
        reads,
        (SHARE if by else Mark("nothing"),),
        kernel,
        "none",
        {"price_return": RelativeKernel(side, strict=not by, price_only=True)},
        measures="the return less that of the best of the others, as a fraction",
    )


_RETURNS = "from the reference close to the deadline close, dividends reinvested where known"
register(
    _relative("beats {instrument}", f"its return is above the other's, {_RETURNS}", 1, by=False)
)
register(
    _relative(
        "beats {instrument} by {percent}",
        f"its return is above the other's by at least that many percentage points, {_RETURNS}",
        1,
        by=True,
    )
)
register(
    _relative("lags {instrument}", f"its return is below the other's, {_RETURNS}", -1, by=False)
)
register(
    _relative(
        "lags {instrument} by {percent}",
        f"its return is below the other's by at least that many percentage points, {_RETURNS}",
        -1,
        by=True,
    )
)
register(
    _relative(
        "tops {instruments}",
        f"its return is strictly the best of them all, {_RETURNS}",
        1,
        by=False,
    )
)

NOT_A_CALL = "not a call"
