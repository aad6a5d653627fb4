"""The story of one save, in a page: read once, understand, take the rows, fit and examine, lay out, graft, swap in.

`fit_workbook` is the door for programs, the command line and the watcher's workers alike.
"""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from datetime import datetime
from enum import StrEnum
from pathlib import Path

import numpy as np

from bridge import __version__
from bridge.files.fingerprint import Fingerprint
from bridge.files.snapshot import read
from bridge.files.writeback import Kind, write_back
from bridge.files.writeback import Outcome as Put
from bridge.messages import FileRefused, Problem, Severity, say
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.package.strip import strip
from bridge.page.cells import Formula
from bridge.page.sheet import Sheet
from bridge.regression import nested
from bridge.regression.core import fit_model
from bridge.regression.errors import RegressionError
from bridge.regression.results import ModelResult
from bridge.sheets import suite
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook import examine, grid, reading, refusal, selection, understand
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.digest import digest
from bridge.workbook.request import ModelRequest, Request
from bridge.workbook.tables import Table

REQUEST = "fit request"
DIGEST = "digest"
MOST_REDONE = 5
_LARGEST = 1e150


class Outcome(StrEnum):
    """How one workbook's turn ended."""

    FITTED = "fitted"
    LAID_OUT = "laid out"  # an empty request became a grid
    UNCHANGED = "unchanged"  # nothing a fit depends on has changed: nothing was written
    NO_REQUEST = "no request"
    REFUSED = "refused"
    WAITING = "waiting"  # made, and put in when the workbook is closed
    BESIDE = "beside"  # made, and standing in a copy next to the workbook
    CHANGED = "changed"  # saved again and again meanwhile: the next quiet moment takes it up


@dataclass(frozen=True, slots=True)
class Report:
    """What became of one workbook. `stages` are seconds per part of the story, in order."""

    path: Path
    outcome: Outcome
    message: str = ""
    models: tuple[ModelSheet, ...] = ()
    problems: tuple[Problem, ...] = ()
    stages: Mapping[str, float] = field(default_factory=dict)
    fingerprint: Fingerprint | None = None

    @property
    def all_problems(self) -> tuple[Problem, ...]:
        """The workbook's problems, then each model's."""
        return (*self.problems, *(problem for model in self.models for problem in model.problems))

    @property
    def exit_code(self) -> int:
        """0 all well, 1 something was answered with a problem, 2 the file cannot be used."""
        if self.outcome is Outcome.REFUSED:
            return 2
        return int(any(problem.severity is not Severity.NOTE for problem in self.all_problems))


@dataclass(frozen=True, slots=True)
class Made:
    """The new bytes of a workbook (None: nothing to write) and what to report."""

    data: bytes | None
    outcome: Outcome
    models: tuple[ModelSheet, ...] = ()
    problems: tuple[Problem, ...] = ()


