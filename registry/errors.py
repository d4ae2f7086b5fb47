"""The one family of errors: what was given, where, and what would be accepted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

__all__ = [
    "AlreadyThere",
    "DatabaseNotReady",
    "Fault",
    "InputRefused",
    "NotAllowed",
    "NotFound",
    "NotNow",
    "OffGrid",
    "ReadingRefused",
    "RecordDamaged",
    "RegistryError",
    "SettingMissing",
    "SignInRefused",
    "UnitRefused",
]


@dataclass(frozen=True)
class Fault:
    """One thing wrong with what was given.

    ``where`` is written for the person ("line 7, column minutes"), ``field`` is the
    name of the form field, when there is one, so that a page can set the fault beside it.
    """

    where: str
    given: str
    accepted: str
    field: str | None = None

    def __str__(self) -> str:
        return f"{self.where}: {self.given}; {self.accepted}" if self.where else f"{self.given}; {self.accepted}"


class RegistryError(Exception):
    """Something was asked that the registry cannot do; carries one or more faults."""

    def __init__(self, faults: Fault | Sequence[Fault]) -> None:
        self.faults: tuple[Fault, ...] = (faults,) if isinstance(faults, Fault) else tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class InputRefused(RegistryError):
    """What was given is not acceptable; the faults name each place and the fix."""


class ReadingRefused(InputRefused):
    """A reading's text is not a number that the registry can keep exactly."""


class OffGrid(ReadingRefused):
    """A reading lies between two steps; ``offered`` is the nearest value on the grid."""

    def __init__(self, fault: Fault, *, offered: str) -> None:
        super().__init__(fault)
        self.offered = offered


class UnitRefused(InputRefused):
    """A unit is unknown, or two units measure different things."""


class SignInRefused(RegistryError):
    """The address and password do not belong together, or too many tries were made."""


class NotAllowed(RegistryError):
    """The person's role does not cover what was asked."""


class NotFound(RegistryError):
    """The thing asked for does not exist, or the person may not know that it does."""


class NotNow(RegistryError):
    """What was asked does not fit the status the study is in."""


class AlreadyThere(RegistryError):
    """Something with the same name or key, but with other content, is already recorded."""


class RecordDamaged(RegistryError):
    """A tally or an event does not agree with the record it was made from."""


class DatabaseNotReady(RegistryError):
    """The database cannot be reached, or its tables are not those of this version."""


class SettingMissing(RegistryError):
    """A setting that the command needs is absent or unusable."""
