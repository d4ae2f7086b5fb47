"""Pages across studies: one study beside another, and the recurrence board of a series."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.comparison import Comparison
from registry.services.recurrence_board import RecurrenceBoard
from registry.services.study_card import StudyCard
from web.forms import Choice, Faults
from web.pages import Page
from web.strips import StripChart


@dataclass(frozen=True)
class ComparePage(Page):
    """What changed since last time."""

    template: ClassVar[str] = "across/compare.html"

    card: StudyCard = field(metadata={"help": "the head of the study the reader came from"})
    comparison: Comparison = field(metadata={"help": "both studies on common ground, sentences first"})
    figure: StripChart | None = field(metadata={"help": "both studies and the change on one scale"})
    beside: str = field(metadata={"help": "the study it is set beside, as the choice below calls it"})
    studies: tuple[Choice, ...] = field(metadata={"help": "studies it can be set beside"})
    responses: tuple[Choice, ...] = field(metadata={"help": "responses to compare"})
    no_faults: Faults = field(metadata={"help": "the choices above cannot be wrong"})


@dataclass(frozen=True)
class BoardPage(Page):
    """Which interactions are seen again."""

    template: ClassVar[str] = "across/board.html"

    board: RecurrenceBoard = field(metadata={"help": "every interaction of the series with its verdict"})
    figure: StripChart | None = field(metadata={"help": "one mark a study on a shared scale"})
    responses: tuple[Choice, ...] = field(metadata={"help": "responses to look at"})
    no_faults: Faults = field(metadata={"help": "the choices above cannot be wrong"})
