"""Pages of series and studies: home, a new series, a new study."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.series_pages import KnownFactor, KnownResponse, SeriesLine, StudyLine
from web.forms import Choice, ChoiceGroup, Faults
from web.pages import Page
from web.studies.forms import NewSeriesForm, NewStudyForm


@dataclass(frozen=True)
class HomePage(Page):
    """What is running, what is new, what needs me."""

    template: ClassVar[str] = "studies/home.html"

    series: tuple[SeriesLine, ...] = field(metadata={"help": "every series the person may see, its studies in time"})
    may_start_series: bool = field(metadata={"help": "whether the person may start a series"})
    running: int = field(metadata={"help": "how many studies are running in all series"})


@dataclass(frozen=True)
class NewSeriesPage(Page):
    """Where a keeper of the registry starts a series."""

    template: ClassVar[str] = "studies/new_series.html"

    form: NewSeriesForm = field(metadata={"help": "what was typed so far"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class NewStudyPage(Page):
    """Where an analyst says what the next study of a series crosses and reads."""

    template: ClassVar[str] = "studies/new_study.html"

    series_id: int = field(metadata={"help": "the series the study will belong to"})
    series_name: str = field(metadata={"help": "its name"})
    earlier: tuple[StudyLine, ...] = field(metadata={"help": "studies to fill the form in from, newest first"})
    known_factors: tuple[KnownFactor, ...] = field(metadata={"help": "factors the series knows, with their levels"})
    known_responses: tuple[KnownResponse, ...] = field(metadata={"help": "responses the series knows"})
    sites: tuple[str, ...] = field(metadata={"help": "sites of the series, last used first"})
    zones: tuple[ChoiceGroup, ...] = field(metadata={"help": "time zones to choose from, by region"})
    units: tuple[ChoiceGroup, ...] = field(metadata={"help": "units to choose from, by what they measure"})
    factor_roles: tuple[Choice, ...] = field(metadata={"help": "what a factor can be in a study"})
    wanted: tuple[Choice, ...] = field(metadata={"help": "which way a response is wanted"})
    kinds: tuple[Choice, ...] = field(metadata={"help": "what a reading of a response is"})
    parts: tuple[Choice, ...] = field(metadata={"help": "what a response is for"})
    form: NewStudyForm = field(metadata={"help": "what was typed so far"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})
    focus: str = field(metadata={"help": "the field that takes the focus, or nothing"})
