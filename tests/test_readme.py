"""What README and the docstrings promise, held against the program."""

from __future__ import annotations

import doctest
import re
import shlex
import subprocess
import tomllib
from argparse import ArgumentParser
from pathlib import Path

import openpyxl
import pytest

import bridge.job
import bridge.regression.core
from bridge import __version__, samples
from bridge.cli import EXAMPLES, parser
from bridge.messages import Severity
from bridge.sheets.book import OUR_SHEETS
from bridge.workbook import settings
from bridge.workbook.entries import Role
from tests.books import fitted_book
from tests.workbook.support import all_problems, contents, refits, typed, workbook

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def section(title: str) -> str:
    return README.split(f"## {title}\n", 1)[1].split("\n## ", 1)[0]


def rows(title: str) -> list[list[str]]:
    """The cells of a section's table, without its header."""
    lines = [line for line in section(title).splitlines() if line.startswith("|")][2:]
    return [[cell.strip().replace("\\|", "|") for cell in re.split(r"(?<!\\)\|", line)[1:-1]] for line in lines]


def quoted(text: str) -> list[str]:
    return re.findall(r"`([^`]+)`", text)


def marked(kind: str) -> str:
    """The command under a marker."""
    found = re.search(rf"<!-- {kind} command -->\n```\n(.*)\n```\n", README)
    assert found is not None, "one line in a fence right under its marker"
    return found[1]


# --- the two commands ----------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["demo", "test"])
def test_a_command_to_copy_is_a_line_a_shell_reads(kind: str) -> None:
    line = marked(kind)
    subprocess.run(["sh", "-n", "-c", line], check=True)
    make, rest = line.split("; }; } && ")
    install, run = rest.split(" && ")
    assert make.startswith("{ python3 -m venv .venv ||")
    assert install.startswith(".venv/bin/pip install -q ")
    assert run.startswith(".venv/bin/")


def test_the_demo_command_ends_in_a_command_of_ours() -> None:
    program, *arguments = shlex.split(marked("demo").rsplit("&&", 1)[1])
    assert program == ".venv/bin/savefit"
    assert parser().parse_args(arguments).once


def test_the_test_command_installs_what_it_needs() -> None:
    line = marked("test")
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    assert "-e '.[test]'" in line
    assert "pytest" in " ".join(project["optional-dependencies"]["test"])
    assert line.endswith("-m tests.all")
    assert (ROOT / "tests" / "all.py").exists()


# --- the request grid ----------------------------------------------------------------------------

COLUMN = {
    "response": "hours",
    "predictor": "length (m)",
    "category": "hull",
    "candidate": "crew",
    "weight": "coats",
    "label": "job",
    "order": "month",
    "group": "crew",
}
ENTRIES = [(row[0], quoted(" ".join(row))) for row in rows("The request grid") if row[0].startswith("`")]
ASKED = [(quoted(role)[0], entry) for role, entries in ENTRIES for entry in entries]


def test_every_role_is_in_the_table() -> None:
    assert [quoted(role)[0] for role, _ in ENTRIES] == [role.value for role in Role]


@pytest.mark.parametrize(("role", "entry"), ASKED)
def test_every_entry_in_the_table_is_understood(role: str, entry: str) -> None:
    words = entry.split()
    said = entry if any(word in COLUMN for word in words) else f"{entry} {role}"
    column = COLUMN["category" if "category" in words else role]
    asked = {"hours": "response", "length (m)": "predictor"} | {column: said}
    page = typed(contents(workbook({"Refits": refits()})), asked)
    model = page.model()
    assert model.spec is not None
    assert not [problem.text for problem in all_problems(page) if problem.severity is Severity.REFUSAL]


SETTINGS = section("The request grid").split("**Settings**", 1)[1].split("\n\n", 1)[0]


