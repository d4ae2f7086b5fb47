"""Signing in and out."""

from web.people.views import blueprint

__all__ = ["blueprint"]
