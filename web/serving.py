"""Serving pages with waitress until somebody says stop."""

from __future__ import annotations

import signal
from collections.abc import Callable
from types import FrameType

from waitress.server import create_server

from registry.services.opening import Database
from registry.services.settings import Settings
from web.app import create_app

THREADS = 8


def serve(database: Database, settings: Settings, *, ready: Callable[[str], None]) -> None:
    """Serve until SIGINT or SIGTERM; calls ``ready`` with the address once requests are answered."""
    server = create_server(create_app(database, settings), host=settings.host, port=settings.port, threads=THREADS)
    port = int(server.effective_port)
    host = f"[{settings.host}]" if ":" in settings.host else settings.host

    def stop(_number: int, _frame: FrameType | None) -> None:
        raise SystemExit(0)

    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, stop)
    ready(f"http://{host}:{port}/")
    try:
        server.run()
    finally:
        server.close()
