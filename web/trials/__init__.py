"""The trials of a study, and putting them right."""

from web.trials.views import blueprint

__all__ = ["blueprint"]
