"""Running the demo: a fresh registry, filled, served until somebody says stop."""

from __future__ import annotations

import secrets
import sys
import tempfile
import webbrowser
from collections.abc import Callable
from contextlib import ExitStack
from datetime import datetime
from importlib.metadata import version
from pathlib import Path
from typing import Protocol

from registry.errors import AlreadyThere, Fault, InputRefused
from registry.services.opening import Database, open_registry
from registry.services.settings import PasswordCost, Settings
from registry.services.upkeep import upgrade
from seed_demo.building import build_demo


class Serve(Protocol):
    """What serves a registry; the command hands it over, so that the demo itself asks services only."""

    def __call__(self, database: Database, settings: Settings, *, ready: Callable[[str], None]) -> None:
        """Serve until stopped; call ``ready`` with the address."""


def run_demo(
    serve: Serve,
    *,
    host: str,
    port: int,
    browser: bool,
    folder: Path | None,
    now: datetime,
    say: Callable[[str], None],
) -> int:
    """Make a fresh registry, load the demo, tell where it is and how to sign in, serve until stopped."""
    with ExitStack() as stack:
        place = folder or Path(stack.enter_context(tempfile.TemporaryDirectory(prefix="weftbook-demo-")))
        file = _fresh_file(place)
        database = open_registry(f"sqlite:///{file}")
        stack.callback(database.dispose)
        upgrade(database)
        # The password is made anew each time: the demo may listen where others can reach it.
        password = "-".join(secrets.token_hex(3) for _ in range(3))
        people = build_demo(database, now=now, password=password, hashing=PasswordCost())
        settings = Settings(
            database_url="",
            secret=secrets.token_urlsafe(32),
            host=host,
            port=port,
            secure_cookies=False,
            demo=True,
            build=version("weftbook"),
        )

        def ready(address: str) -> None:
            say(f"Weftbook demo: {address}\nSign in as {people.keeper.address} with the password {password}")
            say(f"(also as {people.analyst.address} or {people.logger.address}, with the same). Stop it with Ctrl-C.")
            sys.stdout.flush()
            if browser:
                webbrowser.open(address)

        serve(database, settings, ready=ready)
    return 0


def _fresh_file(place: Path) -> Path:
    try:
        place.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise InputRefused(Fault("--at", f"{place}: {reason}", "give a folder that can be made or written")) from error
    file = place / "weftbook.db"
    if file.exists():
        raise AlreadyThere(Fault("--at", f"{file} is there already", "give another folder, or remove it"))
    return file
