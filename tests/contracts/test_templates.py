"""A template uses the fields of its page, all of them, and nothing else."""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Iterator
from pathlib import Path

import pytest
from flask import Flask
from jinja2 import Environment, meta, nodes

import web
from registry.services.opening import Database
from tests.support.visitors import an_app
from web.pages import SHELL_NAMES, Page

# What every template may call besides its page's fields: addresses, the mark of our forms, and our own globals.
GLOBALS = {"asset", "chart_script_address", "chart_style_ids", "csrf_token", "loop", "range", "url_for"}
FOLDER = Path(web.__file__).parent


@pytest.fixture
def app(sqlite: Database) -> Flask:
    """Give the application, whose making loads every page family."""
    return an_app(sqlite)


def pages_below(parent: type[Page] = Page) -> Iterator[type[Page]]:
    for child in parent.__subclasses__():
        if child.__module__.startswith("web."):
            yield child
            yield from pages_below(child)


def names_made(template: nodes.Template) -> Iterator[str]:
    """Give the names a template makes itself; a static look takes those made in a branch for missing."""
    for whole in template.find_all(nodes.Import):
        yield whole.target
    for some in template.find_all(nodes.FromImport):
        yield from (name[1] if isinstance(name, tuple) else name for name in some.names)
    for macro in template.find_all(nodes.Macro):
        yield macro.name
    for made in template.find_all(nodes.Assign):
        yield from (name.name for name in made.find_all(nodes.Name) if name.ctx == "store")


def names_used(environment: Environment, template: str) -> set[str]:
    """Give the names that a template takes from its surroundings, those of what it extends and includes as well."""
    assert environment.loader is not None
    source, _, _ = environment.loader.get_source(environment, template)
    parsed = environment.parse(source)
    used = meta.find_undeclared_variables(parsed) - set(names_made(parsed))
    for other in meta.find_referenced_templates(parsed):
        assert other is not None, f"{template} names another template by a variable"
        if not other.startswith("macros/"):
            used |= names_used(environment, other)
    return used


def test_every_page_is_shown_with_its_fields_and_nothing_else(app: Flask) -> None:
    for page in pages_below():
        fields = {field.name for field in dataclasses.fields(page)}
        used = names_used(app.jinja_env, page.template) - GLOBALS - SHELL_NAMES
        assert used == fields, f"{page.__name__} and {page.template} differ in {used ^ fields}"


def test_every_page_and_every_field_says_what_it_is_for(app: Flask) -> None:
    assert app
    for page in pages_below():
        assert page.__doc__
        assert not page.__doc__.startswith(f"{page.__name__}("), f"{page.__name__} has no words of its own"
        for field in dataclasses.fields(page):
            assert field.metadata.get("help"), f"{page.__name__}.{field.name} has no help text"


def test_every_template_belongs_to_one_page(app: Flask) -> None:
    shown = [page.template for page in pages_below()]
    own = {
        str(path.relative_to(path.parents[1] if path.parent.name != "templates" else path.parent))
        for path in FOLDER.rglob("templates/**/*.html")
    }
    pieces = {name for name in own if name.startswith("macros/") or name == "base.html" or "/_" in name}

    assert app
    assert sorted(shown) == sorted(own - pieces)


def test_macros_take_nothing_from_the_page_that_uses_them(app: Flask) -> None:
    for path in (FOLDER / "templates" / "macros").glob("*.html"):
        assert names_used(app.jinja_env, f"macros/{path.name}") <= GLOBALS, path.name


def test_no_template_turns_escaping_off() -> None:
    for path in FOLDER.rglob("*.html"):
        text = path.read_text(encoding="utf-8")
        assert "|safe" not in text.replace(" ", ""), path.name
        assert "autoescape" not in text, path.name


def test_no_template_holds_a_script_or_a_style_of_its_own() -> None:
    # The content security policy refuses both; only data blocks stand in a page.
    for path in FOLDER.rglob("*.html"):
        text = path.read_text(encoding="utf-8")
        assert "<style" not in text, path.name
        assert " style=" not in text, path.name
        assert not re.search(r"\son[a-z]+=", text), path.name
        for piece in text.split("<script")[1:]:
            tag = piece.partition(">")[0]
            assert " src=" in tag or 'type="application/json"' in tag, path.name
