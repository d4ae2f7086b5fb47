"""Settings, read once from the environment and handed on as arguments."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from registry.errors import Fault, SettingMissing

LEAST_SECRET = 32


@dataclass(frozen=True)
class Setting:
    """One setting of the environment: its name, what it is for, and what holds without it."""

    name: str
    purpose: str
    default: str


SETTINGS: tuple[Setting, ...] = (
    Setting("WEFTBOOK_DATABASE_URL", "address of the database", "sqlite:///weftbook.db in the working folder"),
    Setting("WEFTBOOK_SECRET", f"at least {LEAST_SECRET} random characters that sign forms; `serve` needs it", "none"),
    Setting("WEFTBOOK_HOST", "address to listen on", "127.0.0.1"),
    Setting("WEFTBOOK_PORT", "port to listen on", "8000"),
    Setting("WEFTBOOK_PROXIES", "how many proxies in front are trusted", "0"),
    Setting("WEFTBOOK_SECURE_COOKIES", "yes when people reach it by https, else no", "yes"),
    Setting("WEFTBOOK_SESSION_HOURS", "hours until a sign-in ends", "12"),
)


@dataclass(frozen=True)
class PasswordCost:
    """What one password check costs, by argon2's own measures."""

    time: int = 3
    memory_kib: int = 65_536
    lanes: int = 1


@dataclass(frozen=True)
class Settings:
    """How this process serves the registry."""

    database_url: str
    secret: str
    host: str = "127.0.0.1"
    port: int = 8000
    proxies: int = 0
    secure_cookies: bool = True
    session_hours: int = 12
    hashing: PasswordCost = PasswordCost()
    demo: bool = False
    build: str = "0"


def database_url_from(environ: Mapping[str, str]) -> str:
    """Say where the database is: the setting, or a file in the working folder."""
    return environ.get("WEFTBOOK_DATABASE_URL") or f"sqlite:///{Path.cwd() / 'weftbook.db'}"


def settings_from(environ: Mapping[str, str], *, build: str) -> Settings:
    """Read every setting; refuses what it cannot use, naming the setting and what would do."""
    secret = environ.get("WEFTBOOK_SECRET", "")
    if len(secret) < LEAST_SECRET:
        given = f"{len(secret)} characters given" if secret else "not set"
        raise SettingMissing(
            Fault("WEFTBOOK_SECRET", given, f"set it to at least {LEAST_SECRET} random characters", "secret")
        )
    return Settings(
        database_url=database_url_from(environ),
        secret=secret,
        host=environ.get("WEFTBOOK_HOST") or "127.0.0.1",
        port=_whole(environ, "WEFTBOOK_PORT", default=8000, least=1, most=65_535),
        proxies=_whole(environ, "WEFTBOOK_PROXIES", default=0, least=0, most=10),
        secure_cookies=_yes(environ, "WEFTBOOK_SECURE_COOKIES", default=True),
        session_hours=_whole(environ, "WEFTBOOK_SESSION_HOURS", default=12, least=1, most=720),
        build=build,
    )


def _whole(environ: Mapping[str, str], name: str, *, default: int, least: int, most: int) -> int:
    text = environ.get(name, "").strip()
    if not text:
        return default
    if text.isascii() and text.isdigit() and least <= int(text) <= most:
        return int(text)
    raise SettingMissing(Fault(name, f"{text!r} given", f"give a whole number from {least} to {most}"))


def _yes(environ: Mapping[str, str], name: str, *, default: bool) -> bool:
    text = environ.get(name, "").strip().lower()
    if text in ("", "yes", "no"):
        return default if not text else text == "yes"
    raise SettingMissing(Fault(name, f"{text!r} given", "give yes or no"))
