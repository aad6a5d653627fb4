"""LibreOffice Calc as a second spreadsheet program for the tests: convert, recalculate, drive by script.

    convert(path, to="pdf")                       one file through a fresh program
    convert(path, to="xlsx", recalculate=True)    every formula calculated anew while loading
    with running() as office:                     one program for many files
        print(office.script(TEXT, "argument"))    TEXT sees `load(path)`, `desktop`, `value(name, v)`, `argv`

Each process has a profile of its own, so that tests may run side by side. Results go to fresh temporary folders.
"""

from __future__ import annotations

import atexit
import os
import shutil
import subprocess
import sys
import tempfile
import time
import uuid
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path

import pytest

SOFFICE = shutil.which("soffice") or shutil.which("libreoffice")
SYSTEM_PYTHON = "/usr/bin/python3"  # the interpreter Debian's python3-uno belongs to
HAVE_OFFICE = SOFFICE is not None
# A machine that is meant to have the program (the continuous checks) must not skip silently.
_MUST_HAVE = os.environ.get("SAVEFIT_NEED_OFFICE") == "1"

_ABSENT = pytest.mark.skipif(not HAVE_OFFICE and not _MUST_HAVE, reason="LibreOffice (soffice) is not installed")


def needs_office(test):  # type: ignore[no-untyped-def]
    """Mark a test or class as needing LibreOffice; it is skipped, saying so, where there is none."""
    return pytest.mark.office(_ABSENT(test))


class OfficeError(RuntimeError):
    """LibreOffice or a script run in it failed; the text holds what it said."""


_FILTERS = {"pdf": "pdf:calc_pdf_Export", "xlsx": "xlsx:Calc MS Excel 2007 XML", "ods": "ods:calc8", "csv": "csv"}

_SETTINGS = """<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry" xmlns:xs="http://www.w3.org/2001/XMLSchema"
 xmlns:xsi="http://www.w3.org/2001/XMLSchema-instance">
<item oor:path="/org.openoffice.Office.Calc/Formula/Load"><prop oor:name="OOXMLRecalcMode" oor:op="fuse">
<value>{mode}</value></prop></item>
<item oor:path="/org.openoffice.Office.Common/Security/Scripting"><prop oor:name="MacroSecurityLevel" oor:op="fuse">
<value>3</value></prop></item>
</oor:items>
"""
_ALWAYS, _NEVER = 0, 1

_profiles: dict[bool, Path] = {}


def _profile(recalculate: bool) -> Path:
    """This process's profile folder with recalculation on load forced or off; removed when the process ends."""
    if recalculate not in _profiles:
        folder = Path(tempfile.mkdtemp(prefix="calc-profile-"))
        _settle(folder, recalculate)
        _profiles[recalculate] = folder
        atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return _profiles[recalculate]


def _settle(folder: Path, recalculate: bool) -> None:
    """Write a profile's settings into `folder`."""
    (folder / "user").mkdir()
    mode = _ALWAYS if recalculate else _NEVER
    (folder / "user" / "registrymodifications.xcu").write_text(_SETTINGS.format(mode=mode), encoding="utf-8")


def _command(profile: Path, *arguments: str) -> list[str]:
    if SOFFICE is None:
        raise OfficeError("LibreOffice (soffice) is not installed")
    return [
        SOFFICE,
        f"-env:UserInstallation={profile.as_uri()}",
        "--headless",
        "--norestore",
        "--nologo",
        "--nodefault",
        *arguments,
    ]


def convert(path: Path | str, to: str = "pdf", recalculate: bool = False, timeout: float = 120) -> Path:
    """Open `path` and save it as `to` (pdf, xlsx, ods, csv) in a fresh folder; the new file's path.

    With `recalculate` every formula is calculated anew while loading, whatever value is stored.
    Raises OfficeError when nothing was written, subprocess.TimeoutExpired after `timeout` seconds.
    """
    path = Path(path).resolve()
    out = Path(tempfile.mkdtemp(prefix="calc-out-"))
    atexit.register(shutil.rmtree, out, ignore_errors=True)
    command = _command(_profile(recalculate), "--convert-to", _FILTERS[to], "--outdir", str(out), str(path))
    said = subprocess.run(command, capture_output=True, text=True, timeout=timeout, check=False)
    made = out / f"{path.stem}.{to}"
    if not made.exists():
        raise OfficeError(f"{path.name} was not converted to {to}: {said.stdout} {said.stderr}")
    return made


