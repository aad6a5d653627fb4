"""Every message to people, in one place: what is wrong, where, and what to do.

    Problem            one thing said to the user, with the cell it is about
      REFUSAL          the model (or the file) was not fitted because of it
      WARNING          it was fitted, and the user should look at this
      NOTE             said for completeness; nobody needs to act

    FileRefused        the file as a whole cannot be used; carries its Problem

Rooms raise or return problems by their key in `CATALOGUE`; nothing else holds wording.
Imports nothing of ours.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Severity(StrEnum):
    """How much a message weighs."""

    REFUSAL = "refusal"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True)
class Problem:
    """One message: its key in the catalogue, weight, full text, the cell it names, the model it concerns."""

    key: str
    severity: Severity
    text: str
    cell: str | None = None
    model: str | None = None


class FileRefused(Exception):
    """A file that cannot be used as it is; `problem` says why and what to do. Nothing was written."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.text)
        self.problem = problem


_R, _W, _N = Severity.REFUSAL, Severity.WARNING, Severity.NOTE

CATALOGUE: dict[str, tuple[Severity, str]] = {
    # key: (severity, wording with {fields}); grouped by the room that says it.
}


def say(key: str, *, cell: str | None = None, model: str | None = None, **fields: object) -> Problem:
    """The catalogue's message `key` with its fields filled in.

    Raises KeyError for a key or a field that the catalogue does not have.
    """
    severity, wording = CATALOGUE[key]
    if cell is not None:
        fields["cell"] = cell
    return Problem(key, severity, wording.format(**fields), cell, model)
