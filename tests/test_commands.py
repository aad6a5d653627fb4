"""The commands as a user types them."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from bridge import __version__, samples
from bridge.cli import main
from tests.books import ask, cells, data_book

ROWS = {"y": [3.1, 4.9, 7.2, 9.0, 10.8, 13.1], "x": [1.0, 2.0, 3.0, 4.0, 5.0, 6.0]}


@pytest.fixture
def book(tmp_path: Path) -> Path:
    path = data_book(tmp_path / "line.xlsx", ROWS)
    assert main(["fit", str(path)]) == 0
    ask(path, {"A": {"y": "response", "x": "predictor"}})
    return path


def test_version_and_help(capsys: pytest.CaptureFixture[str]) -> None:
    for option in ("--version", "--help"):
        with pytest.raises(SystemExit) as ended:
            main([option])
        assert ended.value.code == 0
    said = capsys.readouterr().out
    assert __version__ in said
    assert "savefit fit quotes.xlsx" in said


def test_wrong_usage_is_exit_code_2() -> None:
    with pytest.raises(SystemExit) as ended:
        main(["fit"])
    assert ended.value.code == 2


def test_python_dash_m_is_the_same_command() -> None:
    said = subprocess.run([sys.executable, "-m", "bridge", "--version"], capture_output=True, text=True, check=True)
    assert said.stdout.strip() == f"savefit {__version__}"


def test_fit_says_what_was_fitted(book: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["fit", str(book)]) == 0
    assert "fitted A" in capsys.readouterr().out
    assert main(["fit", str(book)]) == 0
    assert "nothing has changed" in capsys.readouterr().out


def test_json_lines_carry_the_figures(book: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["fit", "--json", str(book)]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["outcome"] == "fitted"
    slope = found["models"][0]["coefficients"][1]
    # y = a + b x by hand: Sxy / Sxx = 34.75 / 17.5
    assert slope["coefficient"] == pytest.approx(34.75 / 17.5, rel=1e-14)
    assert main(["fit", "--json", str(book)]) == 0
    again = json.loads(capsys.readouterr().out)
    assert again["outcome"] == "unchanged"
    assert again["models"] == found["models"]


def test_check_writes_nothing(book: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = book.read_bytes()
    assert main(["check", str(book)]) == 0
    assert "A: y from x" in capsys.readouterr().out
    ask(book, {"A": {"y": "response", "x": "response"}})
    asked = book.read_bytes()
    assert main(["check", "--json", str(book)]) == 1
    assert json.loads(capsys.readouterr().out)["models"][0]["problems"]
    assert book.read_bytes() == asked != before


def test_a_missing_file_is_exit_code_2(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["fit", str(tmp_path / "none.xlsx")]) == 2
    assert "none.xlsx" in capsys.readouterr().out


def test_every_template_is_made_and_fits(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["new", "--list"]) == 0
    listed = capsys.readouterr().out
    for name in samples.template_names():
        assert name in listed
        path = tmp_path / f"{name}.xlsx"
        assert main(["new", str(path), "--template", name]) == 0
        assert main(["fit", str(path)]) == 0, name
    assert main(["new", str(path)]) == 2
    assert main(["new"]) == 2
    assert main(["new", str(tmp_path / "other"), "--template", "none"]) == 2


def test_strip_takes_everything_of_ours_out(book: Path, capsys: pytest.CaptureFixture[str]) -> None:
    main(["fit", str(book)])
    assert main(["strip", str(book)]) == 0
    assert main(["strip", str(book)]) == 0
    assert "nothing of ours" in capsys.readouterr().out


def test_demo_once_fits_three_workbooks(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "demo"
    assert main(["demo", "--once", "--folder", str(folder)]) == 0
    assert "Three workbooks" in capsys.readouterr().out
    made = sorted(folder.glob("*.xlsx"))
    assert len(made) == 3
    assert all("data unchanged" in str(cells(path, "fit results")[2][0]) for path in made)


def test_keep_running_shows_what_it_would_set_up(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["keep-running", "--show", str(tmp_path)]) == 0
    assert str(tmp_path) in capsys.readouterr().out
    assert main(["keep-running"]) == 2
    with pytest.raises(SystemExit):
        main(["keep-running", "--show", "--remove"])
    assert main(["keep-running", str(tmp_path / "none")]) == 2


@pytest.mark.parametrize("shell", ["bash", "zsh", "tcsh"])
def test_completion_scripts_name_the_commands(shell: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["completion", shell]) == 0
    assert "keep-running" in capsys.readouterr().out


@pytest.mark.skipif(shutil.which("bash") is None, reason="no bash here")
def test_bash_takes_its_completion(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    main(["completion", "bash"])
    script = tmp_path / "completion"
    script.write_text(capsys.readouterr().out)
    said = subprocess.run(
        ["bash", "-c", 'set -e; source "$1"; complete -p savefit', "bash", script], capture_output=True, text=True
    )
    assert (said.returncode, said.stderr) == (0, "")
    assert said.stdout.endswith("savefit\n")


def test_output_that_is_no_terminal_is_plain(book: Path) -> None:
    command = [sys.executable, "-m", "bridge", "fit", str(book), str(book)]
    said = subprocess.run(command, capture_output=True, check=True)
    assert not {b"\x1b", b"\r"} & {said.stdout[at : at + 1] for at in range(len(said.stdout))}
    assert said.stderr == b""
    assert len(said.stdout.splitlines()) == 2


def test_help_and_watch_need_no_numeric_imports() -> None:
    heavy = ("numpy", "scipy", "lxml", "pandas")
    text = f"import sys, bridge.cli, bridge.watch; print([m for m in {heavy} if m in sys.modules])"
    said = subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, check=True)
    assert said.stdout.strip() == "[]"
