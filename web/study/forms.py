"""Forms about one study, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from registry.services.study_card import StudyCard
from registry.services.study_plan import PlanDraft


@dataclass(frozen=True)
class PlanForm:
    """A plan as typed; margins by the name of their response."""

    per_cell: str
    spread: str
    looks: str
    margins: Mapping[str, str]

    @classmethod
    def first(cls, card: StudyCard) -> PlanForm:
        """Start with what the study was made with."""
        return cls("", "", "closed", {line.name: line.margin or "" for line in card.responses})

    @classmethod
    def read(cls, sent: Mapping[str, str], card: StudyCard) -> PlanForm:
        """Read the form as it was typed."""
        margins = {line.name: sent.get(f"margins-{line.name}", "") for line in card.responses}
        return cls(sent.get("per_cell", ""), sent.get("spread", ""), sent.get("looks", ""), margins)

    def draft(self) -> PlanDraft:
        """Hand the form on."""
        return PlanDraft(self.per_cell, self.spread, self.looks, self.margins)


@dataclass(frozen=True)
class EndForm:
    """How a study is to end, as typed; ``reason`` may also be withdraw."""

    reason: str
    note: str

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> EndForm:
        """Read the form as it was typed."""
        return cls(sent.get("reason", ""), sent.get("note", ""))


@dataclass(frozen=True)
class StepForm:
    """A finer step, as typed."""

    response: str
    step: str
    reason: str

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> StepForm:
        """Read the form as it was typed."""
        return cls(sent.get("response", ""), sent.get("step", ""), sent.get("reason", ""))
