"""The recheck: the spreadsheet itself confirms a fit from the data as they stand now.

Under each model's coefficients: the residual sum of squares recomputed, and the sums of residual times column, which
least squares makes zero. The rows used are taken run by run (a run: neighbouring sheet rows that are all used), so that
rows left out never enter; each run has a line of working cells to the right of the other working figures.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from bridge.page.cells import Cell, Format, Formula, address, reference
from bridge.page.sheet import Highlight
from bridge.regression.results import ModelResult
from bridge.regression.spec import FitBy, Shape
from bridge.sheets import figures, live, style, words
from bridge.sheets import rows as rows_sheet
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper

MOST_RUNS = 60
MOST_WORK = 20_000_000  # rows x columns squared that a spreadsheet recalculates in a breath
AGREES, DISAGREES = "agrees", "DOES NOT AGREE"
_WIDE = 11  # the working figures' first column

Span = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True, slots=True)
class _Plan:
    """The runs of sheet rows (first, last), and the columns judged: all, or none where that would be too slow."""

    runs: tuple[tuple[int, int], ...]
    columns: tuple[int, ...]


def rows(model: ModelSheet, result: ModelResult) -> int:
    """How many sheet rows the block takes."""
    plan = _plan(model, result)
    return 2 if isinstance(plan, str) else max(5, len(plan.runs) + 3)


def put_down(book: Book, paper: Paper, model: ModelSheet, result: ModelResult, coefficients: Span) -> None:
    """Write the block at the paper's row, exactly `rows` rows high."""
    start, plan = paper.row, _plan(model, result)
    paper.put(0, "Recheck from the data as they are now", replace(style.BODY, bold=True, color=style.DEEP))
    paper.row += 1
    if isinstance(plan, str):
        paper.spread(plan, 0, 9, style.PARAGRAPH)
        paper.row += 1
        return
    _working(paper, model, result, coefficients, plan)
    _answers(paper, model, result, plan)
    _chosen_row(book, paper, model, result, coefficients)
    paper.row = start + rows(model, result)


def _plan(model: ModelSheet, result: ModelResult) -> _Plan | str:
    """What can be rechecked; a sentence where nothing can."""
    if result.spec.fit_by is FitBy.RESISTANT:
        return "Not shown for a resistant fit: its weights depend on all residuals together."
    if model.table is None or model.taken is None:
        return "Not shown: the data are not at hand."
    used = model.table.rows[np.asarray(model.taken.used, dtype=np.int64)]
    breaks = np.flatnonzero(np.diff(used) != 1)
    if len(breaks) + 1 > MOST_RUNS:
        return f"Not shown: the rows used stand in {len(breaks) + 1} separate runs; up to {MOST_RUNS} can be rechecked."
    starts = np.concatenate([[0], breaks + 1])
    ends = np.concatenate([breaks, [len(used) - 1]])
    runs = tuple((int(used[a]), int(used[b])) for a, b in zip(starts, ends, strict=True))
    p = len(result.design.columns)
    residual = _residual(model, result, ((0, 1), (p - 1, 1)), runs[0])
    if len(residual) * 2 + 200 > live.MOST:
        return "Not shown: the model has more terms than one formula can hold."
    columns = tuple(range(p)) if result.fit.n * p * p <= MOST_WORK else ()
    return _Plan(runs, columns)


# --- the working cells --------------------------------------------------------------------------


def _working(paper: Paper, model: ModelSheet, result: ModelResult, coefficients: Span, plan: _Plan) -> None:
    head = replace(style.SUBTITLE, size=8.0)
    top = paper.row
    paper.cells[(top, _WIDE)] = Cell("recheck, run by run: sum of squared residuals, then residual times column", head)
    look = replace(style.NUMBER, color=style.QUIET, size=8.0, number_format="0.000E+00")
    first = 0
    for at, run in enumerate(plan.runs):
        count = run[1] - run[0] + 1
        part = slice(first, first + count)
        first += count
        for j, (text, value) in enumerate(_sums(model, result, coefficients, run, part, plan)):
            paper.cells[(top + 1 + at, _WIDE + j)] = Cell(Formula(text, value), look)


