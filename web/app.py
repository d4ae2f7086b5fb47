"""The application: shell, security and page families put together."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

from flask import Flask
from jinja2 import StrictUndefined
from werkzeug.middleware.proxy_fix import ProxyFix

from registry.services.opening import Database
from registry.services.settings import Settings
from web import (
    across,
    addresses,
    assets,
    decisions,
    figures,
    forms,
    imports,
    levels,
    links,
    log,
    numbers,
    pages,
    people,
    quantities,
    reader,
    refusals,
    studies,
    study,
    times,
    trials,
    upkeep,
)
from web.security import setup as security
from web.shell import Shell

PAGE_FAMILIES = (
    upkeep.blueprint,
    people.blueprint,
    studies.blueprint,
    study.blueprint,
    across.blueprint,
    levels.blueprint,
    links.blueprint,
    decisions.blueprint,
    reader.blueprint,
    trials.blueprint,
    log.blueprint,
    imports.blueprint,
)


def utc_now() -> datetime:
    """Say what time it is."""
    return datetime.now(UTC)


def create_app(database: Database, settings: Settings, *, clock: Callable[[], datetime] = utc_now) -> Flask:
    """Put the application together on an open database; ``clock`` says what time it is."""
    app = Flask("web", root_path=str(Path(__file__).parent))
    app.secret_key = settings.secret
    app.json.sort_keys = False  # type: ignore[attr-defined] # Factors and levels keep their order in a record.
    app.jinja_env.undefined = StrictUndefined
    app.jinja_env.trim_blocks = app.jinja_env.lstrip_blocks = True
    app.extensions["weftbook"] = Shell(database, settings, clock)
    if settings.proxies:
        # The host a proxy names is not taken over: no page builds an address from it.
        proxied = ProxyFix(app.wsgi_app, x_for=settings.proxies, x_proto=settings.proxies, x_host=0)
        app.wsgi_app = proxied  # type: ignore[method-assign]
    for part in (addresses, assets, figures, forms, numbers, pages, quantities, times):
        part.install(app)
    for make_blueprint in PAGE_FAMILIES:
        app.register_blueprint(make_blueprint())
    security.install(app)
    refusals.install(app)
    return app
