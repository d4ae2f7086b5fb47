"""Names and texts that people type, checked before they are kept."""

from __future__ import annotations

import unicodedata
from decimal import Decimal

from registry.errors import Fault, ReadingRefused
from registry.trials.readings import Step

LONGEST_NAME = 200
LONGEST_TEXT = 4000
_TURNS = frozenset({"LRE", "RLE", "LRO", "RLO", "PDF", "LRI", "RLI", "FSI", "PDI"})


def checked_name(text: str, *, where: str, field: str, faults: list[Fault]) -> str:
    """Take a name as typed, blanks around it aside; adds a fault when it is empty, too long, or unprintable."""
    name = text.strip()
    if not name:
        faults.append(Fault(where, "nothing given", f"give a name of 1 to {LONGEST_NAME} characters", field))
    elif len(name) > LONGEST_NAME:
        faults.append(Fault(where, f"{len(name)} characters given", f"give at most {LONGEST_NAME}", field))
    elif _has_control(name, allowed=""):
        faults.append(Fault(where, f"{name!r} holds a control character", "give plain text on one line", field))
    return name


def checked_text(text: str, *, where: str, field: str, faults: list[Fault], needed: bool = False) -> str:
    """Take a longer text as typed; adds a fault when it is too long, unprintable, or empty though needed."""
    body = text.strip().replace("\r\n", "\n")
    if needed and not body:
        faults.append(Fault(where, "nothing given", "say it in a few words", field))
    elif len(body) > LONGEST_TEXT:
        faults.append(Fault(where, f"{len(body)} characters given", f"give at most {LONGEST_TEXT}", field))
    elif _has_control(body, allowed="\n\t"):
        faults.append(Fault(where, "it holds a control character", "give plain text", field))
    return body


def _has_control(text: str, *, allowed: str) -> bool:
    # Cc are control characters, Cs halves of a broken character; neither can be shown or sent back. What turns the
    # direction of writing would make a name read as another one.
    return any(
        unicodedata.category(character) in ("Cc", "Cs") or unicodedata.bidirectional(character) in _TURNS
        for character in text
        if character not in allowed
    )


def checked_margin(text: str, *, where: str, field: str, faults: list[Fault]) -> str | None:
    """Take a margin that matters: a number above 0, or nothing."""
    if not text.strip():
        return None
    try:
        # A margin is read as strictly as a step is: both are exact numbers above 0.
        margin = Step.parse(text).size
    except ReadingRefused as error:
        faults.append(
            Fault(where, error.faults[0].given, "give a number above 0, for example 0.8, or leave it empty", field)
        )
        return None
    return f"{Decimal(margin):f}"