def _sums(
    model: ModelSheet,
    result: ModelResult,
    coefficients: Span,
    run: tuple[int, int],
    part: slice,
    plan: _Plan,
) -> list[tuple[str, float]]:
    residual = _residual(model, result, coefficients, run)
    ranges = _ranges(model, result, run)
    weight = f"{ranges[result.spec.weight]}*" if result.spec.weight is not None else ""
    e = result.fit.residual[part]
    w = np.ones(len(e)) if result.fit.weights is None else result.fit.weights[part]
    made = [(f"SUMPRODUCT({weight}({residual})^2)", float(np.sum(w * e * e)))]
    for j in plan.columns:
        x = live.product(result.design.columns[j], ranges)
        text = f"SUMPRODUCT({weight}({residual})*({x}))"
        if len(plan.runs) == 1:
            made.append((_rounded(text, result, j), 0.0))  # all rows together: zero but for rounding
        else:
            made.append((text, math.fsum((w * e * result.design.matrix[part, j]).tolist())))
    return made


def _residual(model: ModelSheet, result: ModelResult, coefficients: Span, run: tuple[int, int]) -> str:
    ranges = _ranges(model, result, run)
    response = live.shaped(result.spec.response_shape, ranges[result.spec.response])
    return f"{response}-({_predictor(result, ranges, coefficients)})"


def _predictor(result: ModelResult, cells: Mapping[str, str], coefficients: Span) -> str:
    """The fitted value, term by term; works on whole ranges too."""
    (row, column), _ = coefficients
    return "+".join(
        f"{address(row + j, column, absolute=True)}*{live.product(each, cells)}"
        for j, each in enumerate(result.design.columns)
    )


def _ranges(model: ModelSheet, result: ModelResult, run: tuple[int, int]) -> dict[str, str]:
    table, spec = model.table, result.spec
    assert table is not None  # _plan has seen to it
    wanted = {spec.response, *(factor.column for column in result.design.columns for factor in column.factors)}
    if spec.weight is not None:
        wanted.add(spec.weight)
    found = {}
    for name in wanted:
        column = table.column(name)
        assert column is not None
        found[name] = live.data_range(table, column, *run)
    return found


# --- the answers --------------------------------------------------------------------------------


def _answers(paper: Paper, model: ModelSheet, result: ModelResult, plan: _Plan) -> None:
    fit = result.fit
    top, last = paper.row + 1, paper.row + len(plan.runs)
    look = replace(style.NUMBER, number_format=figures.number_format(fit.ss_residual or 1.0, 8))

    def total(j: int) -> str:
        return f"SUM({address(top, _WIDE + j)}:{address(last, _WIDE + j)})"

    tolerance = 1e-8 * fit.ss_residual + 1e-12 * fit.ss_total
    stored = live.number(fit.ss_residual)
    rss = Formula(total(0), fit.ss_residual)
    close = f'IF(ABS({total(0)}-{stored})<={live.number(tolerance)},"{AGREES}","{DISAGREES}")'
    scale = "log " if result.spec.response_shape is Shape.LOG else ""
    label = f"residual sum of squares ({scale}{words.name_in(model.table, result.spec.response)}), recomputed"
    _line(paper, label, rss, look, f"{_guarded(close)}")
    if plan.columns:
        worst = [f"ABS({total(1 + j)})<={live.number(_zero(result, j))}" for j in plan.columns]
        text = f'IF({"*".join(f"({each})" for each in worst)}=1,"{AGREES}","{DISAGREES}")'
        value = Formula("MAX(" + ",".join(f"ABS({_rounded(total(1 + j), result, j)})" for j in plan.columns) + ")", 0.0)
        if max(len(text), len(value.text)) < live.MOST:
            code = replace(look, number_format="General")
            _line(paper, "largest sum of residual times column (zero but for rounding)", value, code, _guarded(text))


