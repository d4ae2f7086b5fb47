"""The `weftbook` command; each answer imports only what it needs."""

from __future__ import annotations

import argparse
import json
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from datetime import UTC, datetime
from getpass import getpass
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING, TypeAlias

from registry.errors import Fault, InputRefused, RegistryError

if TYPE_CHECKING:
    from registry.services.decompose_file import FileAnswer
    from registry.services.opening import Database
    from registry.services.pool_file import PoolAnswer
    from registry.services.recurrence_file import RecurrenceAnswer

LAST_PORT = 65535
Answer = Callable[[argparse.Namespace], int]
Commands: TypeAlias = "argparse._SubParsersAction[argparse.ArgumentParser]"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns 0 when done, 1 when the input was refused or a check failed."""
    wish = build_parser().parse_args(arguments)
    answer: Answer = wish.answer
    try:
        return answer(wish)
    except RegistryError as error:
        first, *rest = error.faults
        more = f" (and {len(rest)} more)" if rest else ""
        print(f"weftbook: {first}{more}", file=sys.stderr)
        return 1
    except BrokenPipeError:
        # Whoever read the output has seen enough; nothing is left to say.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except OSError as error:
        print(f"weftbook: {error.filename or 'output'}: {error.strerror}; nothing was answered", file=sys.stderr)
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def build_parser() -> argparse.ArgumentParser:
    """Describe every command and option."""
    parser = argparse.ArgumentParser(prog="weftbook", description="A registry of crossed trials with an exact memory.")
    parser.add_argument("--version", action="version", version=f"weftbook {version('weftbook')}")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    _add_decompose(commands)
    _add_pool(commands)
    _add_recurrence(commands)
    _add_demo(commands)
    _add_serve(commands)
    _add_upkeep(commands)
    _add_person(commands)
    return parser


def _add_decompose(commands: Commands) -> None:
    parser = commands.add_parser("decompose", help="take a table of trials apart, without a database")
    parser.add_argument("file", metavar="FILE", type=Path, help="CSV file or workbook with one trial a row")
    parser.add_argument("--response", metavar="COL", required=True, help="column of readings")
    parser.add_argument("--factor", metavar="COL", action="append", required=True, help="column of a factor; repeat")
    parser.add_argument("--block", metavar="COL", help="column of a block, allowed for but not crossed")
    parser.add_argument("--step", help="smallest unit of the readings; read off the decimals when left out")
    parser.add_argument("--error", choices=("pooled", "per-cell"), default="pooled", help="where errors come from")
    parser.add_argument("--confidence", type=float, default=0.95, help="of the intervals, 0.95 when left out")
    parser.add_argument("--json", action="store_true", help="answer as a record to script against")
    parser.set_defaults(answer=_decompose)


def _decompose(wish: argparse.Namespace) -> int:
    from registry.services.decompose_file import FileWish, decompose_file

    answer = decompose_file(
        FileWish(wish.file, wish.response, tuple(wish.factor), wish.block, wish.step, wish.error, wish.confidence)
    )
    return _print_answer(answer, as_json=wish.json)


def _add_pool(commands: Commands) -> None:
    parser = commands.add_parser("pool", help="say what several studies together say of one effect")
    parser.add_argument("file", metavar="FILE", type=Path, help="table with columns study, effect, and variance or se")
    methods = ("paule-mandel", "dersimonian-laird", "reml", "common")
    parser.add_argument("--method", choices=methods, default="paule-mandel", help="how studies are taken to differ")
    parser.add_argument("--interval", choices=("hartung-knapp", "normal"), default="hartung-knapp", help="its kind")
    parser.add_argument("--no-floor", action="store_true", help="let hartung-knapp narrow the interval as well")
    parser.add_argument("--confidence", type=float, default=0.95, help="of the intervals, 0.95 when left out")
    parser.add_argument("--json", action="store_true", help="answer as a record to script against")
    parser.set_defaults(answer=_pool)


def _pool(wish: argparse.Namespace) -> int:
    from registry.services.pool_file import PoolWish, pool_file

    asked = PoolWish(wish.file, wish.method, wish.interval, not wish.no_floor, wish.confidence)
    return _print_answer(pool_file(asked), as_json=wish.json)


def _add_recurrence(commands: Commands) -> None:
    parser = commands.add_parser("recurrence", help="say which interactions are seen again over studies in one table")
    parser.add_argument("file", metavar="FILE", type=Path, help="CSV file or workbook with one trial a row")
    parser.add_argument("--study", metavar="COL", required=True, help="column that tells studies apart, in date order")
    parser.add_argument("--response", metavar="COL", required=True, help="column of readings")
    parser.add_argument("--factor", metavar="COL", action="append", required=True, help="column of a factor; repeat")
    parser.add_argument("--block", metavar="COL", help="column of a block, allowed for but not crossed")
    parser.add_argument("--error", choices=("pooled", "per-cell"), default="pooled", help="where errors come from")
    parser.add_argument("--margin", required=True, help="smallest change of a difference that matters")
    parser.add_argument("--fdr", type=float, default=0.05, help="false discovery rate over the board, 0.05 if left out")
    parser.add_argument("--json", action="store_true", help="answer as a record to script against")
    parser.set_defaults(answer=_recurrence)


def _recurrence(wish: argparse.Namespace) -> int:
    from registry.services.recurrence_file import RecurrenceWish, recurrence_file

    return _print_answer(
        recurrence_file(
            RecurrenceWish(
                path=wish.file,
                study=wish.study,
                response=wish.response,
                factors=tuple(wish.factor),
                block=wish.block,
                error=wish.error,
                margin=wish.margin,
                fdr=wish.fdr,
            )
        ),
        as_json=wish.json,
    )


def _print_answer(answer: FileAnswer | RecurrenceAnswer | PoolAnswer, *, as_json: bool) -> int:
    if as_json:
        json.dump(answer.record(), sys.stdout, ensure_ascii=False, allow_nan=False, indent=1)
        print()
    else:
        print(answer.report(), end="")
    sys.stdout.flush()  # What cannot be written must be told while the exit status still can.
    return 0


def _add_demo(commands: Commands) -> None:
    parser = commands.add_parser("demo", help="serve an invented parts depot to look around in")
    parser.add_argument("--host", default="127.0.0.1", help="address to listen on")
    parser.add_argument("--port", type=_port, default=8000, help="port to listen on; 0 takes a free one")
    parser.add_argument("--no-browser", action="store_true", help="do not open a browser")
    parser.add_argument("--at", metavar="DIR", type=Path, help="folder to make the registry in; else a temporary one")
    parser.set_defaults(answer=_demo)


def _port(text: str) -> int:
    if not (text.isascii() and text.isdigit() and int(text) <= LAST_PORT):
        raise argparse.ArgumentTypeError(f"{text!r} given, give a whole number from 0 to {LAST_PORT}")
    return int(text)


def _demo(wish: argparse.Namespace) -> int:
    from seed_demo.running import run_demo
    from web.serving import serve, try_address

    try_address(wish.host, wish.port)
    return run_demo(
        serve,
        host=wish.host,
        port=wish.port,
        browser=not wish.no_browser,
        folder=wish.at,
        now=datetime.now(UTC),
        say=print,
    )


def _add_serve(commands: Commands) -> None:
    parser = commands.add_parser("serve", help="serve the registry that the settings name")
    parser.set_defaults(answer=_serve)


def _serve(_: argparse.Namespace) -> int:
    from registry.services.opening import open_registry
    from registry.services.settings import settings_from
    from registry.services.upkeep import health
    from web.serving import serve

    settings = settings_from(os.environ, build=version("weftbook"))
    database = open_registry(settings.database_url)
    try:
        health(database)
        serve(database, settings, ready=lambda address: print(f"Weftbook serves at {address}", flush=True))
    finally:
        database.dispose()
    return 0


def _add_upkeep(commands: Commands) -> None:
    upgrade = commands.add_parser("upgrade", help="bring the database to this version's tables")
    upgrade.set_defaults(answer=_upgrade)
    recount = commands.add_parser("recount", help="prove every tally and every event chain, or name what is wrong")
    recount.set_defaults(answer=_recount)


def _upgrade(_: argparse.Namespace) -> int:
    from registry.services.upkeep import upgrade

    with _registry() as database:
        print(f"The database is at migration {upgrade(database)}.")
    return 0


def _recount(_: argparse.Namespace) -> int:
    from registry.services.upkeep import health, recount

    with _registry() as database:
        health(database)
        found = recount(database)
    for fault in found.faults:
        print(fault, file=sys.stderr)
    if found.faults:
        return 1
    studies = "1 study" if found.studies == 1 else f"{found.studies} studies"
    print(f"Every tally and every event chain is right: {studies} recounted.")
    return 0


@contextmanager
def _registry() -> Iterator[Database]:
    from registry.services.opening import open_registry
    from registry.services.settings import database_url_from

    database = open_registry(database_url_from(os.environ))
    try:
        yield database
    finally:
        database.dispose()


def _add_person(commands: Commands) -> None:
    person = commands.add_parser("person", help="people with an account")
    actions = person.add_subparsers(title="actions", metavar="ACTION", required=True)
    add = actions.add_parser("add", help="add somebody; the password is asked for, or read from standard input")
    add.add_argument("--name", required=True, help="name as others see it")
    add.add_argument("--address", required=True, help="e-mail address to sign in with")
    add.add_argument("--keeper", action="store_true", help="keeper of the whole registry")
    add.set_defaults(answer=_person_add)


def _person_add(wish: argparse.Namespace) -> int:
    from registry.services.people import add_person, anybody_there
    from registry.services.settings import PasswordCost
    from registry.services.upkeep import health

    with _registry() as database:
        health(database)
        if not wish.keeper and not anybody_there(database):
            raise InputRefused(Fault("person add", "the first person of a registry", "add them with --keeper"))
        password = _asked_password()
        person = add_person(
            database,
            name=wish.name,
            address=wish.address,
            password=password,
            keeper=wish.keeper,
            now=datetime.now(UTC),
            hashing=PasswordCost(),
        )
    print(f"{person.name} can sign in as {person.address}.")
    return 0


def _asked_password() -> str:
    if not sys.stdin.isatty():
        return sys.stdin.readline().rstrip("\r\n")
    first, second = getpass("Password: "), getpass("Once more: ")
    if first != second:
        raise InputRefused(Fault("password", "the two do not agree", "type the same one twice"))
    return first
