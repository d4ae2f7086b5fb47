"""Keys in addresses: whole numbers that a database can hold."""

from __future__ import annotations

from flask import Flask
from werkzeug.routing import IntegerConverter, Map

MOST = 2**63 - 1


class KeyConverter(IntegerConverter):
    """A key of the record; a number that no database column holds stands for nothing that exists."""

    regex = "[0-9]+"

    def __init__(self, url_map: Map) -> None:
        super().__init__(url_map, min=1, max=MOST)


def install(app: Flask) -> None:
    """Let rules say ``<key:study_id>``."""
    app.url_map.converters["key"] = KeyConverter
