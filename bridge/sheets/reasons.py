"""Why this number: for a chosen case and model, what each term adds to (or multiplies) the estimate of an average case.

On the scale of the fit a term adds the sum of b (x - mean of x) over its columns. From a log response that is a factor;
from a root it is told as what the estimate gains at that step, which depends on the order of the steps. The steps of
every model are computed in hidden columns; the visible lines pick those of the model chosen.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Format, Formula, Value, address, reference
from bridge.page.sheet import DropDown
from bridge.regression.estimates import mean_in_units
from bridge.sheets import backwards, case_formulas, case_values, cases, coefficients, figures, live, style, words
from bridge.sheets.book import Book
from bridge.sheets.case_values import COMPLETE, Evaluated
from bridge.sheets.cases import FIRST_ROW, HEADER_ROW, ModelColumns, Plan
from bridge.sheets.paper import Paper
from bridge.workbook.contents import Choices, RawSheet
from bridge.workbook.request import Scalar
from bridge.workbook.tables import Kind

TITLE = "Why this number"
SO_FAR = "so far"
HEADS = ("step", "adds", "times", SO_FAR, "this case", "average")
AVERAGE_CASE = "a case at the averages"
_CHOOSE = "choose a case that has an estimate"
_WIDTHS = (34.0, 15.0, 13.0, 15.0, 15.0, 15.0)
_INPUT = replace(style.INPUT, align="left")
_SMALL = replace(style.NUMBER, color=style.QUIET, size=8.0)

Array = NDArray[np.float64]


def widths(plan: Plan) -> dict[int, float]:
    """Column widths of the block."""
    return {plan.why + at: width for at, width in enumerate(_WIDTHS)}


def read_choices(raw: RawSheet) -> Choices:
    """What the user chose and typed in the block and under it, found by its labels."""
    title = next((at for at, value in sorted(raw.values.items()) if value == TITLE), None)
    case: Scalar | None = None
    model = ""
    if title is not None:
        case = raw.values.get((title[0] + 1, title[1] + 1))
        model = case_values.as_text(raw.values.get((title[0] + 2, title[1] + 1), ""))
    return Choices(case, model, backwards.read(raw))


def put_down(book: Book, paper: Paper, plan: Plan, evaluated: Mapping[str, Evaluated]) -> int:
    """The block, from the row above the case table's header down, in its own columns; the row after it."""
    if not plan.models:
        return HEADER_ROW
    model, name = _default(book, plan, evaluated)
    _put_choice(paper, plan, model, name)
    names = [case.name for case in book.cases]
    line = len(names) - names[::-1].index(name) if name != "" and name in names else _numbered(name, plan)
    chosen = _Chosen(plan, plan.models.index(model), line, evaluated)
    block = _Block(book, paper, plan, chosen)
    block.put_working()
    block.put_lines()
    row = block.top + block.steps + 2
    note = "Steps are against a case at the averages of the rows used. Their order does not change what each adds."
    paper.put(plan.why, note, replace(style.SUBTITLE, size=8.0), row)
    return row


def _default(book: Book, plan: Plan, evaluated: Mapping[str, Evaluated]) -> tuple[ModelColumns, Scalar]:
    """The user's choice where it still holds, else the first model and the first case that has an estimate."""
    wanted = book.choices.model.strip().casefold()
    chosen = next((m for m in plan.models if m.model.name.casefold() == wanted), plan.models[0])
    if book.choices.case is not None:
        return chosen, book.choices.case
    done = evaluated[chosen.model.name].state
    names = [case.name for case in book.cases]
    return chosen, next(
        (name for name, state in zip(names, done, strict=False) if name != "" and state == COMPLETE), ""
    )


def _numbered(name: Scalar, plan: Plan) -> int:
    """A line chosen by its number, from 1 on; 0 for none."""
    whole = isinstance(name, int | float) and not isinstance(name, bool) and 1 <= name <= plan.lines
    return int(name) if whole else 0


def _put_choice(paper: Paper, plan: Plan, model: ModelColumns, name: Scalar) -> None:
    top, left = HEADER_ROW - 1, plan.why
    paper.put(left, TITLE, style.HEADING, top)
    for at, (label, value) in enumerate((("case", name if name != "" else None), ("model", model.model.name)), 1):
        paper.put(left, label, style.ROW, top + at)
        paper.put(left + 1, value, _INPUT, top + at)
    hint = replace(style.SUBTITLE, size=8.0, indent=1)
    paper.put(left + 2, "a name, or a line's number for cases without one", hint, top + 1)
    paper.drop_downs.append(DropDown((top + 1, left + 1), (top + 1, left + 1), choices=plan.down(0)))
    names = tuple(each.model.name for each in plan.models)
    if len(",".join(names)) <= 255:
        paper.drop_downs.append(DropDown((top + 2, left + 1), (top + 2, left + 1), choices=names))


