"""What factors and levels are called, by the identities that outlast their names."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class LevelName:
    """What a level is called, has been called, and was before its meaning changed."""

    name: str
    aliases: tuple[str, ...]
    replaces: int | None


@dataclass(frozen=True)
class Names:
    """The names of everything that goes by an identity in one series."""

    factors: dict[Any, str]
    levels: dict[Any, LevelName]

    def factor(self, identity: Any) -> str:
        """Name a factor."""
        return self.factors[identity]

    def level(self, identity: Any) -> str:
        """Name a level."""
        return self.levels[identity].name

    def several(self, identities: Sequence[Any]) -> str:
        """Name some levels in a row: 4, 8 and 12."""
        *most, last = [self.level(identity) for identity in identities]
        return f"{', '.join(most)} and {last}" if most else last
