"""Windows and macOS as far as their documented contracts go: the same protocol over calls that may stop half-way.

The calls are played by real renames in a real folder, taken apart into the steps the documentation names. At every
step a save may come in, the step may fail, or the process may be killed.
"""

import errno
import os
import sys
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bridge.files import beside, claim, recovery, replace, swap, swap_macos, swap_windows, writeback
from bridge.files.recovery import recover
from bridge.files.snapshot import NotWhole, read
from bridge.files.swap_macos import MacKernel, MacSystem
from bridge.files.swap_windows import (
    ACCESS_DENIED,
    FILE_NOT_FOUND,
    LOCK_VIOLATION,
    SHARING_VIOLATION,
    UNABLE_TO_MOVE_REPLACEMENT,
    UNABLE_TO_MOVE_REPLACEMENT_2,
    UNABLE_TO_REMOVE_REPLACED,
    WindowsKernel,
    WindowsSystem,
)
from bridge.files.writeback import write_back
from bridge.messages import FileRefused
from tests.stress.zips import look, saved, with_result

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="plays the other systems over POSIX renames")

SAVE, KILL = "a save comes in", "killed"


class Script:
    """What happens at which step: {step number: action}. Actions are SAVE, KILL or an error code."""

    def __init__(self, book: Path, actions: dict[int, object]) -> None:
        self.book, self.actions, self.step, self.number = book, actions, 0, 1

    def next(self) -> int:
        """One step: an error code, or 0."""
        self.step += 1
        action = self.actions.get(self.step, 0)
        if action == SAVE:
            self.number += 1
            with self.book.with_suffix(".tally").open("ab") as tally:
                tally.write(b"|")
            aside = self.book.with_name("CEDD4100")
            aside.write_bytes(saved(self.number))
            os.replace(aside, self.book)
            return 0
        if action == KILL:
            os._exit(9)
        return int(action)


class PlayedWindows(WindowsKernel):
    """ReplaceFileW in its documented steps: open, give the backup name, give the replacement the name."""

    def __init__(self, script: Script) -> None:
        self.script = script

    def replace_file(self, replaced, replacement, backup):
        code = self.script.next()
        if code:  # the files could not be opened: nothing has happened
            return code if code != UNABLE_TO_MOVE_REPLACEMENT_2 else SHARING_VIOLATION
        if not replaced.exists() or not replacement.exists():
            return FILE_NOT_FOUND
        code = self.script.next()
        if code:
            return UNABLE_TO_REMOVE_REPLACED
        try:
            os.replace(replaced, backup)
        except FileNotFoundError:
            return FILE_NOT_FOUND
        code = self.script.next()
        if code == UNABLE_TO_MOVE_REPLACEMENT:  # with a backup name: everything is put back
            if not replaced.exists():
                os.rename(backup, replaced)
            return UNABLE_TO_MOVE_REPLACEMENT
        if code or replaced.exists():  # a save took the name in between
            return UNABLE_TO_MOVE_REPLACEMENT_2
        os.rename(replacement, replaced)
        self.script.next()
        return 0

    def move_file(self, source, to):
        code = self.script.next()
        if code:
            return ACCESS_DENIED
        if to.exists():
            return 183
        os.rename(source, to)
        self.script.next()
        return 0


class PlayedMac(MacKernel):
    """renamex_np with RENAME_SWAP: one step that happens or does not."""

    def __init__(self, script: Script) -> None:
        self.script = script

    def rename_swap(self, first, second):
        code = self.script.next()
        if code:
            return code
        if not second.exists() or not first.exists():
            return errno.ENOENT
        between = first.with_name("between")
        os.rename(second, between)
        os.rename(first, second)
        os.rename(between, first)
        self.script.next()
        return 0

    def copy_metadata(self, source, to):
        return 0


class Clock:
    """Time passes only by sleeping."""

    def __init__(self) -> None:
        self.now = 0.0

    def sleep(self, seconds: float) -> None:
        self.now += seconds

    def __call__(self) -> float:
        return self.now


def played(kind: str, script: Script):
    if kind == "windows":
        clock = Clock()
        return WindowsSystem(PlayedWindows(script), clock.sleep, clock)
    return MacSystem(PlayedMac(script))


@pytest.fixture(autouse=True)
def no_waiting(monkeypatch):
    monkeypatch.setattr(recovery, "_HALF_WRITTEN_AGE_S", -1.0)
    monkeypatch.setattr(recovery, "_NAMELESS_AGE_S", -1.0)
    monkeypatch.setattr(claim, "_UNREADABLE_EXPIRY", -1.0)
    monkeypatch.setattr(replace, "_how_long", lambda *_: replace._Keeping(0.005, then_delete=True))


def on(monkeypatch, system):
    for module in (writeback, recovery, beside):
        monkeypatch.setattr(module, "this_system", lambda: system)


def attempt(book: Path, **options) -> str:
    seen = read(book)
    try:
        return str(write_back(seen, with_result(seen.data), **options).kind)
    except FileRefused as refusal:
        return refusal.problem.key


def in_child(work) -> int:
    child = os.fork()
    if child == 0:
        try:
            work()
        except BaseException as error:
            print(repr(error), file=sys.stderr)
            os._exit(1)
        os._exit(0)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