# --- a model's steps ----------------------------------------------------------------------------


def terms(columns: ModelColumns) -> list[tuple[str, list[int]]]:
    """The terms in order, each with the positions of its design columns."""
    found: dict[str, list[int]] = {}
    for j, column in enumerate(columns.result.design.columns):
        if column.factors:
            found.setdefault(column.term, []).append(j)
    return list(found.items())


def _means(columns: ModelColumns) -> Array:
    return np.asarray(columns.result.design.matrix.mean(axis=0))


def _average(columns: ModelColumns) -> float:
    return float(_means(columns) @ columns.result.fit.coefficients)


@dataclass(frozen=True, slots=True)
class _Chosen:
    """The model chosen by its position, the case by its line from 1 on (0: none)."""

    plan: Plan
    at: int
    line: int
    evaluated: Mapping[str, Evaluated]

    @property
    def columns(self) -> ModelColumns:
        """The model."""
        return self.plan.models[self.at]

    @property
    def complete(self) -> bool:
        """Whether the case has an estimate under the model."""
        return self.has(self.columns)

    def has(self, columns: ModelColumns) -> bool:
        """Whether the case has an estimate under a model."""
        return self.line > 0 and int(self.evaluated[columns.model.name].state[self.line - 1]) == COMPLETE

    def adds(self, columns: ModelColumns) -> list[float]:
        """What each term of a model adds on the fitted scale, the average case first."""
        terms_of = terms(columns)
        if not self.has(columns):
            return [_average(columns), *(0.0 for _ in terms_of)]
        x, means = self.evaluated[columns.model.name].x[self.line - 1], _means(columns)
        b = columns.result.fit.coefficients
        parts = [math.fsum(float(b[j]) * float(x[j] - means[j]) for j in at) for _, at in terms_of]
        return [_average(columns), *parts]