class Stages:
    """Seconds spent in each part of the story, for the benchmark and the log."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}

    @contextmanager
    def part(self, name: str) -> Iterator[None]:
        """Time one part; the same name adds up."""
        start = time.perf_counter()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - start


def fit_workbook(
    path: Path | str, while_open: str = "auto", note: str = "", write: bool = True, always_fit: bool = False
) -> Report:
    """Do what the workbook's `fit request` asks and put the result sheets into it.

    `while_open` says what to do when a program holds the workbook open (`auto`, `write`, `wait`, `beside`).
    `note` is a sentence from the watcher to show in the request's status. With `write` False nothing is written.
    With `always_fit` the models are fitted for the report even where nothing has changed since the last fit.
    A file that cannot be used comes back as a refused report; nothing is raised for bad input.

    >>> from pathlib import Path
    >>> from bridge import samples
    >>> path = Path("readings.xlsx")
    >>> size = path.write_bytes(samples.template("calibration"))
    >>> report = fit_workbook(path)
    >>> report.outcome.value, report.exit_code
    ('fitted', 0)
    >>> round(report.models[0].result.fit.r_squared, 4) > 0.99
    True
    """
    path = Path(path)
    stages = Stages()
    problems = (say("watcher-note", note=note),) if note else ()
    try:
        for _ in range(MOST_REDONE):
            with stages.part("read"):
                snapshot = read(path)
            made = remake(snapshot.data, datetime.now(), stages, problems, always_fit)
            if made.data is None or not write:
                return _report(path, made, stages)
            with stages.part("swap"):
                put = write_back(snapshot, made.data, while_open)
            if put.kind != Kind.CHANGED:
                outcome = made.outcome if put.kind == Kind.WRITTEN else Outcome(put.kind.value)
                return _report(path, replace(made, outcome=outcome), stages, put)
        return _report(path, replace(made, outcome=Outcome.CHANGED), stages)
    except FileRefused as refusal:
        return Report(path, Outcome.REFUSED, refusal.problem.text, (), (refusal.problem,), stages.seconds)


def fit_file(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """The same for the watcher's workers: plain values in and out. Raises FileRefused, so that the watcher is told."""
    report = fit_workbook(path, while_open, note)
    if report.outcome is Outcome.REFUSED:
        raise FileRefused(report.problems[0])
    fitted = [model.name for model in report.models if model.result is not None]
    refused = [model.name for model in report.models if model.result is None]
    said = [f"Models: {', '.join(fitted)}"] * bool(fitted) + [f"not fitted: {', '.join(refused)}"] * bool(refused)
    return {
        "outcome": report.outcome.value,
        "message": "; ".join([*said, *([report.message] if report.message else [])]),
        "fingerprint": report.fingerprint,
        "stages": dict(report.stages),
    }


def remake(
    data: bytes, now: datetime, stages: Stages, problems: tuple[Problem, ...] = (), always_fit: bool = False
) -> Made:
    """From a workbook's bytes to its new bytes: the whole story but the file. Raises FileRefused."""
    with stages.part("open"):
        package = Package.open(data)
    with stages.part("cells"):
        contents = reading.read(data, package)
    if REQUEST not in contents.own:
        return Made(None, Outcome.NO_REQUEST)
    adopt = _adoptable(package, contents)
    with stages.part("request"):
        request = _understood(contents.own[REQUEST], contents)
        state = digest(__version__, request, contents.tables, suite.typed(contents.own))
    standing = {entry.ours for entry in package.sheets} >= suite.expected(request)
    unchanged = standing and package.state.get(DIGEST) == state and not problems
    if unchanged and not always_fit:
        return Made(None, Outcome.UNCHANGED, problems=request.problems)
    models = tuple(_fitted(model, contents.tables, stages) for model in request.models)
    if unchanged:
        return Made(None, Outcome.UNCHANGED, models, request.problems)
    book = _book(package, contents, request, models, problems, now, stages)
    with stages.part("lay out"):
        sheets = suite.lay_out(book)
        names = suite.defined_names(book)
    with stages.part("graft"):
        new = graft(package, sheets, names, {DIGEST: _digest_after(sheets, contents)}, adopt=adopt)
    outcome = Outcome.FITTED if request.models else Outcome.LAID_OUT
    return Made(new if new != data else None, outcome, models, book.problems)


# --- one model ---------------------------------------------------------------------------------


def _fitted(model: ModelRequest, tables: Mapping[str, Table], stages: Stages) -> ModelSheet:
    """Take the model's rows and fit it; what stands in the way becomes its problems."""
    table = tables.get(model.sheet) if model.sheet is not None else None
    if model.spec is None or table is None:
        return ModelSheet(model, table, None, None, model.problems)
    with stages.part("rows"):
        taken, observations, found = selection.take(table, model)
    problems = (*model.problems, *found)
    if any(problem.severity is Severity.REFUSAL for problem in problems):
        return ModelSheet(model, table, taken, None, problems)
    try:
        with stages.part("fit"), np.errstate(all="ignore"):  # what breaks down is told in words
            result: ModelResult | None = _workable(fit_model(model.spec, observations))
    except RegressionError as error:
        result, problems = None, (*problems, refusal.explain(error, model, table, taken))
    except (ArithmeticError, ValueError) as error:
        # Numbers at the edge of what doubles hold: one such model must not keep the others from their results.
        result, problems = None, (*problems, refusal.explain_breakdown(error, model))
    return ModelSheet(model, table, taken, result, problems)


