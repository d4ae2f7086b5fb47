"""Factors and their levels, by name and in order."""

from __future__ import annotations

from dataclasses import dataclass

from registry.errors import Fault, InputRefused


@dataclass(frozen=True)
class Factor:
    """Something set for each trial to one of its levels."""

    name: str
    levels: tuple[str, ...]

    def __post_init__(self) -> None:
        """Refuse a factor without levels, or with one named twice."""
        twice = sorted({level for level in self.levels if self.levels.count(level) > 1})
        if not self.levels or twice:
            given = f"level {twice[0]!r} stands twice" if twice else "no level given"
            raise InputRefused(Fault(f"factor {self.name}", given, "give each level once", "levels"))
