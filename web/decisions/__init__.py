"""Decisions on a study: what was decided, and whether it held."""

from web.decisions.views import blueprint

__all__ = ["blueprint"]
