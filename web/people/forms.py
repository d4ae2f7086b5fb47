"""The sign-in form as it was typed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from web.security.gate import own_path


@dataclass(frozen=True)
class SignInForm:
    """Address and password as typed, and where to go then."""

    address: str
    password: str
    next_path: str

    @classmethod
    def read(cls, sent: Mapping[str, str]) -> SignInForm:
        """Read the form that was sent."""
        return cls(sent.get("address", ""), sent.get("password", ""), own_path(sent.get("next")))
