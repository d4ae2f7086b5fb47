"""Pages of the trials of a study."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.study_card import StudyCard
from registry.services.trial_pages import TrialDetail, TrialList
from web.forms import Choice, Faults
from web.pages import Page
from web.trials.forms import CorrectForm, KeepForm


@dataclass(frozen=True)
class TrialsPage(Page):
    """Say what was logged."""

    template: ClassVar[str] = "trials/every.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    listed: TrialList = field(metadata={"help": "one page of trials, the newest first"})


@dataclass(frozen=True)
class TrialPage(Page):
    """One trial, what happened to it, and the forms that put it right."""

    template: ClassVar[str] = "trials/one.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    detail: TrialDetail = field(metadata={"help": "the trial with its history"})
    correct: CorrectForm = field(metadata={"help": "a correction as typed so far"})
    keep: KeepForm = field(metadata={"help": "what to set aside or restore, as typed so far"})
    responses: tuple[Choice, ...] = field(metadata={"help": "responses to choose from, each with its reading"})
    aside: tuple[Choice, ...] = field(metadata={"help": "what can be set aside"})
    back: tuple[Choice, ...] = field(metadata={"help": "what can be restored"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})
    no_faults: Faults = field(metadata={"help": "for the forms that were not sent"})
