"""Starting the watcher at log-in: a systemd user unit, a launchd agent, or a scheduled task.

Each system is one function from folders to a `LoginStart`: the text of the file, where it goes, and the commands
that switch it on and off. Only systemd's was run by us; the other two follow their published formats.
"""

from __future__ import annotations

import os
import plistlib
import subprocess
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from xml.sax.saxutils import escape

NAME = "savefit"


@dataclass(frozen=True, slots=True)
class LoginStart:
    """What to write and run. `encoding` is that of the file; commands are argument lists, run in order."""

    system: str
    path: Path
    text: str
    switch_on: tuple[tuple[str, ...], ...]
    switch_off: tuple[tuple[str, ...], ...]
    encoding: str = "utf-8"


def for_this_system(folders: Sequence[Path]) -> LoginStart:
    """The way of the system we run on. `folders` are absolute."""
    if sys.platform == "win32":
        return scheduled_task(folders, sys.executable, Path(os.environ.get("LOCALAPPDATA", Path.home())))
    if sys.platform == "darwin":
        return launchd_agent(folders, sys.executable, Path.home(), os.getuid())
    config = Path(os.environ.get("XDG_CONFIG_HOME") or Path.home() / ".config")
    return systemd_unit(folders, sys.executable, config)


def systemd_unit(folders: Sequence[Path], python: str, config: Path) -> LoginStart:
    """A systemd user unit (systemd.service(5), systemd.unit(5))."""
    command = " ".join(_systemd_quoted(word) for word in _command(python, folders))
    text = f"""[Unit]
Description=savefit: fits workbooks when they are saved

[Service]
ExecStart={command}
Restart=on-failure
RestartSec=10
Nice=5
KillSignal=SIGTERM
TimeoutStopSec=60

[Install]
WantedBy=default.target
"""
    unit = f"{NAME}.service"
    control = ("systemctl", "--user")
    on = ((*control, "daemon-reload"), (*control, "enable", unit), (*control, "restart", unit))
    return LoginStart("systemd", config / "systemd" / "user" / unit, text, on, ((*control, "disable", "--now", unit),))


def launchd_agent(folders: Sequence[Path], python: str, home: Path, user: int) -> LoginStart:
    """A launchd agent (launchd.plist(5))."""
    label = f"{NAME}.watch"
    agent = {
        "Label": label,
        "ProgramArguments": _command(python, folders),
        "RunAtLoad": True,
        "KeepAlive": {"SuccessfulExit": False},
        "ProcessType": "Background",
    }
    path = home / "Library" / "LaunchAgents" / f"{label}.plist"
    off = ("launchctl", "bootout", f"gui/{user}/{label}")
    on = ("launchctl", "bootstrap", f"gui/{user}", str(path))
    return LoginStart("launchd", path, plistlib.dumps(agent).decode(), (on,), (off,))


def scheduled_task(folders: Sequence[Path], python: str, local: Path) -> LoginStart:
    """A task of the Windows task scheduler (its task schema 1.2), started when the user logs on."""
    program, *words = _command(python, folders)
    windowless = Path(program).with_name("pythonw.exe")
    text = f"""<?xml version="1.0" encoding="UTF-16"?>
<Task version="1.2" xmlns="http://schemas.microsoft.com/windows/2004/02/mit/task">
  <RegistrationInfo><Description>savefit: fits workbooks when they are saved</Description></RegistrationInfo>
  <Triggers><LogonTrigger><Enabled>true</Enabled></LogonTrigger></Triggers>
  <Settings>
    <MultipleInstancesPolicy>IgnoreNew</MultipleInstancesPolicy>
    <DisallowStartIfOnBatteries>false</DisallowStartIfOnBatteries>
    <StopIfGoingOnBatteries>false</StopIfGoingOnBatteries>
    <ExecutionTimeLimit>PT0S</ExecutionTimeLimit>
    <RestartOnFailure><Interval>PT1M</Interval><Count>3</Count></RestartOnFailure>
  </Settings>
  <Actions>
    <Exec>
      <Command>{escape(str(windowless))}</Command>
      <Arguments>{escape(subprocess.list2cmdline(words))}</Arguments>
    </Exec>
  </Actions>
</Task>
"""
    path = local / NAME / "log-in task.xml"
    on = ("schtasks", "/Create", "/TN", NAME, "/XML", str(path), "/F")
    off = ("schtasks", "/Delete", "/TN", NAME, "/F")
    return LoginStart("task scheduler", path, text, (on, ("schtasks", "/Run", "/TN", NAME)), (off,), "utf-16")


def install(start: LoginStart) -> int:
    """Write the file and switch it on; says what was done. Returns the exit code."""
    start.path.parent.mkdir(parents=True, exist_ok=True)
    start.path.write_text(start.text, encoding=start.encoding)
    print(f"Written: {start.path}")
    if _run(start.switch_on):
        print("The watcher runs now and will start at each log-in. 'savefit keep-running --remove' ends that.")
        return 0
    return 1


def remove(start: LoginStart) -> int:
    """Switch it off and delete the file. Returns the exit code."""
    if not start.path.exists():
        print("Nothing was set up, so there is nothing to remove.")
        return 0
    done = _run(start.switch_off)
    start.path.unlink()
    print(f"Removed: {start.path}")
    return 0 if done else 1


def _run(commands: Sequence[Sequence[str]]) -> bool:
    for command in commands:
        try:
            ended = subprocess.run(command, capture_output=True, text=True, check=False, timeout=60)
        except (OSError, subprocess.TimeoutExpired) as problem:
            print(f"'{' '.join(command)}' could not be run: {problem}", file=sys.stderr)
            return False
        if ended.returncode:
            print(f"'{' '.join(command)}' answered: {(ended.stderr or ended.stdout).strip()}", file=sys.stderr)
            return False
    return True


def _command(python: str, folders: Sequence[Path]) -> list[str]:
    return [python, "-m", "bridge", "watch", *(str(folder) for folder in folders)]


def _systemd_quoted(word: str) -> str:
    escaped = word.replace("\\", "\\\\").replace('"', '\\"').replace("%", "%%").replace("$", "$$")
    return f'"{escaped}"'
