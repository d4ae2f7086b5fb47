"""Forms: what was typed, and the faults beside the fields."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from flask import Flask

from registry.errors import Fault, RegistryError


@dataclass(frozen=True)
class Choice:
    """One entry of a select or of a row of choices: the code that is sent, and the words people read."""

    code: str
    words: str


@dataclass(frozen=True)
class ChoiceGroup:
    """Entries of a select under one heading."""

    words: str
    choices: tuple[Choice, ...]


@dataclass(frozen=True)
class Faults:
    """What was wrong with a form, to be shown on top and beside each field."""

    every: tuple[Fault, ...] = ()

    @classmethod
    def of(cls, error: RegistryError) -> Faults:
        """Take the faults of a refusal."""
        return cls(error.faults)

    def beside(self, field: str) -> tuple[str, ...]:
        """Give what to say beside one field."""
        return tuple(f"{fault.given}: {fault.accepted}" for fault in self.every if fault.field == field)

    def __bool__(self) -> bool:
        return bool(self.every)

    def __iter__(self) -> Iterator[Fault]:
        return iter(self.every)


NO_FAULTS = Faults()


def install(app: Flask) -> None:
    """Give templates the filter ``field_id``."""
    app.add_template_filter(field_id)


def field_id(name: str) -> str:
    """Make the id of a field from its name: an id may hold no space, and names may hold what people typed."""
    return "f-" + re.sub(r"[^A-Za-z0-9-]", lambda match: f"_{ord(match.group()):x}_", name)


def lines_of(text: str) -> tuple[str, ...]:
    """Read a text area of one entry a line; blank lines count for nothing."""
    return tuple(line.strip() for line in text.splitlines() if line.strip())


def choices(pairs: Iterable[tuple[str, str]]) -> tuple[Choice, ...]:
    """Make choices of code and words."""
    return tuple(Choice(code, words) for code, words in pairs)
