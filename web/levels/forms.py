"""Forms about one level, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class RenameForm:
    """A new name and its reason, as typed."""

    name: str = ""
    reason: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> RenameForm:
        """Read the form as it was typed."""
        return cls(sent.get("name", ""), sent.get("reason", ""))


@dataclass(frozen=True)
class MeaningForm:
    """What a level means from now on, and its name from now on, as typed."""

    name: str = ""
    definition: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> MeaningForm:
        """Read the form as it was typed."""
        return cls(sent.get("name", ""), sent.get("definition", ""))
