"""An address that cannot be listened on is refused before any work is done for it."""

from __future__ import annotations

import socket

import pytest

from registry.errors import InputRefused
from web.serving import try_address


def test_a_port_in_use_is_refused_by_its_number() -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]

        with pytest.raises(InputRefused, match=f"address 127.0.0.1, port {port}: .*; choose another address or port"):
            try_address("127.0.0.1", port)


def test_an_address_that_is_none_is_refused() -> None:
    with pytest.raises(InputRefused, match="address 999.1.1.1, port 0: .*; choose another address or port"):
        try_address("999.1.1.1", 0)


def test_a_free_port_is_taken() -> None:
    try_address("127.0.0.1", 0)
