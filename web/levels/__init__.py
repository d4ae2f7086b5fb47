"""Levels of a series: their names and meanings through time."""

from web.levels.views import blueprint

__all__ = ["blueprint"]
