"""What a kind of claim is: its phrase, the marks its numbers become, and its kernel."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from foresaid.claims.kernels import Kernel


Role = Literal[
    "here", "level", "gain", "loss", "gain of thing", "loss of thing", "share", "nothing"
]
Direction = Literal["up", "down", "none", "by level"]

Loss = Literal["", "error", "interval", "pinball", "ranked"]

DISTRIBUTION_SLOTS = ("quantiles", "bins")
SLOT = re.compile(r"\{(\w+)\}")


@dataclass(frozen=True, slots=True)
class Mark:
    """How one mark is made.

    ``here`` is the reference price itself; ``level`` the stated price; ``gain`` and ``loss``
    a size above or below the reference. The two ``of thing`` roles are for instruments that
    are quoted the other way round: the quote moves so that the thing named gains or loses
    the size. ``share`` is the percentage as a fraction, whatever the reference; ``nothing``
    is zero.
    """

    role: Role
    quantity: int = 0


@dataclass(frozen=True)
class Kind:
    """One kind of claim.

    Attributes
    ----------
    form : str
        The phrase with its slots: ``{level}`` is a price, ``{size}`` a move with its unit,
        ``{percent}`` a percentage of something else than the price, ``{instrument}`` another
        instrument, ``{instruments}`` a list of them at the end, ``{quantiles}`` and
        ``{bins}`` a distribution.
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
    units_barred : tuple of str
        Units of size that have no meaning for it.
    measures : str
        What ``Judged.measured`` is, where it is not the move from the reference.
    names_level : bool
        Whether it speaks of a level without a number for it.
    states : callable or None
        From the numbers of the phrase to the probability that it states itself, as a fraction.
    loss : {"", "error", "interval", "pinball", "ranked"}
        Which loss of a point, interval or distribution forecast is kept beside the result.
    """

    form: str
    reads: str
    marks: tuple[Mark, ...]
    kernel: Kernel
    direction: Direction
    alternates: dict[str, Kernel] = field(default_factory=dict)
    inverse: Kind | None = None
    ascending: bool = False
    units_barred: tuple[str, ...] = ()
    measures: str = ""
    names_level: bool = False
    states: Callable[[Sequence[float]], float] | None = None
    loss: Loss = ""

    @property
    def name(self) -> str:
        """The phrase without its slots: the key under which a kind is kept."""
        return " ".join(SLOT.sub("", self.form).split())

    @property
    def slots(self) -> tuple[str, ...]:
        """The slots of the phrase, in order."""
        return tuple(SLOT.findall(self.form))

    @property
    def number_slots(self) -> tuple[str, ...]:
        """The slots that hold numbers, in order."""
        return tuple(slot for slot in self.slots if not slot.startswith("instrument"))

    def slots_of(self, n_quantities: int) -> tuple[str, ...]:
        """Return the slot of each number of a claim; a distribution has them in turn."""
        if self.slots and self.slots[-1] in DISTRIBUTION_SLOTS:
            return tuple(("percent", "level")[at % 2] for at in range(n_quantities))
        return self.number_slots

    @property
    def is_sized(self) -> bool:
        """Whether the phrase names a size, a level or a range."""
        return bool(self.number_slots) or self.names_level

    def in_sense(self, *, inverse: bool) -> Kind:
        """Return the kind as it is judged on an instrument of that sense."""
        return self.inverse if inverse and self.inverse is not None else self
