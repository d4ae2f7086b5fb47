"""Pages as frozen dataclasses: what a template shows is what the page's fields say."""

from __future__ import annotations

import dataclasses
from typing import Any, ClassVar

from flask import Flask, Response, g, get_flashed_messages, make_response, render_template

from registry.services.people import Person
from web import shell


@dataclasses.dataclass(frozen=True)
class Page:
    """One kind of page; each names its template, and each field says what it is for (metadata ``help``).

    A template may use the page's fields, the shell's names (``SHELL_NAMES``) and nothing else.
    """

    template: ClassVar[str]


@dataclasses.dataclass(frozen=True)
class Surroundings:
    """What the base template shows around a page."""

    person: Person | None
    build: str
    demo: bool

    def messages(self) -> list[str]:
        """Give what the page before wants said, once; such a page is never answered from a cache."""
        told = [str(message) for message in get_flashed_messages()]
        g.told_something = bool(told)
        return told


SHELL_NAMES = frozenset({"shell"})


def install(app: Flask) -> None:
    """Give every template the shell's names."""
    app.context_processor(_shell_names)


def _shell_names() -> dict[str, Any]:
    used = shell.settings()
    return {"shell": Surroundings(shell.visitor(), used.build, used.demo)}


def render_page(page: Page, *, status: int = 200) -> Response:
    """Render a page with its own template."""
    fields = {field.name: getattr(page, field.name) for field in dataclasses.fields(page)}
    return make_response(render_template(page.template, **fields), status)
