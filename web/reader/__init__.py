"""Pages for readers without an account."""

from web.reader.views import blueprint

__all__ = ["blueprint"]
