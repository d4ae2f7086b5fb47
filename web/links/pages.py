"""Pages of reader links, for those who make them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from registry.services.reader_links import Proposal, SeriesLinks
from web.forms import Choice, Faults
from web.links.forms import LinkForm
from web.pages import Page


@dataclass(frozen=True)
class LinksPage(Page):
    """Who can see what without an account."""

    template: ClassVar[str] = "links/every.html"

    found: SeriesLinks = field(metadata={"help": "the links of the series"})


@dataclass(frozen=True)
class NewLinkPage(Page):
    """Where a reader link is made."""

    template: ClassVar[str] = "links/new.html"

    proposal: Proposal = field(metadata={"help": "what the link would show"})
    form: LinkForm = field(metadata={"help": "what was typed so far"})
    kinds: tuple[Choice, ...] = field(metadata={"help": "fixed or live"})
    faults: Faults = field(metadata={"help": "why it was not accepted, if it was sent"})


@dataclass(frozen=True)
class MadeLinkPage(Page):
    """Where a new link's address is shown, once."""

    template: ClassVar[str] = "links/made.html"

    proposal: Proposal = field(metadata={"help": "what the link shows"})
    address: str = field(metadata={"help": "the address to hand on, shown once"})
