"""The errors that a user can meet; each message is one line: what was given, what is allowed, what to do."""

from __future__ import annotations

from collections.abc import Sequence


class HarvestError(Exception):
    """Base of every error that this package raises on purpose."""

    exit_code = 1


class InputError(HarvestError):
    """Something the user gave is wrong: a file, a field, an option. Exit code 2."""

    exit_code = 2


class QuantityError(InputError):
    """A text that should be a number with a unit is not one, or has the wrong unit."""


class RangeError(InputError):
    """A number is outside the range in which an answer can be given."""


class CaseError(InputError):
    """All faults of one case at once, one line each (`faults`)."""

    def __init__(self, faults: Sequence[str]) -> None:
        self.faults: tuple[str, ...] = tuple(faults)
        super().__init__("\n".join(self.faults))


class NoAnswerError(HarvestError):
    """The input is well formed but no case of it has a valid answer. Exit code 1."""


class MissingExtraError(HarvestError):
    """An optional library is needed and not installed; the message says how to install it."""

    exit_code = 2
