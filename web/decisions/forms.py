"""Forms about decisions, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from registry.services.decisions import DecisionDraft


@dataclass(frozen=True)
class DecisionForm:
    """A decision as typed."""

    what: str = ""
    from_day: str = ""
    expected_saving: str = ""
    saving_unit: str = ""
    review_day: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> DecisionForm:
        """Read the form as it was typed."""
        names = ("what", "from_day", "expected_saving", "saving_unit", "review_day")
        return cls(*(sent.get(name, "") for name in names))

    def draft(self) -> DecisionDraft:
        """Hand the form on."""
        return DecisionDraft(self.what, self.from_day, self.expected_saving, self.saving_unit, self.review_day)


@dataclass(frozen=True)
class HeldForm:
    """Whether a decision held, as typed; ``number`` says which one the form was about."""

    number: int = 0
    held: str = ""
    note: str = ""

    @classmethod
    def read(cls, number: int, sent: Mapping[str, str]) -> HeldForm:
        """Read the form as it was typed."""
        return cls(number, sent.get("held", ""), sent.get("note", ""))
