"""Whether the registry can serve, for whoever watches it."""

from web.upkeep.views import blueprint

__all__ = ["blueprint"]
