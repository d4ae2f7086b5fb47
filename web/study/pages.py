"""Pages about one study: its report, its plan, its end, its history."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.history import HistoryPage
from registry.services.plan_outlook import PlanOutlook
from registry.services.study_card import StudyCard
from registry.services.study_report import StudyReport
from registry.services.trial_pages import TrialShown
from web.figures import Figure
from web.forms import Choice, Faults
from web.pages import Page
from web.study.forms import EndForm, PlanForm, StepForm


@dataclass(frozen=True)
class ReportPage(Page):
    """Say what a study found."""

    template: ClassVar[str] = "study/report.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    report: StudyReport = field(metadata={"help": "sentences first, then what is behind them"})
    build_figure: Figure | None = field(metadata={"help": "each cell built from the grand mean, to scale"})
    lines_figure: Figure | None = field(metadata={"help": "cell means as lines"})
    recent: tuple[TrialShown, ...] = field(metadata={"help": "the last few trials"})
    response_choices: tuple[Choice, ...] = field(metadata={"help": "responses to show"})
    factor_choices: tuple[Choice, ...] = field(metadata={"help": "factors to cross in the build-up table"})
    no_faults: Faults = field(metadata={"help": "the choices above cannot be wrong"})


@dataclass(frozen=True)
class PlanPage(Page):
    """Say what is promised before the first trial."""

    template: ClassVar[str] = "study/plan.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    form: PlanForm = field(metadata={"help": "what was typed so far"})
    spreads: tuple[Choice, ...] = field(metadata={"help": "how the spread may be taken"})
    looks: tuple[Choice, ...] = field(metadata={"help": "how looks may be taken"})
    outlook: PlanOutlook = field(metadata={"help": "earlier studies of the same factors, and what sizes would show"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class EndPage(Page):
    """Where a study is closed or withdrawn."""

    template: ClassVar[str] = "study/end.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    form: EndForm = field(metadata={"help": "what was typed so far"})
    reasons: tuple[Choice, ...] = field(metadata={"help": "how a study can end"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class StepPage(Page):
    """Where a response is given a finer step."""

    template: ClassVar[str] = "study/step.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    form: StepForm = field(metadata={"help": "what was typed so far"})
    responses: tuple[Choice, ...] = field(metadata={"help": "responses to choose from, each with its present step"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class EventsPage(Page):
    """Say who changed what, and when."""

    template: ClassVar[str] = "study/history.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    history: HistoryPage = field(metadata={"help": "events in sentences, the newest first"})
