"""What a reader of CSV stumbled over, in plain words."""

from __future__ import annotations

import csv


def csv_trouble(error: csv.Error) -> str:
    """Say it without the library's own limits."""
    text = str(error)
    return "a single value is longer than any real one" if "field limit" in text else text
