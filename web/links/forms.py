"""The form of a new reader link, as typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from registry.services.reader_links import LinkDraft


@dataclass(frozen=True)
class LinkForm:
    """What a link shows, and how, as typed or as the page before asked for it."""

    scope: str
    study: str
    beside: str
    response: str
    kind: str
    days: str

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> LinkForm:
        """Read the form as it was typed, or the address that opens it."""
        return cls(
            sent.get("scope", ""),
            sent.get("study", ""),
            sent.get("beside", ""),
            sent.get("response", ""),
            sent.get("kind", "fixed"),
            sent.get("days", "90"),
        )

    def draft(self) -> LinkDraft:
        """Hand the form on; what is no key finds no study."""
        return LinkDraft(
            self.scope, _key(self.study) or 0, _key(self.beside), self.response or None, self.kind, self.days
        )


def _key(text: str) -> int | None:
    return int(text) if text.isascii() and text.isdigit() and len(text) < 10 else None
