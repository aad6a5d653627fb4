"""A wheel built from this tree holds the demos and templates, and the program finds them there."""

from __future__ import annotations

import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

from bridge import __version__, samples

ROOT = Path(__file__).parents[2]
NEEDED = ("pyproject.toml", "README.md", "bridge", "demo_workbooks", "templates")
ASK = """
from bridge import samples
print(samples.__file__)
print(sum(len(content) for _, content in samples.demo_files()))
for name in samples.template_names():
    print(len(samples.template(name)))
"""


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Built as pip builds it, from a copy (building leaves files in the tree)."""
    folder = tmp_path_factory.mktemp("wheel")
    for name in NEEDED:
        if (ROOT / name).is_dir():
            shutil.copytree(ROOT / name, folder / name, ignore=shutil.ignore_patterns("__pycache__"))
        else:
            shutil.copy(ROOT / name, folder / name)
    command = [sys.executable, "-m", "pip", "wheel", "--no-deps", "--quiet", "-w", str(folder / "dist"), str(folder)]
    said = subprocess.run(command, capture_output=True, text=True, timeout=300, check=False)
    if said.returncode and ("No matching distribution" in said.stderr or "connection" in said.stderr.lower()):
        pytest.skip("pip cannot fetch the build back end here")
    assert said.returncode == 0, said.stderr
    return next((folder / "dist").glob("*.whl"))


def test_wheel_holds_the_workbooks(wheel: Path) -> None:
    """All of them byte for byte, and none of the scripts that make them."""
    with zipfile.ZipFile(wheel) as package:
        names = package.namelist()
        for name, content in samples.demo_files():
            assert package.read(f"bridge/demo_workbooks/{name}") == content
        for name in samples.template_names():
            assert package.read(f"bridge/templates/{name}.xlsx") == samples.template(name)
    outside = [name for name in names if not name.startswith(("bridge/", "savefit-"))]
    assert outside == []
    assert not [name for name in names if "/make/" in name]


def test_found_where_installed(wheel: Path, tmp_path: Path) -> None:
    """From an installed copy, far from this tree."""
    with zipfile.ZipFile(wheel) as package:
        package.extractall(tmp_path)
    said = subprocess.run(
        [sys.executable, "-c", ASK], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=True
    )
    sizes = [sum(len(content) for _, content in samples.demo_files())]
    sizes += [len(samples.template(name)) for name in samples.template_names()]
    where, *found = said.stdout.split("\n")[:-1]
    assert Path(where).is_relative_to(tmp_path)
    assert [int(size) for size in found] == sizes


def test_commands_run_where_installed(wheel: Path, tmp_path: Path) -> None:
    """As after an installation: the version, the demo, a template and its fit, with no file of this tree at hand."""
    home, work = tmp_path / "installed", tmp_path / "work"
    work.mkdir()
    with zipfile.ZipFile(wheel) as package:
        package.extractall(home)

    def run(*words: str) -> str:
        program = f"import sys; sys.path[0] = {str(home)!r}; import bridge.cli as c; assert {str(home)!r} in c.__file__"
        command = [sys.executable, "-c", f"{program}; sys.exit(c.main())", *words]
        said = subprocess.run(command, cwd=work, capture_output=True, text=True, timeout=120, check=False)
        assert (said.returncode, said.stderr) == (0, "")
        return said.stdout

    assert run("--version") == f"savefit {__version__}\n"
    assert run("demo", "--once").count("fitted") >= 3
    assert "is ready" in run("new", "quotes.xlsx", "--template", "quote")
    assert "fitted" in run("fit", "quotes.xlsx")
