"""Importing a file of trials."""

from web.imports.views import blueprint

__all__ = ["blueprint"]
