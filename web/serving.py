"""Serving pages with waitress until somebody says stop."""

from __future__ import annotations

import signal
import socket
from collections.abc import Callable
from types import FrameType

from waitress.server import create_server

from registry.errors import Fault, InputRefused
from registry.services.opening import Database
from registry.services.settings import Settings
from web.app import create_app

THREADS = 8


def cannot_listen(host: str, port: int, error: OSError) -> InputRefused:
    """Make the refusal of an address that cannot be listened on."""
    reason = (error.strerror or str(error)).lower()
    return InputRefused(Fault(f"address {host}, port {port}", reason, "choose another address or port", "port"))


def try_address(host: str, port: int) -> None:
    """Refuse an address that cannot be listened on, before any work is done for it."""
    try:
        for family, kind, _, _, place in socket.getaddrinfo(
            host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE
        ):
            with socket.socket(family, kind) as probe:
                probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
                probe.bind(place)
    except OSError as error:
        raise cannot_listen(host, port, error) from error


def serve(database: Database, settings: Settings, *, ready: Callable[[str], None]) -> None:
    """Serve until SIGINT or SIGTERM; calls ``ready`` with the address once requests are answered."""
    try:
        server = create_server(create_app(database, settings), host=settings.host, port=settings.port, threads=THREADS)
    except OSError as error:
        raise cannot_listen(settings.host, settings.port, error) from error
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
