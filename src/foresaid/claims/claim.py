"""A claim as data, and the fault of a phrase that is not one."""

from __future__ import annotations

from dataclasses import dataclass


class PhraseError(ValueError):
    """A phrase that cannot be read.

    Attributes
    ----------
    message : str
        Which word is at fault and why.
    hint : str
        The nearest legal phrase, or what to write instead.
    """

    def __init__(self, message: str, hint: str = "") -> None:
        super().__init__(message)
        self.message = message
        self.hint = hint


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number of a claim with its unit: ``%``, ``pp``, ``bp``, ``pt``, or none for a level."""

    value: float
    unit: str = ""


@dataclass(frozen=True, slots=True)
class Claim:
    """One claim in canonical form.

    Attributes
    ----------
    kind : str
        Name of a registered kind.
    quantities : tuple of Quantity
        The numbers of the phrase, in its order.
    others : tuple of str
        Symbols of other instruments that it names, as typed.
    reason : str
        Why a statement is not a call; empty for calls.
    """

    kind: str
    quantities: tuple[Quantity, ...] = ()
    reason: str = ""
    others: tuple[str, ...] = ()

    @property
    def is_call(self) -> bool:
        """Whether there is anything to settle."""
        return not self.reason