def test_every_setting_is_named() -> None:
    labels = {row.label for row in settings.ROWS} - {settings.AND_WHERE}
    named = set(quoted(SETTINGS))
    assert labels <= named
    choices = {choice for row in settings.ROWS for choice in row.choices}
    assert named <= labels | choices


@pytest.mark.parametrize(("label", "choices"), re.findall(r"`([^`]+)` \(((?:`[^`]+`(?:, )?)+)\)", SETTINGS))
def test_every_choice_of_a_setting_is_understood(label: str, choices: str) -> None:
    for choice in quoted(choices):
        asked = {"hours": "response", "length (m)": "predictor", "crew": "group", label: choice}
        page = typed(contents(workbook({"Refits": refits()})), asked)
        assert not [problem.text for problem in all_problems(page) if problem.severity is Severity.REFUSAL]


# --- the sheets and names ------------------------------------------------------------------------


def test_the_sheets_table_names_our_sheets() -> None:
    assert [quoted(row[0])[0] for row in rows("The sheets that come back")] == list(OUR_SHEETS)


def test_the_names_for_formulas_are_there(tmp_path: Path) -> None:
    path = tmp_path / "book.xlsx"
    columns = {"y": [3.1, 4.9, 7.2, 9.0, 10.8, 13.1], "x": [1.0, 2.0, 3.0, 4.0, 5.0, 6.0]}
    fitted_book(path, columns, {"A": {"y": "response", "x": "predictor"}})
    named = {name for name in quoted(section("The sheets that come back")) if name.startswith("fit_")}
    assert len(named) > 3
    assert named <= set(openpyxl.load_workbook(path).defined_names)


# --- the commands --------------------------------------------------------------------------------


def commands() -> dict[str, ArgumentParser]:
    (actions,) = [action for action in parser()._actions if action.choices and action.nargs == "A..."]
    return dict(actions.choices)  # type: ignore[arg-type]


def promised() -> dict[str, set[str]]:
    """Command -> options, as the table has them."""
    found: dict[str, set[str]] = {}
    for row in rows("Commands"):
        for usage in quoted(row[0]):
            name = usage.removeprefix("savefit ").split()[0]
            found.setdefault(name, set()).update(re.findall(r"--[a-z-]+", usage))
    return found


def test_the_table_names_every_command_and_option_and_no_other() -> None:
    there = {
        name: {word for action in made._actions for word in action.option_strings if word.startswith("--")} - {"--help"}
        for name, made in commands().items()
    }
    assert promised() == there


def test_choices_in_the_table_are_the_parsers() -> None:
    text = " ".join(row[0] for row in rows("Commands"))
    assert "--while-open auto|write|wait|beside" in text
    assert commands()["watch"].parse_args(["x", "--while-open", "beside"]).while_open == "beside"
    for shell in re.search(r"completion ([a-z|]+)", text)[1].split("|"):  # type: ignore[index]
        assert commands()["completion"].parse_args([shell]).shell == shell


@pytest.mark.parametrize("line", re.findall(r"^ +savefit (.*?)(?:   .*)?$", EXAMPLES, re.M))
def test_examples_in_the_help_are_read(line: str) -> None:
    parser().parse_args(shlex.split(line))


def test_templates_named_are_there() -> None:
    for name in re.findall(r"--template ([a-z]+)", README + EXAMPLES):
        assert name in samples.template_names()


# --- other promises --------------------------------------------------------------------------------


def test_the_change_log_begins_with_this_version() -> None:
    assert section("Changes").strip().startswith(f"**{__version__}**")


def test_the_licence_is_where_it_is_said_to_be() -> None:
    (path,) = quoted(section("Licence"))
    assert (ROOT / path).read_text(encoding="utf-8").startswith("MIT License")


@pytest.mark.parametrize("module", [bridge.job, bridge.regression.core], ids=lambda module: module.__name__)
def test_examples_in_docstrings(module: object, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    ended = doctest.testmod(module)  # type: ignore[arg-type]
    assert ended.attempted > 0
    assert ended.failed == 0
