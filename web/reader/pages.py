"""Pages for readers without an account: a study, or two beside each other."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any, ClassVar

from markupsafe import Markup

from web.pages import Page


@dataclass(frozen=True)
class ReaderStudyPage(Page):
    """One study for somebody without an account, made of its record alone."""

    template: ClassVar[str] = "reader/study.html"

    kind: str = field(metadata={"help": "fixed or live"})
    as_of: datetime = field(metadata={"help": "when the numbers were taken"})
    expires_at: datetime | None = field(metadata={"help": "when the link stops opening, if ever"})
    series: str = field(metadata={"help": "the name of the series"})
    record: Mapping[str, Any] = field(metadata={"help": "the record that the page is made of"})
    drawings: Mapping[str, Markup] = field(metadata={"help": "figures, drawn when the record was made"})
    twin: str = field(metadata={"help": "the address of the page's JSON twin"})


@dataclass(frozen=True)
class ReaderComparisonPage(Page):
    """Two studies beside each other for somebody without an account, made of their record alone."""

    template: ClassVar[str] = "reader/comparison.html"

    kind: str = field(metadata={"help": "fixed or live"})
    as_of: datetime = field(metadata={"help": "when the numbers were taken"})
    expires_at: datetime | None = field(metadata={"help": "when the link stops opening, if ever"})
    series: str = field(metadata={"help": "the name of the series"})
    record: Mapping[str, Any] = field(metadata={"help": "the record that the page is made of"})
    drawings: Mapping[str, Markup] = field(metadata={"help": "figures, drawn when the record was made"})
    twin: str = field(metadata={"help": "the address of the page's JSON twin"})
