"""What the bridge answers at the foot of the request: a headline under each model, then its problems one by one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from bridge.messages import Problem, Severity, say
from bridge.page.cells import Format, quoted
from bridge.sheets import style, words
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook.places import request_cell
from bridge.workbook.ranking import most_useful_first

_MOST = 8  # messages under a model, the headline's own included
_MOST_GENERAL = 6
_LOOK = "Please check: "


@dataclass(frozen=True, slots=True)
class Answer:
    """One cell of the status block: its text, how it looks, and the cell it leads to (empty: none)."""

    text: str
    look: Format
    location: str = ""


_ANSWER = replace(style.PARAGRAPH, indent=1)
_LOOKS: Mapping[Severity, Format] = {
    Severity.REFUSAL: replace(_ANSWER, color=style.ALERT),
    Severity.WARNING: _ANSWER,
    Severity.NOTE: replace(_ANSWER, color=style.QUIET),
}


def of_model(book: Book, model: ModelSheet) -> tuple[Answer, ...]:
    """The headline with the most useful message, then the others, each with its own cell to go to."""
    problems = list(most_useful_first(model.problems))
    first = problems.pop(0) if problems else None
    headline = _headline(book, model)
    if first is None:
        return (Answer(headline, _ANSWER),)
    refused = model.result is None
    joined = f"{headline} {first.text}" if refused else f"{headline}\n{_text(first)}"
    look = _LOOKS[Severity.REFUSAL] if refused else _ANSWER
    answers = [Answer(joined, look, _location(book, first))]
    shown = problems if len(problems) < _MOST else problems[: _MOST - 2]
    answers += [Answer(_text(problem), _LOOKS[problem.severity], _location(book, problem)) for problem in shown]
    if len(shown) < len(problems):
        sheet = book.title("fit diagnostics")
        rest = say("more-notes", count=len(problems) - len(shown), sheet=f'"{sheet}"')
        answers.append(Answer(rest.text, _LOOKS[Severity.NOTE], f"{quoted(sheet)}!A1"))
    return tuple(answers)


def of_workbook(book: Book) -> tuple[Answer, ...]:
    """What concerns no single model."""
    problems = most_useful_first((*book.problems, *book.request.problems))[:_MOST_GENERAL]
    return tuple(Answer(_text(problem), _LOOKS[problem.severity], _location(book, problem)) for problem in problems)


def _headline(book: Book, model: ModelSheet) -> str:
    if model.result is None or model.taken is None:
        return say("not-fitted").text
    used = words.number(len(model.taken.used))
    rows = words.number(len(model.taken.used) + len(model.taken.left_out))
    return say("fitted", when=words.moment(book.fitted_at), used=used, rows=rows).text


def _text(problem: Problem) -> str:
    """A message; a warning says that it wants a look, in words and not by colour alone."""
    return f"{_LOOK}{problem.text}" if problem.severity is Severity.WARNING else problem.text


def _location(book: Book, problem: Problem) -> str:
    """Where a message's link leads; the request's own tab may have another name."""
    cell = problem.cell or ""
    ours = request_cell("")
    if cell.startswith(ours):
        return f"{quoted(book.title('fit request'))}!{cell.removeprefix(ours)}"
    return cell if "!" in cell else ""
