"""The project as a whole: its layout, its rules on files and imports, and what README.md shows."""

from __future__ import annotations

import ast
import configparser
import doctest
import fnmatch
import importlib
import pkgutil
import re
import shlex
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import climbpath
from climbpath.body import parse_athlete
from climbpath.cli.main import COMMANDS
from climbpath.figure.table import plan_table
from climbpath.wall import parse_wall
from tests.plan_samples import sample_result

ROOT = Path(__file__).parents[1]
PACKAGE = ROOT / "climbpath"
SOURCES = sorted(PACKAGE.rglob("*.py"))
README = (ROOT / "README.md").read_text(encoding="utf-8")

AGREED = {
    ".ci", ".gitignore", "DEVELOPERS.md", "LICENSE", "README.md", "climbpath", "notebooks",
    "pyproject.toml", "setup.cfg", "tests", "walls",
}  # fmt: skip
MAX_LINES = 420
"""About 400 lines a file are agreed; a little more is let pass."""


def ignored_names() -> list[str]:
    lines = (ROOT / ".gitignore").read_text(encoding="utf-8").splitlines()
    return [".git", *(line.rstrip("/") for line in lines if line)]


def is_ignored(name: str) -> bool:
    return any(fnmatch.fnmatch(name, pattern) for pattern in ignored_names())


def top_level() -> set[str]:
    """Names at the top that belong to the project: where git is at hand, those it tracks."""
    here = {path.name for path in ROOT.iterdir() if not is_ignored(path.name)}
    command = ["git", "-C", str(ROOT), "ls-files"]
    try:
        listed = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    except (OSError, subprocess.CalledProcessError):
        return here
    tracked = {line.partition("/")[0] for line in listed.splitlines()}
    # What is agreed counts before it is tracked; a stray file of somebody's does not.
    return here & (tracked | AGREED)


def setup_cfg() -> configparser.ConfigParser:
    parser = configparser.ConfigParser()
    parser.read(ROOT / "setup.cfg", encoding="utf-8")
    return parser


def relative(paths: list[Path]) -> list[str]:
    return [str(path.relative_to(ROOT)) for path in paths]


# Layout


def test_the_top_level_is_as_agreed() -> None:
    assert top_level() == AGREED


def test_tests_import_the_package_of_this_tree() -> None:
    assert Path(climbpath.__file__).parent == PACKAGE


def test_pyproject_holds_the_build_system_alone() -> None:
    document = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    assert set(document) == {"build-system"}


def test_no_file_of_the_package_is_too_long() -> None:
    lengths = {path: len(path.read_text(encoding="utf-8").splitlines()) for path in SOURCES}
    assert {str(path): n for path, n in lengths.items() if n > MAX_LINES} == {}


def test_every_file_of_the_package_that_is_no_module_is_installed() -> None:
    patterns = setup_cfg()["options.package_data"]["climbpath"].split()
    files = [
        str(path.relative_to(PACKAGE))
        for path in PACKAGE.rglob("*")
        if path.is_file() and path.suffix not in (".py", ".pyc")
    ]
    assert files
    assert [n for n in files if not any(fnmatch.fnmatch(n, pattern) for pattern in patterns)] == []


def test_every_folder_of_the_package_with_modules_is_a_package() -> None:
    folders = {path.parent for path in SOURCES}
    assert relative([f for f in sorted(folders) if not (f / "__init__.py").is_file()]) == []


def test_every_data_table_names_its_sources() -> None:
    tables = sorted(PACKAGE.rglob("tables/*"))
    assert tables
    for path in tables:
        lines = path.read_text(encoding="utf-8").splitlines()
        if path.suffix == ".csv":
            top = lines[: next(k for k, line in enumerate(lines) if not line.startswith("#"))]
            assert any(line.startswith("# Source: ") for line in top), path.name
            continue
        # In settings every value has a comment beside it, or above it and its neighbours.
        assert path.suffix == ".toml", path.name
        commented = False
        for line in lines:
            if line.startswith("#"):
                commented = True
            elif not line:
                commented = False
            elif not line.startswith("["):
                assert commented or "#" in line, f"{path.name}: {line}"


def test_every_wall_says_where_it_comes_from() -> None:
    for path in sorted((ROOT / "walls").rglob("*.toml")):
        top = path.read_text(encoding="utf-8").partition("schema =")[0]
        assert "doi" in top or re.search(r"\binvented\b", top), path.name


# Rules for the code


def test_the_package_has_no_assert_statements() -> None:
    found = [
        f"{path.relative_to(ROOT)}:{node.lineno}"
        for path in SOURCES
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Assert)
    ]
    assert found == []


def test_every_module_has_a_docstring() -> None:
    modules = [path for path in SOURCES if path.read_text(encoding="utf-8").strip()]
    trees = {path: ast.parse(path.read_text(encoding="utf-8")) for path in modules}
    assert relative([path for path, tree in trees.items() if not ast.get_docstring(tree)]) == []


def test_the_doctests_of_the_package_hold() -> None:
    for module in pkgutil.walk_packages([str(PACKAGE)], "climbpath."):
        if module.name != "climbpath.__main__":
            failed, _ = doctest.testmod(importlib.import_module(module.name))
            assert failed == 0, module.name


