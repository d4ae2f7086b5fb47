"""The page to log trials on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.study_card import FactorLine, StudyCard
from registry.services.trial_pages import LogSheet
from web.forms import Choice, Faults
from web.log.forms import SkipForm, TrialForm
from web.pages import Page


@dataclass(frozen=True)
class LogPage(Page):
    """Say what to run now, and what came out."""

    template: ClassVar[str] = "log/sheet.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    sheet: LogSheet = field(metadata={"help": "combinations with their counts, and the last few trials"})
    factors: tuple[FactorLine, ...] = field(metadata={"help": "the factors to choose a level of, the block first"})
    levels: Mapping[str, tuple[Choice, ...]] = field(metadata={"help": "levels to choose from, by factor"})
    form: TrialForm = field(metadata={"help": "what was typed so far"})
    fewest: int = field(metadata={"help": "the smallest count of any combination"})
    uneven: bool = field(metadata={"help": "whether some combination was run more often than another"})
    yes_no: tuple[Choice, ...] = field(metadata={"help": "what a yes / no response can read"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})
    skip: SkipForm = field(metadata={"help": "why the next run is left out, as typed so far"})
    skip_faults: Faults = field(metadata={"help": "why skipping was not accepted, if it was sent"})