def _chosen_row(book: Book, paper: Paper, model: ModelSheet, result: ModelResult, coefficients: Span) -> None:
    """The fitted value of a row whose number the reader types, against what `fit rows` holds for it."""
    section = next((each for each in rows_sheet.sections(book) if model.name in each.starts), None)
    if section is None or model.taken is None:
        return
    table = section.table
    first, last = int(table.rows[0]), int(table.rows[-1])
    typed = address(paper.row, 4, absolute=True)
    ranges = _ranges(model, result, (first, last))
    cells = {name: f"INDEX({cells},{typed}-{first - 1})" for name, cells in ranges.items()}
    fitted = _predictor(result, cells, coefficients)
    if len(fitted) * 2 + 60 > live.MOST:
        return
    sheet = book.title("fit rows")
    key = "on_scale" if "on_scale" in section.keys[model.name] else "fitted"
    column = section.column(model.name, key)
    numbers = reference(sheet, (section.first_row, 0), (section.last_row, 0))
    stored = reference(sheet, (section.first_row, column), (section.last_row, column))
    found = f"INDEX({stored},MATCH({typed},{numbers},0))"
    value = address(paper.row, 5, absolute=True)
    close = f'IF(ABS({value}-{found})<=1E-9*ABS({found})+1E-12,"{AGREES}","{DISAGREES}")'
    judged = f'IF(ISNUMBER({value}),{close},"{DISAGREES}")'
    verdict = f'IF(ISERROR({found}),"not listed",IF(ISNUMBER({found}),{judged},"left out"))'
    code = figures.column_format(result.fit.fitted, result.fit.residual_sd, 5)
    now = Formula(f'IF(ISERROR({fitted}),"no value",{fitted})', float(result.fit.fitted[0]))
    listed = int(model.taken.used[0]) in section.lines
    _line(
        paper,
        "fitted value of the data row typed here (its row number)",
        now,
        replace(style.NUMBER, number_format=code),
        verdict,
    )
    paper.put(4, int(table.rows[model.taken.used[0]]), style.INPUT_NUMBER, row=paper.row - 1)
    if not listed:
        paper.put(6, Formula(verdict, "not listed"), replace(style.ROW_STRONG, align="right"), row=paper.row - 1)


def _line(paper: Paper, label: str, value: Formula, look: Format, verdict: str) -> None:
    paper.spread(label, 0, 2, replace(style.ROW, wrap=True))
    paper.put(3, None, style.ROW)
    paper.put(4, None, style.ROW)
    paper.put(5, value, look)
    paper.put(6, Formula(verdict, AGREES), replace(style.ROW_STRONG, align="right", color=style.DEEP))
    bad = f'{address(paper.row, 6)}="{DISAGREES}"'
    paper.highlights.append(
        Highlight((paper.row, 6), (paper.row, 6), bad, replace(style.BODY, bold=True, color=style.ALERT))
    )
    paper.row += 1


def _guarded(text: str) -> str:
    return f'IF(ISERROR({text}),"{DISAGREES}",{text})' if len(text) * 2 + 40 < live.MOST else text


def _rounded(text: str, result: ModelResult, j: int) -> str:
    """The sum without what rounding in the spreadsheet leaves of it."""
    return f"ROUND({text},{-math.ceil(math.log10(_zero(result, j)))})"


def _zero(result: ModelResult, j: int) -> float:
    """How far from zero rounding in the spreadsheet may leave the sum for column j."""
    w = np.ones(result.fit.n) if result.fit.weights is None else result.fit.weights
    length = math.sqrt(float(w @ result.design.matrix[:, j] ** 2))
    y = result.fit.fitted + result.fit.residual
    return length * (1e-8 * math.sqrt(result.fit.ss_residual) + 1e-11 * math.sqrt(float(w @ y**2))) + 1e-300
