"""What can go wrong, told to a person: one message, and the exit status it ends in."""

from __future__ import annotations


class SeamfoldError(Exception):
    """A problem the user can act on.

    Parameters
    ----------
    found:
        What was found, and where (file, field, node).
    remedy:
        What was expected, or the line that would fix it.
    """

    exit_status = 2

    def __init__(self, found: str, remedy: str = "") -> None:
        super().__init__(found)
        self.found = found
        self.remedy = remedy

    def __str__(self) -> str:
        return f"{self.found}\n  {self.remedy}" if self.remedy else self.found


class InputError(SeamfoldError):
    """Bad input or a refused case: exit status 2."""


class NotYetError(InputError):
    """A key or result of the contract that this version cannot serve: exit status 2."""


class CheckFailed(SeamfoldError):
    """The data do not satisfy what the case declares: exit status 1."""

    exit_status = 1
