"""Studies: every series as a row of studies in time, and starting new ones."""

from web.studies.views import blueprint

__all__ = ["blueprint"]
