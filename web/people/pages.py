"""Pages about people: signing in."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import ClassVar

from web.forms import Faults
from web.pages import Page


@dataclass(frozen=True)
class SignInPage(Page):
    """Where somebody signs in."""

    template: ClassVar[str] = "people/sign_in.html"

    address: str = field(metadata={"help": "the e-mail address as it was typed"})
    next_path: str = field(metadata={"help": "the page of ours to show after signing in"})
    faults: Faults = field(metadata={"help": "why the last try was refused, if it was"})
    anybody_there: bool = field(metadata={"help": "whether the registry has any account yet"})
