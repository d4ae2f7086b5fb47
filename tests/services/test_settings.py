"""Settings are read from the environment, or refused naming the one that is wrong."""

from __future__ import annotations

import pytest

from registry.errors import SettingMissing
from registry.services.opening import open_registry
from registry.services.settings import settings_from

SECRET = {"WEFTBOOK_SECRET": "s" * 32}


def test_what_is_not_set_has_a_default() -> None:
    settings = settings_from(SECRET, build="1")

    assert (settings.host, settings.port, settings.proxies, settings.secure_cookies) == ("127.0.0.1", 8000, 0, True)
    assert settings.database_url.endswith("/weftbook.db")


@pytest.mark.parametrize(
    ("given", "said"),
    [
        ({"WEFTBOOK_SECRET": "short"}, "WEFTBOOK_SECRET: 5 characters given; set it to at least 32 random characters"),
        ({"WEFTBOOK_PORT": "http"}, "WEFTBOOK_PORT: 'http' given; give a whole number from 1 to 65535"),
        ({"WEFTBOOK_PROXIES": "-1"}, "WEFTBOOK_PROXIES: '-1' given; give a whole number from 0 to 10"),
        ({"WEFTBOOK_SECURE_COOKIES": "perhaps"}, "WEFTBOOK_SECURE_COOKIES: 'perhaps' given; give yes or no"),
    ],
)
def test_what_cannot_be_used_is_named(given: dict[str, str], said: str) -> None:
    with pytest.raises(SettingMissing, match=said):
        settings_from(SECRET | given, build="1")


@pytest.mark.parametrize("url", ["mysql://host/name", "no address", ""])
def test_an_address_of_another_database_is_refused_without_showing_it(url: str) -> None:
    with pytest.raises(SettingMissing, match="WEFTBOOK_DATABASE_URL: not an address of a database this registry knows"):
        open_registry(url)