CODES = {
    "windows": [
        ACCESS_DENIED, SHARING_VIOLATION, LOCK_VIOLATION, UNABLE_TO_REMOVE_REPLACED, UNABLE_TO_MOVE_REPLACEMENT,
        UNABLE_TO_MOVE_REPLACEMENT_2, 112,
    ],
    "mac": [errno.ENOTSUP, errno.EPERM, errno.EACCES, errno.EXDEV, errno.ENOSPC],
}  # fmt: skip


@pytest.mark.parametrize("kind", ["windows", "mac"])
@settings(deadline=None, max_examples=150, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_whatever_happens_the_newest_save_survives(tmp_path_factory, monkeypatch, kind, data):
    folder = tmp_path_factory.mktemp("played")
    book = folder / "book.xlsx"
    book.write_bytes(saved(1))
    action = st.sampled_from([SAVE, SAVE, KILL, *CODES[kind]])
    actions = data.draw(st.dictionaries(st.integers(1, 14), action, max_size=4))

    def work():
        on(monkeypatch, played(kind, Script(book, actions)))
        attempt(book)

    code = in_child(work)
    assert code in (0, 9), "the child failed by itself"
    on(monkeypatch, played(kind, Script(book, {})))
    recover(folder)
    tally = book.with_suffix(".tally")
    number = len(tally.read_bytes()) + 1 if tally.exists() else 1
    tally.unlink(missing_ok=True)
    assert look(book) in ((number, None), (number, number)), actions
    assert os.listdir(folder) == ["book.xlsx"], actions


@pytest.fixture
def book(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(saved(1))
    return path


class TestWindows:
    @pytest.mark.parametrize("code", [ACCESS_DENIED, SHARING_VIOLATION, LOCK_VIOLATION])
    def test_let_go_within_moments(self, book, tmp_path, monkeypatch, code):
        on(monkeypatch, played("windows", Script(book, {1: code, 2: code})))
        assert attempt(book) == "written"
        assert look(book) == (1, 1)
        assert os.listdir(tmp_path) == ["book.xlsx"]

    def test_held_gets_a_copy_beside_or_waits(self, book, tmp_path, monkeypatch):
        for wish, kind in (("wait", "waiting"), ("write", "waiting"), ("auto", "beside")):
            system = played("windows", Script(book, dict.fromkeys(range(1, 99), SHARING_VIOLATION)))
            on(monkeypatch, system)
            assert attempt(book, while_open=wish) == kind
            assert look(book) == (1, None)
        assert look(tmp_path / "book - fit.xlsx") == (1, 1)
        on(monkeypatch, played("windows", Script(book, {})))
        assert attempt(book) == "written"
        assert os.listdir(tmp_path) == ["book.xlsx"]

    def test_stopped_half_way_is_undone(self, book, tmp_path, monkeypatch):
        on(monkeypatch, played("windows", Script(book, {3: UNABLE_TO_MOVE_REPLACEMENT_2})))
        assert attempt(book) == "written"
        assert look(book) == (1, 1)
        assert os.listdir(tmp_path) == ["book.xlsx"]

    def test_disk_full_is_said(self, book, monkeypatch):
        on(monkeypatch, played("windows", Script(book, {1: 112})))
        assert attempt(book) == "no-space"

    def test_marks_are_not_believed_when_the_system_itself_refuses(self, book, monkeypatch):
        book.with_name("~$book.xlsx").write_bytes(b"\3Ann" + b" " * 161)
        on(monkeypatch, played("windows", Script(book, {})))
        assert attempt(book) == "written"


class TestMac:
    def test_volume_without_swapping(self, book, tmp_path, monkeypatch):
        on(monkeypatch, played("mac", Script(book, {1: errno.ENOTSUP})))
        assert attempt(book) == "written"
        assert look(book) == (1, 1)
        assert os.listdir(tmp_path) == ["book.xlsx"]

    def test_name_gone(self, book, tmp_path, monkeypatch):
        system = played("mac", Script(book, {}))
        on(monkeypatch, system)
        seen = read(book)
        book.unlink()
        assert write_back(seen, with_result(seen.data)).kind == "changed"
        assert os.listdir(tmp_path) == []

    def test_metadata_that_cannot_be_copied_is_said(self, book, monkeypatch):
        kernel = PlayedMac(Script(book, {}))
        monkeypatch.setattr(kernel, "copy_metadata", lambda *_: errno.EPERM)
        on(monkeypatch, MacSystem(kernel))
        assert attempt(book) == "not-permitted"
        assert look(book) == (1, None)


def test_each_system_has_its_module(monkeypatch):
    for platform, module in (("win32", swap_windows.WindowsSystem), ("darwin", swap_macos.MacSystem)):
        monkeypatch.setattr(sys, "platform", platform)
        monkeypatch.setattr(swap_macos, "MacKernel", lambda: None)
        assert isinstance(swap.this_system.__wrapped__(), module)
    monkeypatch.setattr(sys, "platform", "freebsd14")
    system = swap.this_system.__wrapped__()
    assert type(system).__name__ == "LinkSystem"


def test_reading_while_windows_holds_it_may_pass(book, monkeypatch):
    from bridge.files import snapshot

    def held(*_):
        raise PermissionError(13, "sharing violation")

    monkeypatch.setattr(snapshot, "opened", held)
    monkeypatch.setattr(snapshot.sys, "platform", "win32")
    with pytest.raises(NotWhole):
        read(book)
