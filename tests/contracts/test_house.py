"""The house keeps its own rules: README and command agree, the map is true, refusals are tested."""

from __future__ import annotations

import argparse
import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from registry import errors
from registry.cli import build_parser
from registry.services.settings import SETTINGS
from web.refusals import STATUS_OF

ROOT = Path(__file__).parents[2]
PACKAGES = ("registry", "web", "seed_demo", "migrations")
CARD = {"README.md", "DEVELOPERS.md", "pyproject.toml", "LICENSE", "tests", *PACKAGES}


def parsers(parser: argparse.ArgumentParser) -> Iterator[argparse.ArgumentParser]:
    yield parser
    for action in parser._actions:
        if isinstance(action, argparse._SubParsersAction):
            for part in action.choices.values():
                yield from parsers(part)


def test_the_readme_names_every_command_option_and_setting() -> None:
    readme = (ROOT / "README.md").read_text()
    options = {
        option
        for parser in parsers(build_parser())
        for action in parser._actions
        for option in action.option_strings
        if option.startswith("--")
    }
    commands = {parser.prog for parser in parsers(build_parser()) if parser.prog not in ("weftbook", "weftbook person")}

    assert [name for name in sorted(options | commands) if name not in readme] == []
    assert [setting.name for setting in SETTINGS if f"| `{setting.name}` |" not in readme] == []


def test_the_readme_opens_with_the_job_and_two_commands() -> None:
    commands = [
        line for line in (ROOT / "README.md").read_text().splitlines() if line.startswith("    python3 -m venv")
    ]

    assert len(commands) == 2
    assert commands[0].endswith("weftbook demo")
    assert commands[1].endswith("-m pytest")


def captions() -> list[str]:
    lines = []
    for package in PACKAGES:
        for path in sorted((ROOT / package).rglob("*.py")):
            first = (ast.get_docstring(ast.parse(path.read_text())) or "no caption").splitlines()[0]
            lines.append(f"- `{path.relative_to(ROOT).as_posix()}`: {first}")
    return lines


def test_the_map_in_developers_md_is_true() -> None:
    told = [
        line
        for line in (ROOT / "DEVELOPERS.md").read_text().splitlines()
        if line.startswith("- `") and ".py`: " in line
    ]

    assert told == captions(), "put this into the map:\n" + "\n".join(captions())


REFUSALS = [
    found for found in vars(errors).values() if isinstance(found, type) and issubclass(found, errors.RegistryError)
]
# RecordDamaged is for what a backup will refuse; nothing raises it yet.
UNUSED = {"RegistryError", "RecordDamaged"}


def test_every_refusal_has_a_status_and_is_asserted_with_its_text() -> None:
    tests = "\n".join(path.read_text() for path in (ROOT / "tests").rglob("test_*.py"))

    assert {refusal for refusal in REFUSALS if refusal not in STATUS_OF} <= {errors.RegistryError}
    assert [
        refusal.__name__
        for refusal in REFUSALS
        if refusal.__name__ not in UNUSED and f"raises({refusal.__name__}" not in tests
    ] == []


def test_the_top_level_holds_what_the_card_says() -> None:
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False)
    if listed.returncode:
        pytest.skip("not a git checkout")
    top = {path.split("/")[0] for path in listed.stdout.splitlines()}

    assert {name for name in top if not name.startswith(".")} <= CARD


def test_imports_point_one_way() -> None:
    command = Path(sys.executable).with_name("lint-imports")
    done = subprocess.run([command, "--no-cache"], cwd=ROOT, capture_output=True, text=True, check=False)

    assert done.returncode == 0, done.stdout


def test_nothing_happens_at_import() -> None:
    # SciPy, pandas, Flask and the database drivers are loaded only by the commands that need them.
    heavy = {"flask", "numpy", "pandas", "scipy", "sqlalchemy"}
    code = f"import sys, registry.cli; print(sorted({heavy} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)

    assert done.stdout.strip() == "[]"