def pages(path: Path | str, dpi: int = 80, recalculate: bool = False) -> list[Path]:
    """The workbook as one PNG per printed page (needs poppler's pdftoppm)."""
    pdf = convert(path, "pdf", recalculate)
    subprocess.run(["pdftoppm", "-r", str(dpi), "-png", str(pdf), str(pdf.with_suffix(""))], check=True, timeout=120)
    return sorted(pdf.parent.glob("*.png"))


_PRELUDE = """
import sys, time, uno
from com.sun.star.beans import PropertyValue
from com.sun.star.connection import NoConnectException
def value(name, v):
    p = PropertyValue(); p.Name = name; p.Value = v; return p
_resolver = uno.getComponentContext().ServiceManager.createInstance("com.sun.star.bridge.UnoUrlResolver")
for _try in range(200):
    try:
        context = _resolver.resolve("uno:pipe,name=" + sys.argv[1] + ";urp;StarOffice.ComponentContext"); break
    except NoConnectException:
        time.sleep(0.1)
else:
    raise SystemExit("no connection to the office")
desktop = context.ServiceManager.createInstanceWithContext("com.sun.star.frame.Desktop", context)
argv = sys.argv[2:]
def load(path):
    return desktop.loadComponentFromURL(uno.systemPathToFileUrl(path), "_blank", 0, (value("Hidden", True),))
def save_xlsx(document, path):
    document.storeToURL(uno.systemPathToFileUrl(path), (value("FilterName", "Calc MS Excel 2007 XML"),))
"""


@dataclass(frozen=True, slots=True)
class Office:
    """A running program; `script` runs Python-UNO text in the system's Python."""

    pipe: str

    def script(self, text: str, *arguments: str, timeout: float = 120) -> str:
        """What `text` prints. It sees `desktop`, `load(path)`, `save_xlsx(doc, path)`, `value(name, v)`, `argv`.

        Raises OfficeError with the script's own error text.
        """
        # -I and a clean environment: the system's Python must not see this virtual environment.
        clean = {key: value for key, value in os.environ.items() if not key.startswith(("PYTHON", "VIRTUAL_ENV"))}
        command = [SYSTEM_PYTHON, "-c", _PRELUDE + text, self.pipe, *map(str, arguments)]
        said = subprocess.run(command, capture_output=True, text=True, timeout=timeout, env=clean, check=False)
        if said.returncode:
            raise OfficeError(said.stderr[-3000:])
        return said.stdout


@contextmanager
def running(recalculate: bool = False) -> Iterator[Office]:
    """A program that stays up for many scripts and is ended afterwards."""
    pipe = f"calc{uuid.uuid4().hex[:12]}"
    # A profile of its own: a second program on one profile would only hand its work to the first.
    with tempfile.TemporaryDirectory(prefix="calc-run-", ignore_cleanup_errors=True) as folder:
        _settle(Path(folder), recalculate)
        process = subprocess.Popen(
            _command(Path(folder), f"--accept=pipe,name={pipe};urp;"),
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        try:
            yield Office(pipe)
        finally:
            _end(process, Office(pipe))


def _end(process: subprocess.Popen[bytes], office: Office) -> None:
    """Ask the program to close; stop its own process group if it does not."""
    with suppress(OfficeError, subprocess.TimeoutExpired):
        office.script("desktop.terminate()", timeout=15)
    deadline = time.monotonic() + 10
    while process.poll() is None and time.monotonic() < deadline:
        time.sleep(0.05)
    if process.poll() is None:
        if sys.platform == "win32":
            process.kill()
        else:
            os.killpg(process.pid, 9)
        process.wait()