def _workable(result: ModelResult) -> ModelResult:
    """The result, if its figures can be squared, as the sheets must. Raises OverflowError."""
    fit = result.fit
    for figures in (fit.coefficients, fit.standard_errors, (fit.residual_sd,)):
        if any(abs(figure) > _LARGEST for figure in figures):
            raise OverflowError
    return result


# --- around the fit ----------------------------------------------------------------------------


def _adoptable(package: Package, contents: Contents) -> frozenset[str]:
    """Tabs without our mark that may become ours: a `fit request` that is empty or has the grid's labels."""
    raw = contents.own.get(REQUEST)
    if package.of_role(REQUEST) is not None or raw is None:
        return frozenset()
    if (raw.values or raw.formulas) and not grid.looks_like_request(raw):
        raise FileRefused(say("sheet-not-ours", sheet=raw.name))
    return frozenset({raw.name})


def _book(
    package: Package,
    contents: Contents,
    request: Request,
    models: tuple[ModelSheet, ...],
    problems: tuple[Problem, ...],
    now: datetime,
    stages: Stages,
) -> Book:
    """Everything the sheets are laid out from."""
    with stages.part("compare"):
        compared = nested.compare({model.name: model.result for model in models if model.result is not None})
        findings = {
            name: examine.examine(table, [model for model in request.models if model.sheet == name])
            for name, table in contents.tables.items()
        }
    titles = {entry.ours: entry.name for entry in package.sheets if entry.ours is not None}
    if REQUEST not in titles and REQUEST in contents.own:
        titles[REQUEST] = contents.own[REQUEST].name
    return Book(
        fitted_at=now.replace(microsecond=0),
        request=request,
        tables=contents.tables,
        models=models,
        nested=compared,
        cases=suite.cases(contents.own),
        history=suite.history_lines(contents.own),
        choices=suite.choices(contents.own),
        titles=titles,
        problems=(*problems, *request.problems),
        findings=findings,
    )


def _understood(raw: RawSheet, contents: Contents) -> Request:
    return understand.understand(grid.read(raw), contents.tables, contents.sheet_names, contents.unread)


def _digest_after(sheets: tuple[Sheet, ...], contents: Contents) -> str:
    """The digest of the workbook as it is about to be: its request and entries read back from the new layout."""
    own = {sheet.name: _read_back(sheet) for sheet in sheets if sheet.name in suite.WITH_ENTRIES}
    request = _understood(own[REQUEST], contents)
    return digest(__version__, request, contents.tables, suite.typed(own))


def _read_back(sheet: Sheet) -> RawSheet:
    values, formulas = {}, {}
    for at, cell in sheet.cells.items():
        value = cell.value.value if isinstance(cell.value, Formula) else cell.value
        if isinstance(cell.value, Formula):
            formulas[at] = cell.value.text
        if value is not None and value != "":
            values[at] = float(value) if isinstance(value, int) and not isinstance(value, bool) else value
    return RawSheet(sheet.title or sheet.name, values, formulas)


def _report(path: Path, made: Made, stages: Stages, put: Put = Put(Kind.WRITTEN)) -> Report:  # noqa: B008 (frozen)
    return Report(path, made.outcome, put.note, made.models, made.problems, stages.seconds, put.fingerprint)


# --- handing on --------------------------------------------------------------------------------


def strip_workbook(path: Path | str) -> bool:
    """Take our sheets, names and styles out again; whether there was anything of ours. Raises FileRefused."""
    for _ in range(MOST_REDONE):
        snapshot = read(Path(path))
        bare = strip(Package.open(snapshot.data))
        if bare == snapshot.data:
            return False
        if write_back(snapshot, bare, "auto").kind == Kind.WRITTEN:
            return True
    raise FileRefused(say("saved-again-and-again", name=Path(path).name))
