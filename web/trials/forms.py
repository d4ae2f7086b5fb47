"""Forms that put a trial right, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class CorrectForm:
    """A correction of one reading, as typed."""

    response: str = ""
    text: str = ""
    reason: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> CorrectForm:
        """Read the form as it was typed."""
        return cls(sent.get("response", ""), sent.get("text", ""), sent.get("reason", ""))


@dataclass(frozen=True)
class KeepForm:
    """What to set aside or restore, as typed: the whole trial, or one reading by its response."""

    turn: str = ""
    what: str = ""
    keep_reason: str = ""

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> KeepForm:
        """Read the form as it was typed."""
        turn = sent.get("turn", "")
        what, reason = ("back", "back_reason") if turn == "restore" else ("what", "keep_reason")
        return cls(turn, sent.get(what, ""), sent.get(reason, ""))

    @property
    def reason_field(self) -> str:
        """The name that the reason has on the page, where each form names its own."""
        return "back_reason" if self.turn == "restore" else "keep_reason"

    @property
    def response(self) -> str | None:
        """The response whose reading is meant, or nothing for the whole trial."""
        return self.what.removeprefix("reading:") if self.what.startswith("reading:") else None
