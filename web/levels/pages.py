"""Pages of the levels of a series."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.levels import LevelLine, SeriesLevels
from web.forms import Faults
from web.levels.forms import MeaningForm, RenameForm
from web.pages import Page


@dataclass(frozen=True)
class LevelsPage(Page):
    """What the levels of a series are called, have been called, and mean."""

    template: ClassVar[str] = "levels/every.html"

    found: SeriesLevels = field(metadata={"help": "factors and their levels"})
    may_change: bool = field(metadata={"help": "whether the person may rename"})


@dataclass(frozen=True)
class RenamePage(Page):
    """Where a level gets another name and stays the same level."""

    template: ClassVar[str] = "levels/rename.html"

    found: SeriesLevels = field(metadata={"help": "the series"})
    factor: str = field(metadata={"help": "the factor's name"})
    level: LevelLine = field(metadata={"help": "the level as it is"})
    form: RenameForm = field(metadata={"help": "what was typed so far"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class MeaningPage(Page):
    """Where a level that means something else from now on becomes another level."""

    template: ClassVar[str] = "levels/meaning.html"

    found: SeriesLevels = field(metadata={"help": "the series"})
    factor: str = field(metadata={"help": "the factor's name"})
    level: LevelLine = field(metadata={"help": "the level as it is"})
    form: MeaningForm = field(metadata={"help": "what was typed so far"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})
