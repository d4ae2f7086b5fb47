"""Pages of an import: the file, and what it would bring."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.study_card import StudyCard
from registry.services.trial_import import Preview
from web.forms import Choice, Faults
from web.pages import Page


@dataclass(frozen=True)
class UploadPage(Page):
    """Where a file is given."""

    template: ClassVar[str] = "imports/upload.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    heads: str = field(metadata={"help": "heads that a file for this study could have, as an example"})
    faults: Faults = field(metadata={"help": "why the last file was not accepted"})


@dataclass(frozen=True)
class PreviewPage(Page):
    """What a file would bring, before anything is written."""

    template: ClassVar[str] = "imports/preview.html"

    card: StudyCard = field(metadata={"help": "the head of the study"})
    preview: Preview = field(metadata={"help": "columns, choices, faults and offers"})
    options: tuple[Choice, ...] = field(metadata={"help": "what a column may mean"})
    chosen: tuple[str, ...] = field(metadata={"help": "the choice made for each column"})
    round_offered: bool = field(metadata={"help": "whether rounding was agreed to"})
    again: bool = field(metadata={"help": "whether taking the same file in again was agreed to"})
    faults: Faults = field(metadata={"help": "why the file was not taken in"})