class _Block:
    """The block while it is put down: a hidden column of steps and one of running estimates per model."""

    def __init__(self, book: Book, paper: Paper, plan: Plan, chosen: _Chosen) -> None:
        self.book, self.paper, self.plan, self.chosen = book, paper, plan, chosen
        self.places = coefficients.places(book)
        self.entries: list[dict[str, Scalar]] = [*cases.entries(book), *({} for _ in range(cases.SPARE))]
        self.top = HEADER_ROW + 2  # the header of the steps
        self.steps = max(len(terms(each)) for each in plan.models)
        count = len(plan.models)
        first = plan.steps
        # for every model side by side: labels, averages, what the case holds, what a step adds, the running estimate
        self.labels, self.averages, self.held, self.adds, self.so_far = (first + count * k for k in range(5))
        self.line, self.model = (address(HEADER_ROW, first + k, absolute=True) for k in range(2))
        self.complete = HEADER_ROW + 1  # the row of each model's state

    # --- hidden

    def put_working(self) -> None:
        """The chosen line and model as numbers, and every model's steps."""
        left, first = self.plan.why, self.plan.steps
        case, model = (address(HEADER_ROW + k, left + 1, absolute=True) for k in range(2))
        names = self.plan.down(0)
        top = live.span((FIRST_ROW, 0), (FIRST_ROW, 0))
        named = f'SUMPRODUCT(MAX(EXACT({names},{case})*({names}<>"")*(ROW({names})-ROW({top})+1)))'
        number = f"IF(ISNUMBER({case}),IF(AND({case}>=1,{case}<={self.plan.lines}),INT({case}),0),0)"
        line = f'IF(ISERROR({case}),0,IF({case}="",0,IF({named}>0,{named},{number})))'
        self.paper.put(first, Formula(line, self.chosen.line), _SMALL, HEADER_ROW)
        texts = [live.literal(each.model.name.casefold()) for each in self.plan.models]
        which = "+".join(f"EXACT(LOWER(TRIM({model})),{text})*{at}" for at, text in enumerate(texts, 1))
        self.paper.put(first + 1, Formula(which, self.chosen.at + 1), _SMALL, HEADER_ROW)
        for at, columns in enumerate(self.plan.models):
            self._put_model(at, columns)

    def _put_model(self, at: int, columns: ModelColumns) -> None:
        states = self.plan.down(columns.state)
        state = int(self.chosen.evaluated[columns.model.name].state[self.chosen.line - 1]) if self.chosen.line else 0
        text = f"IF({self.line}=0,0,INDEX({states},MAX({self.line},1)))"
        self.paper.put(self.labels + at, Formula(text, state), _SMALL, self.complete)
        self.paper.put(self.labels + at, self._so_far_head(columns), replace(_SMALL, align="left"), self.top)
        done = f"{address(self.complete, self.labels + at, absolute=True)}={COMPLETE}"
        back, adds = case_formulas.shown_back(columns.result), self.chosen.adds(columns)
        column = self.adds + at
        for step, (label, positions) in enumerate([(AVERAGE_CASE, []), *terms(columns)]):
            row = self.top + 1 + step
            self.paper.put(self.labels + at, label, replace(_SMALL, align="left"), row)
            average, held, text_held = self._inputs(columns, positions)
            self.paper.put(self.averages + at, average, _SMALL, row)
            if text_held:
                self.paper.put(self.held + at, Formula(f'IF({done},{text_held},"")', held), _SMALL, row)
            if step == 0:
                self.paper.put(column, adds[0], _SMALL, row)
            else:
                self.paper.put(
                    column, Formula(f"IF({done},{self._adds(columns, positions)},0)", adds[step]), _SMALL, row
                )
            total = f"SUM({live.span((self.top + 1, column), (row, column))})"
            eta = math.fsum(adds[: step + 1])
            running = float(mean_in_units(np.array([eta]), back)[0])
            self.paper.put(self.so_far + at, Formula(case_formulas.mean_formula(back, total), running), _SMALL, row)

    def _so_far_head(self, columns: ModelColumns) -> str:
        """`so far (hours)`."""
        spec = columns.result.spec
        unit = words.unit_in(columns.model.table, spec.response)
        as_fitted = columns.result.back is not None and case_formulas.shown_back(columns.result) is None
        shape = f"{spec.response_shape.value} " if as_fitted else ""
        return f"{SO_FAR} ({shape}{unit})" if unit else SO_FAR

    def _adds(self, columns: ModelColumns, at: list[int]) -> str:
        """Sum of b (x - mean of x) over neighbouring design columns, for the chosen line."""
        means, fit = _means(columns), columns.result.fit
        (row, column), _ = self.places[columns.model.name].coefficients
        sheet = self.book.title("fit coefficients")
        b = reference(sheet, (row + at[0], column), (row + at[-1], column))
        cells = self.plan.across(columns, at)
        if len(at) == 1:
            return f"{b}*(INDEX({cells},{self.line})-{live.number(float(means[at[0]]))})"
        middle = math.fsum(float(fit.coefficients[j]) * float(means[j]) for j in at)
        return f"SUMPRODUCT(MMULT(INDEX({cells},{self.line},0),{b}))-{live.number(middle)}"

    def _inputs(self, columns: ModelColumns, at: list[int]) -> tuple[Value, Scalar, str]:
        """For a term of one data column: its average, what the chosen case holds, and the formula of that."""
        names = {f.column for j in at for f in columns.result.design.columns[j].factors}
        if len(names) != 1:
            return None, "", ""
        one = columns.inputs[names.pop()]
        line = self.chosen.line
        typed = self.entries[line - 1].get(one.name, "") if self.chosen.has(columns) else ""
        text = f"INDEX({self.plan.down(one.column)},{self.line})"
        name = next(f.column for f in columns.result.design.columns[at[0]].factors)
        if one.levels and case_formulas.shape_of(columns.result, name) is None:
            return "a mix", typed, text
        return _average_input(columns, at[0], name), typed, text

    # --- shown

    def put_lines(self) -> None:
        """The steps of the chosen model."""
        left, last = self.plan.why, len(self.plan.models) - 1
        right = replace(style.HEADER, align="right")
        for at, head in enumerate(HEADS):
            self.paper.put(left + at, head, style.HEADER if at == 0 else right, self.top)
        said = f"IF({self.model}=0,{live.literal(SO_FAR)},{self._pick(self.labels, self.top)})"
        self.paper.put(
            left + HEADS.index(SO_FAR), Formula(said, self._so_far_head(self.chosen.columns)), right, self.top
        )
        chosen, back = self.chosen, case_formulas.shown_back(self.chosen.columns.result)
        states = live.span((self.complete, self.labels), (self.complete, self.labels + last))
        ok = f"INDEX({states},{self.model})={COMPLETE}"
        known = f"IF({self.model}=0,FALSE,{ok})"
        log, plain = (self._models_with(kind) for kind in ("log", "plain"))
        adds = chosen.adds(chosen.columns)
        code = figures.number_format(_size(chosen.columns), 4)
        looks = (
            replace(style.ROW, wrap=True),
            replace(style.NUMBER, number_format=f"+{code};-{code};0"),
            replace(style.NUMBER, number_format='"x "0.000'),
            replace(style.NUMBER, number_format=code),
            style.NUMBER,
            replace(style.NUMBER, number_format="General"),
        )
        running = [float(mean_in_units(np.array([math.fsum(adds[: at + 1])]), back)[0]) for at in range(len(adds))]
        labels = [AVERAGE_CASE, *(name for name, _ in terms(chosen.columns))]
        for step in range(self.steps + 1):
            row = self.top + 1 + step
            pick = {name: self._pick(start, row) for name, start in self._columns()}
            there = f'IF({known},IF({pick["label"]}="",FALSE,TRUE),FALSE)'
            here = chosen.complete and step < len(labels)
            values = self._values(step, labels, adds, running) if here else ("",) * 6
            before = f"-{self._pick(self.so_far, row - 1)}"
            plain_text = f'IF({plain},{pick["adds"]},IF({log},"",{pick["so far"]}{before}))'
            texts = (
                pick["label"],
                '""' if step == 0 else plain_text,
                '""' if step == 0 else f'IF({log},EXP({pick["adds"]}),"")',
                pick["so far"],
                f'IF({pick["held"]}="","",{pick["held"]})',
                f'IF({pick["average"]}="","",{pick["average"]})',
            )
            if step == 0 and not here:
                values = (_CHOOSE, "", "", "", "", "")
            own = (*looks[:4], *self._input_looks(step)) if here else looks
            for at, (text, value, look) in enumerate(zip(texts, values, own, strict=True)):
                other = live.literal(_CHOOSE) if step == 0 and at == 0 else '""'
                self.paper.put(left + at, Formula(f"IF({there},{text},{other})", value), look, row)

    def _input_looks(self, step: int) -> tuple[Format, Format]:
        """How what the case holds, and its average, are shown."""
        columns = self.chosen.columns
        names = {
            f.column
            for j in (terms(columns)[step - 1][1] if step else [])
            for f in columns.result.design.columns[j].factors
        }
        one = columns.inputs[names.pop()] if len(names) == 1 else None
        if one is not None and one.data is not None and one.data.kind is Kind.DATE:
            return (replace(style.NUMBER, number_format=figures.DATE),) * 2
        typed = [each.high for each in columns.result.ranges if one is not None and each.column == one.data_name]
        return style.NUMBER, replace(
            style.NUMBER, number_format=figures.number_format(typed[0], 3) if typed else "General"
        )

    def _columns(self) -> tuple[tuple[str, int], ...]:
        starts = (self.labels, self.averages, self.held, self.adds, self.so_far)
        return tuple(zip(("label", "average", "held", "adds", "so far"), starts, strict=True))

    def _pick(self, start: int, row: int) -> str:
        """The chosen model's cell among those side by side."""
        cells = live.span((row, start), (row, start + len(self.plan.models) - 1))
        return f"INDEX({cells},{self.model})"

    def _models_with(self, kind: str) -> str:
        """Whether the chosen model is one whose steps are factors (`log`) or sums (`plain`)."""
        found = []
        for at, columns in enumerate(self.plan.models, 1):
            back = case_formulas.shown_back(columns.result)
            if (back.kind if back is not None else "plain") == kind:
                found.append(f"{self.model}={at}")
        return f"OR({','.join(found)})" if found else "FALSE"

    def _values(self, step: int, labels: list[str], adds: list[float], running: list[float]) -> tuple[Scalar, ...]:
        columns = self.chosen.columns
        back = case_formulas.shown_back(columns.result)
        positions = [] if step == 0 else terms(columns)[step - 1][1]
        average, held, _ = self._inputs(columns, positions)
        gain: Scalar = ""
        times: Scalar = ""
        if step and back is None:
            gain = adds[step]
        elif step and back is not None and back.kind == "log":
            times = math.exp(adds[step])
        elif step:
            gain = running[step] - running[step - 1]
        shown = average if isinstance(average, float | str) else ""
        return labels[step], gain, times, running[step], held, shown


def _average_input(columns: ModelColumns, at: int, name: str) -> float:
    """The value of a number column at which its design column has its mean."""
    mean, kind = float(_means(columns)[at]), columns.result.design.columns[at].factors[0].kind
    if kind == "log":
        return math.exp(mean)
    if kind == "root":
        return mean**2
    if kind == "reciprocal":
        return 1 / mean if mean else math.nan
    return next((each.mean for each in columns.result.ranges if each.column == name), mean)


def _size(columns: ModelColumns) -> float:
    if case_formulas.shown_back(columns.result) is None and columns.result.back is not None:
        return 1.0
    return float(abs(columns.result.observed).max()) or 1.0
