"""Logging a trial at the work place."""

from web.log.views import blueprint

__all__ = ["blueprint"]
