"""One study: its report, its plan, its history."""

from web.study.views import blueprint

__all__ = ["blueprint"]
