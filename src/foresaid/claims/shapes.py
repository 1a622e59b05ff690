"""Claim kinds of the common shapes, ready to be registered."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Literal

from foresaid.claims.bounds import BoundKernel, at_any_time, at_deadline, on_closes
from foresaid.claims.distributions import MOST_PARTS
from foresaid.claims.kernels import Bound, On, Over
from foresaid.claims.kind import Direction, Kind, Mark
from foresaid.claims.relative import RelativeKernel

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from foresaid.claims.kernels import Kernel
    from foresaid.claims.kind import Loss

HERE, LEVEL, GAIN, LOSS = Mark("here"), Mark("level"), Mark("gain"), Mark("loss")
SHARE = Mark("share")


def _end(side: Literal[1, -1], *, strict: bool, mark: int = 0) -> Bound:
    return Bound(side, strict=strict, over=Over.END, mark=mark)


def end_kind(form: str, reads: str, mark: Mark, side: Literal[1, -1], *, strict: bool) -> Kind:
    """Return a kind judged on the deadline close, with its touch kept beside."""
    kernel = BoundKernel((_end(side, strict=strict),))
    other: dict[str, Kernel] = {}
    if mark.role != "here":
        other["any_time"] = at_any_time(kernel)
    direction: Direction = "up" if side > 0 else "down"
    return Kind(form, reads, (mark,), kernel, direction, other)


def path_kind(form: str, reads: str, mark: Mark, bound: Bound) -> Kind:
    """Return a kind judged along the path, with the end and the closes kept beside."""
    kernel = BoundKernel((bound,))
    other: dict[str, Kernel] = {"deadline": at_deadline(kernel)}
    if bound.on is On.RANGE:
        other["closes"] = on_closes(kernel)
    elif bound.over is Over.ANY:
        other["any_time"] = at_any_time(kernel)
    directions: dict[int, Direction] = {1: "up", -1: "down", 0: "by level"}
    return Kind(form, reads, (mark,), kernel, directions[bound.side], other)


def between_kind(form: str, reads: str, marks: tuple[Mark, Mark], over: Over) -> Kind:
    """Return a kind that holds between two marks, ends included."""
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


def sense_kind(form: str, reads: str, direct: Kind, inverse: Kind) -> Kind:
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


def target_kind() -> Kind:
    """Return the kind of a target: reached or passed at the deadline, from either side."""
    kernel = BoundKernel((Bound(0, strict=False, over=Over.END),))
    return Kind(
        "targets {level}",
        "the deadline close is at the level or beyond it, as seen from the reference",
        (LEVEL,),
        kernel,
        "by level",
        {"any_time": at_any_time(kernel)},
        loss="error",
    )


def range_kind(form: str, reads: str) -> Kind:
    """Return the kind of an interval whose probability is the last number of the phrase."""
    kind = between_kind(form, reads, (LEVEL, Mark("level", 1)), Over.END)
    return replace(
        kind,
        marks=(*kind.marks, Mark("share", 2)),
        states=lambda values: values[2] / 100.0,
        loss="interval",
    )


def distribution_kind(
    form: str,
    reads: str,
    kernel: Kernel,
    states: Callable[[Sequence[float]], float],
    loss: Loss,
) -> Kind:
    """Return a kind whose numbers are a percentage and a level in turn."""
    roles = [Mark("level" if at % 2 else "share", at) for at in range(2 * MOST_PARTS)]
    return Kind(form, reads, tuple(roles), kernel, "none", states=states, loss=loss)


def returns_kind(form: str, reads: str, side: Literal[1, -1], *, by: bool) -> Kind:
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