def newly_imported(statement: str) -> set[str]:
    """Top-level names of the modules outside the standard library that a statement imports."""
    program = (
        "import sys\nbefore = set(sys.modules)\n"
        f"{statement}\n"
        "names = {name.partition('.')[0] for name in set(sys.modules) - before}\n"
        "print('new:', *sorted(names - sys.stdlib_module_names))"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=ROOT, capture_output=True, text=True, check=True
    )
    return set(done.stdout.rpartition("new:")[2].split())


@pytest.mark.parametrize(
    "module", ["climbpath.cli.main", *(module for module, _ in COMMANDS.values())]
)
def test_a_command_imports_only_click_until_it_runs(module: str) -> None:
    assert newly_imported(f"import {module}") == {"climbpath", "click"}


def test_help_needs_only_click() -> None:
    statement = (
        "from climbpath.cli.main import climbpath as group\n"
        "group.main(['--help'], standalone_mode=False)"
    )
    assert newly_imported(statement) == {"climbpath", "click"}


@pytest.mark.parametrize("module", ["study.plan", "study.document", "figure.overlay"])
def test_matplotlib_waits_until_something_is_drawn(module: str) -> None:
    imported = newly_imported(f"import climbpath.{module}")
    assert "matplotlib" not in imported
    assert "climbpath" in imported


# README.md


def readme_block(marker: str) -> str:
    """The fenced block after a marker such as <!-- command: plan -->."""
    found = re.search(rf"^<!-- {marker} -->\n```\w*\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    assert found is not None, marker
    return found.group(1)


def climbpath_commands() -> list[list[str]]:
    """What README.md writes after the word ``climbpath`` in code that starts with it."""
    inline = [text for text in re.findall(r"`([^`\n]+)`", README) if text.startswith("climbpath ")]
    return [shlex.split(text)[1:] for text in inline]


def test_the_two_commands_of_the_readme_stand_first_and_name_what_exists() -> None:
    plan, tests = readme_block("command: plan"), readme_block("command: test")
    assert re.findall(r"^<!-- command: (\w+) -->$", README, re.MULTILINE) == ["plan", "test"]
    assert README.index(plan) < README.index(tests) < README.index("\n## What it answers")
    for command in (plan, tests):
        # Each is one command line: every line but the last goes on in the next.
        assert all(line.endswith("&&") for line in command.splitlines()[:-1])
        assert "python3 -m venv" in command
    named = [word for word in shlex.split(plan) if word.endswith(".toml")]
    assert len(named) == 2
    assert all((ROOT / name).is_file() for name in named)
    assert set(setup_cfg()["options.extras_require"]) >= {"test", "dev", "notebook"}
    assert "-e '.[test]'" in tests
    assert tests.rstrip().endswith("-m pytest -q")


def test_every_climbpath_command_of_the_readme_has_these_options() -> None:
    seen = set()
    for words in climbpath_commands():
        name, *rest = words
        if name == "COMMAND":
            continue
        assert name in COMMANDS, words
        seen.add(name)
        command = importlib.import_module(COMMANDS[name][0]).command
        subcommands = getattr(command, "commands", None)
        if subcommands is not None:
            command = subcommands[rest[0]]
        known = {option for parameter in command.params for option in parameter.opts}
        assert {word for word in rest if word.startswith("--")} <= known, words
    assert seen == set(COMMANDS)


def test_the_options_that_the_readme_lists_are_those_of_plan() -> None:
    command = importlib.import_module(COMMANDS["plan"][0]).command
    known = {option for parameter in command.params for option in parameter.opts}
    listed = {
        word
        for text in re.findall(r"`(?:… )?(--[^`\n]+)`", README)
        for word in text.split()
        if word.startswith("--")
    }
    assert listed
    assert listed <= known


def test_paths_that_the_documents_name_exist() -> None:
    for document in ("README.md", "DEVELOPERS.md"):
        text = (ROOT / document).read_text(encoding="utf-8")
        paths = re.findall(r"`((?:climbpath|tests|walls|notebooks|\.ci)/[\w./-]*)`", text)
        assert paths, document
        assert [path for path in paths if not (ROOT / path).exists()] == []


def test_the_files_shown_in_the_readme_can_be_read() -> None:
    blocks = re.findall(r"^```toml\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    assert len(blocks) == 2
    wall = parse_wall(blocks[0], "README.md")
    assert [hold.id for hold in wall.holds] == ["1", "2", "top"]
    athlete = parse_athlete(blocks[1], "README.md")
    # The error of what was measured is none: the file above measures the span.
    assert athlete.span == pytest.approx(1.695, abs=1e-3)


def test_the_example_in_the_readme_has_the_form_that_is_printed() -> None:
    example = readme_block("example: plan").splitlines()
    printed = plan_table(sample_result()).splitlines()
    head = next(k for k, line in enumerate(printed) if line.startswith("step"))
    note = next(k for k, line in enumerate(printed) if line.startswith("CoM dx:"))
    for line in (*printed[head : head + 2], *printed[note : note + 2], "Cautions"):
        assert line in example
    assert example[0].startswith("Kiln lane (invented) · ")
