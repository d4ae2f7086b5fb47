"""The page of decisions on a study."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.decisions import DecisionList
from registry.services.study_card import StudyCard
from web.decisions.forms import DecisionForm, HeldForm
from web.forms import Choice, Faults
from web.pages import Page


@dataclass(frozen=True)
class DecisionsPage(Page):
    """What was decided, and whether it held."""

    template: ClassVar[str] = "decisions/every.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    found: DecisionList = field(metadata={"help": "its decisions, the newest first"})
    form: DecisionForm = field(metadata={"help": "a new decision, as typed so far"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})
    held: HeldForm = field(metadata={"help": "whether one held, as typed so far"})
    held_faults: Faults = field(metadata={"help": "why that was not accepted, if it was sent"})
    answers: tuple[Choice, ...] = field(metadata={"help": "how a decision can have held"})
