"""Reader links as their makers see them: made, listed, revoked."""

from web.links.views import blueprint

__all__ = ["blueprint"]
