"""The exceptions a user may meet, and the exit status each one carries.

::

    ForesaidError            1
    ├── UsageError           2   the request makes no sense as given
    ├── InputRejected        3   a file was refused; carries every issue found in it
    ├── LedgerError          4   the ledger cannot be opened, read or written
    └── CheckFailed          5   a check that was asked for did not hold

A wrong argument to the numeric rooms raises ``ValueError``: that is a bug of ours, and
nobody below ``cli`` catches it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.model.issues import Issue


class ForesaidError(Exception):
    """A fault that is told to the user in words instead of a traceback.

    Attributes
    ----------
    issues : tuple of Issue
        Every fault found in a file, in its order; empty where no file is at fault.
    """

    exit_status: ClassVar[int] = 1

    def __init__(self, message: str, issues: Sequence[Issue] = ()) -> None:
        super().__init__(message)
        self.issues = tuple(issues)


class UsageError(ForesaidError):
    """The request makes no sense as given (exit status 2)."""

    exit_status = 2


class InputRejected(ForesaidError):  # noqa: N818 - reads as what happened
    """A file was refused as a whole (exit status 3)."""

    exit_status = 3


class LedgerError(ForesaidError):
    """The ledger cannot be opened, read or written (exit status 4)."""

    exit_status = 4


class CheckFailed(ForesaidError):  # noqa: N818 - reads as what happened
    """A check that was asked for did not hold (exit status 5)."""

    exit_status = 5
