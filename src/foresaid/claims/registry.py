"""The closed list of claim kinds: one registration each, used by every room.

A kind is its phrase, the marks its numbers become, and the kernel that judges them.
Registering one here is all that a new kind takes.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Literal

from foresaid.claims.kernels import (
    Bound,
    BoundKernel,
    Kernel,
    On,
    Over,
    at_any_time,
    at_deadline,
    on_closes,
)

Role = Literal["here", "level", "gain", "loss", "gain of thing", "loss of thing"]
Direction = Literal["up", "down", "none", "by level"]

SLOT = re.compile(r"\{(\w+)\}")


@dataclass(frozen=True, slots=True)
class Mark:
    """How one mark is made.

    ``here`` is the reference price itself; ``level`` the stated price; ``gain`` and ``loss``
    a size above or below the reference. The two ``of thing`` roles are for instruments that
    are quoted the other way round: the quote moves so that the thing named gains or loses
    the size.
    """

    role: Role
    quantity: int = 0


@dataclass(frozen=True)
class Kind:
    """One kind of claim.

    Attributes
    ----------
    form : str
        The phrase with its slots: ``{level}`` is a price, ``{size}`` a move with its unit.
    reads : str
        When it is true, in words, for help and traces.
    marks : tuple of Mark
        The marks, in the order the kernel's bounds name them.
    kernel : Kernel
        Judges windows; absent where nothing is judged.
    direction : {"up", "down", "none", "by level"}
        Which way the quoted number has to go; "by level" where the level decides.
    alternates : dict of str to Kernel
        Other readings that are kept beside the result.
    inverse : Kind or None
        What it means on an instrument whose sense is inverse, where that differs.
    ascending : bool
        Whether the second level must be above the first.
    """

    form: str
    reads: str
    marks: tuple[Mark, ...]
    kernel: Kernel
    direction: Direction
    alternates: dict[str, Kernel] = field(default_factory=dict)
    inverse: Kind | None = None
    ascending: bool = False

    @property
    def name(self) -> str:
        """The phrase without its slots: the key under which a kind is kept."""
        return " ".join(SLOT.sub("", self.form).split())

    @property
    def slots(self) -> tuple[str, ...]:
        """The slots of the phrase, in order."""
        return tuple(SLOT.findall(self.form))

    @property
    def is_sized(self) -> bool:
        """Whether the phrase names a size, a level or a range."""
        return bool(self.slots)

    def in_sense(self, *, inverse: bool) -> Kind:
        """Return the kind as it is judged on an instrument of that sense."""
        return self.inverse if inverse and self.inverse is not None else self


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

NOT_A_CALL = "not a call"
