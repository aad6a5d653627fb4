"""The log-in texts, each read back by something that is not ours."""

import plistlib
import shutil
import subprocess
from pathlib import Path

import pytest
from lxml import etree

from bridge.watch import login

AWKWARD = [Path("/srv/quotes & prices"), Path('/home/a b/50% "off" $HOME')]


def test_launchd_text_reads_back_as_the_command():
    start = login.launchd_agent(AWKWARD, "/opt/python", Path("/Users/x"), 501)
    read = plistlib.loads(start.text.encode())
    assert read["ProgramArguments"] == ["/opt/python", "-m", "bridge", "watch", *map(str, AWKWARD)]
    assert read["RunAtLoad"] is True
    assert start.path == Path("/Users/x/Library/LaunchAgents/savefit.watch.plist")
    assert start.switch_on == (("launchctl", "bootstrap", "gui/501", str(start.path)),)


def test_scheduled_task_is_well_formed_and_quotes_its_arguments():
    start = login.scheduled_task([Path("C:/quotes & prices")], "C:/py/python.exe", Path("C:/local"))
    root = etree.fromstring(start.text.encode("utf-16"))
    space = {"t": "http://schemas.microsoft.com/windows/2004/02/mit/task"}
    assert root.findtext(".//t:Arguments", namespaces=space) == '-m bridge watch "C:/quotes & prices"'
    assert root.findtext(".//t:Command", namespaces=space).endswith("pythonw.exe")
    assert root.find(".//t:LogonTrigger", namespaces=space) is not None
    assert root.findtext(".//t:ExecutionTimeLimit", namespaces=space) == "PT0S"


def test_systemd_escapes_what_systemd_would_expand():
    start = login.systemd_unit(AWKWARD, "/opt/python", Path("/c"))
    line = next(line for line in start.text.splitlines() if line.startswith("ExecStart="))
    assert '"/home/a b/50%% \\"off\\" $$HOME"' in line
    assert start.path == Path("/c/systemd/user/savefit.service")


@pytest.mark.skipif(shutil.which("systemd-analyze") is None, reason="no systemd-analyze here")
def test_systemd_itself_accepts_the_unit(tmp_path):
    start = login.systemd_unit([tmp_path / "a b"], shutil.which("python3"), tmp_path)
    start.path.parent.mkdir(parents=True)
    start.path.write_text(start.text)
    verified = subprocess.run(
        ["systemd-analyze", "--user", "--recursive-errors=no", "verify", str(start.path)],
        capture_output=True, text=True, timeout=60, env={"XDG_RUNTIME_DIR": str(tmp_path), "PATH": "/usr/bin:/bin"},
    )  # fmt: skip
    assert "savefit.service" not in verified.stderr


def test_install_writes_then_removes(tmp_path, monkeypatch, capsys):
    start = login.LoginStart("test", tmp_path / "deep" / "unit", "text", (("true",),), (("true",),))
    assert login.install(start) == 0
    assert start.path.read_text() == "text"
    assert login.remove(start) == 0
    assert not start.path.exists()
    assert login.remove(start) == 0
    failing = login.LoginStart("test", tmp_path / "unit", "text", (("false",),), (("no-such-program",),))
    assert login.install(failing) == 1
    assert login.remove(failing) == 1
    assert "could not be run" in capsys.readouterr().err
