"""Marks on views: reachable without a sign-in, or taking larger requests than usual."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

View = TypeVar("View", bound=Callable[..., Any])


def public(view: View) -> View:
    """Mark a view that anybody may reach without signing in."""
    view.is_public = True  # type: ignore[attr-defined]
    return view


def is_public(view: Callable[..., Any]) -> bool:
    """Whether anybody may reach a view."""
    return getattr(view, "is_public", False) is True


def takes_up_to(size: int) -> Callable[[View], View]:
    """Mark a view that takes larger requests than usual, such as an upload; ``size`` in bytes."""

    def mark(view: View) -> View:
        view.largest_body = size  # type: ignore[attr-defined]
        return view

    return mark


def largest_body(view: Callable[..., Any] | None) -> int | None:
    """Say how large a request a view takes, when it says so itself."""
    found = getattr(view, "largest_body", None)
    return found if isinstance(found, int) else None
