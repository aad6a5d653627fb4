"""A report in words for the terminal, and as a line of JSON for programs."""

from __future__ import annotations

import json
import math
import sys
from collections.abc import Iterator, Sequence
from pathlib import Path

from bridge.job import Outcome, Report
from bridge.messages import Problem, Severity
from bridge.regression.results import ModelResult
from bridge.regression.spec import CategoryTerm, ModelSpec, NumberTerm, Shape
from bridge.sheets.book import ModelSheet

_SAID = {
    Outcome.LAID_OUT: "the sheet 'fit request' is laid out: fill it in and save",
    Outcome.UNCHANGED: "nothing has changed since the last fit, so nothing was written",
    Outcome.NO_REQUEST: "no sheet 'fit request'; add an empty one and save to begin",
    Outcome.CHANGED: "it is being saved again and again; try once more when it is quiet",
}


def progress(files: Sequence[Path]) -> Iterator[Path]:
    """The files one by one; on a terminal, with a count of where we are when there are many."""
    for at, file in enumerate(files, 1):
        if len(files) > 1 and sys.stderr.isatty():
            print(f"\r[{at}/{len(files)}] {file.name}\x1b[K\r", end="", file=sys.stderr, flush=True)
        yield file


def text(report: Report) -> str:
    """What became of the workbook, then each problem on a line of its own."""
    return "\n".join([f"{report.path}: {_headline(report)}", *_problem_lines(report)])


def plan(report: Report) -> str:
    """What a fit would do, model by model, and what stands in its way."""
    lines = [f"{report.path}: {_headline(report, done=False)}"]
    lines += [f"  {model.name}: {_planned(model)}" for model in report.models]
    return "\n".join([*lines, *_problem_lines(report)])


def json_line(report: Report) -> str:
    """The report as one line of JSON; figures that do not apply are null."""
    content = {
        "file": str(report.path),
        "outcome": report.outcome.value,
        "exit_code": report.exit_code,
        "message": report.message,
        "problems": [_problem_fields(problem) for problem in report.problems],
        "models": [_model_fields(model) for model in report.models],
        "seconds": {name: round(seconds, 4) for name, seconds in report.stages.items()},
    }
    return json.dumps(content, ensure_ascii=False)


def _headline(report: Report, done: bool = True) -> str:
    if report.outcome is Outcome.REFUSED:
        return report.message
    fitted = [model.name for model in report.models if model.result is not None]
    refused = [model.name for model in report.models if model.result is None]
    said = _SAID.get(report.outcome, "")
    if fitted:
        said = f"{'fitted' if done else 'would fit'} {', '.join(fitted)}"
        if done and report.outcome is Outcome.UNCHANGED:
            said += " again; nothing has changed, so nothing was written"
    if refused:
        said += f"{'; ' if said else ''}not fitted: {', '.join(refused)}"
    if report.message:
        said += f". {report.message}"
    return said or report.outcome.value


def _problem_lines(report: Report) -> list[str]:
    if report.outcome is Outcome.REFUSED:
        return []
    weighty = [problem for problem in report.all_problems if problem.severity is not Severity.NOTE]
    return [f"  {problem.model + ': ' if problem.model else ''}{problem.text}" for problem in weighty]


def _planned(model: ModelSheet) -> str:
    spec = model.request.spec
    if spec is None:
        return "not understood yet"
    rows = (
        f"; {len(model.taken.used)} of {len(model.taken.used) + len(model.taken.left_out)} rows" if model.taken else ""
    )
    return f"{_described(spec)}{rows}; {spec.errors} standard errors; {100 * spec.level:.10g}% intervals; {spec.fit_by}"


def _described(spec: ModelSpec) -> str:
    response = spec.response if spec.response_shape is Shape.AS_IS else f"{spec.response_shape} {spec.response}"
    terms = [_term(term) for term in spec.terms] + [
        f"{cross.first} crossed with {cross.second}" for cross in spec.crossed
    ]
    return f"{response} from {', '.join(terms) if terms else 'its mean'}"


def _term(term: NumberTerm | CategoryTerm) -> str:
    if isinstance(term, CategoryTerm):
        return f"{term.column} as category" + (f" against {term.base}" if term.base else "")
    words = term.column if term.shape is Shape.AS_IS else f"{term.shape} {term.column}"
    words += f" to power {term.degree}" if term.degree > 1 else ""
    return words + "".join(f" with a bend at {bend:g}" for bend in term.bends)


def _problem_fields(problem: Problem) -> dict[str, str | None]:
    return {"key": problem.key, "severity": problem.severity.value, "cell": problem.cell, "text": problem.text}


def _model_fields(model: ModelSheet) -> dict[str, object]:
    fields: dict[str, object] = {
        "name": model.name,
        "asked": _described(model.request.spec) if model.request.spec else None,
        "fitted": model.result is not None,
        "rows_used": len(model.taken.used) if model.taken else None,
        "rows_left_out": len(model.taken.left_out) if model.taken else None,
        "problems": [_problem_fields(problem) for problem in model.problems],
    }
    return fields | (_figures(model.result) if model.result is not None else {})


def _figures(result: ModelResult) -> dict[str, object]:
    fit = result.fit
    columns = zip(result.design.columns, fit.coefficients, fit.standard_errors, fit.p, fit.low, fit.high, strict=True)
    return {
        "coefficients": [
            {
                "term": column.label,
                "coefficient": _number(b),
                "standard_error": _number(se),
                "p": _number(p),
                "low": _number(low),
                "high": _number(high),
            }
            for column, b, se, p, low, high in columns
        ],
        "aliased": [alias.label for alias in result.design.aliased],
        "df_residual": fit.df_residual,
        "r_squared": _number(fit.r_squared),
        "adjusted_r_squared": _number(fit.adjusted_r_squared),
        "loo_r_squared": _number(fit.loo_r_squared),
        "residual_sd": _number(fit.residual_sd),
        "f": _number(fit.f),
        "f_p": _number(fit.f_p),
        "aic": _number(fit.aic),
        "bic": _number(fit.bic),
        "cv_rmse": _number(result.cross_validation.rmse),
        "anova": [
            {"source": row.source, "block": row.block, "df": row.df, "ss": _number(row.ss), "f": _number(row.f)}
            for row in result.anova.rows
        ],
    }


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
