"""Putting a workbook's new version into its place, as far as those who have it open allow.

write_back(snapshot, new, while_open)   an Outcome, or FileRefused
  written     it stands; `note` says what people should know (open elsewhere: how to see it)
  changed     somebody saved meanwhile, nothing was written: begin again from the new save
  beside      a program keeps it from being replaced: the results are in a copy next to it (`path`)
  waiting     likewise, and nothing was written: begin again when it is closed
"""

from __future__ import annotations

import errno
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path

from bridge.files import beside, claim, openness, writable
from bridge.files.fingerprint import Fingerprint
from bridge.files.openness import Holder
from bridge.files.replace import replace
from bridge.files.snapshot import Snapshot, reason
from bridge.files.swap import Gone, Held, System, this_system
from bridge.messages import FileRefused, Problem, say

_CLAIM_WAIT_S = 10.0


class Kind(StrEnum):
    """How it ended."""

    WRITTEN = "written"
    CHANGED = "changed"
    BESIDE = "beside"
    WAITING = "waiting"


class WhileOpen(StrEnum):
    """What to do with a workbook that a program has open."""

    AUTO = "auto"
    WRITE = "write"
    WAIT = "wait"
    BESIDE = "beside"


@dataclass(frozen=True, slots=True)
class Outcome:
    """How it ended, a sentence for people, the new file's fingerprint, and the copy's path."""

    kind: Kind
    note: str = ""
    fingerprint: Fingerprint | None = None
    path: Path | None = None


def write_back(snapshot: Snapshot, new: bytes, while_open: str = "auto") -> Outcome:
    """Replace the workbook that was read as `snapshot` by `new`. Nothing is ever written in place.

    Raises FileRefused: hard-linked, read-only, a folder that cannot be written, no space, and the like; ValueError
    for an unknown `while_open`.
    """
    wish, system = WhileOpen(while_open), this_system()
    try:
        writable.refuse_unwritable(snapshot.path, snapshot.real)
        with claim.claimed(snapshot.real, wait=_CLAIM_WAIT_S):
            return _write(snapshot, new, wish, system)
    except claim.Claimed as other:
        user, host = (other.owner.user, other.owner.host) if other.owner else ("somebody", "another machine")
        raise FileRefused(say("claimed-elsewhere", name=snapshot.path.name, user=user, host=host)) from None
    except (Gone, FileNotFoundError):
        return Outcome(Kind.CHANGED)
    except OSError as error:
        raise FileRefused(_refusal(error, snapshot)) from error


def _write(snapshot: Snapshot, new: bytes, wish: WhileOpen, system: System) -> Outcome:
    holder = openness.holder(snapshot.real, system)
    if not _may_write(holder, wish, system):
        return _not_now(snapshot, new, holder, wish, system)
    try:
        done = replace(snapshot.seen, new, holder, system)
    except Held:
        return _not_now(snapshot, new, holder, wish, system)
    if done is None:
        return Outcome(Kind.CHANGED)
    beside.remove_copy(snapshot.real, system)
    return Outcome(Kind.WRITTEN, _note(holder, done.owner_kept), done.fingerprint)


def _may_write(holder: Holder | None, wish: WhileOpen, system: System) -> bool:
    if holder is None or wish is WhileOpen.WRITE:
        return True
    return wish is WhileOpen.AUTO and (not holder.locks or system.refuses_when_held)


def _not_now(snapshot: Snapshot, new: bytes, holder: Holder | None, wish: WhileOpen, system: System) -> Outcome:
    """The workbook cannot be replaced, or is not meant to be, while it is open."""
    program = holder.program if holder is not None else openness.OTHER_PROGRAM
    if wish in (WhileOpen.AUTO, WhileOpen.BESIDE):
        try:
            path = beside.put_beside(snapshot, new, system)
        except (Held, OSError):
            pass  # not even that: wait
        else:
            return Outcome(Kind.BESIDE, say("beside-while-open", program=program, copy=path.name).text, path=path)
    return Outcome(Kind.WAITING, say("waiting-while-open", program=program).text)


def _note(holder: Holder | None, owner_kept: bool) -> str:
    said = []
    if holder is not None:
        said.append(say("written-while-open", program=holder.program).text)
    if not owner_kept:
        said.append(say("owner-not-kept").text)
    return " ".join(said)


def _refusal(error: OSError, snapshot: Snapshot) -> Problem:
    """What a system's error means for the person whose workbook it is."""
    name, folder = snapshot.path.name, snapshot.real.parent
    if error.errno in (errno.ENOSPC, errno.EDQUOT):
        return say("no-space", name=name, folder=folder)
    if error.errno in (errno.EACCES, errno.EPERM):
        return say("not-permitted", name=name, folder=folder)
    if error.errno == errno.EROFS:
        return say("folder-read-only", name=name, folder=folder)
    if error.errno == errno.ENAMETOOLONG:
        return say("name-too-long", name=name, folder=folder)
    if error.errno in (errno.EXDEV, errno.EBUSY):
        return say("mounted-alone", name=name)
    return say("write-failed", name=name, reason=reason(error))
