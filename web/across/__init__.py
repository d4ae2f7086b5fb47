"""Studies side by side: what changed, and which interactions are seen again."""

from web.across.views import blueprint

__all__ = ["blueprint"]
