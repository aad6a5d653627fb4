"""What the models say, in sentences: which predicts best, what each found, what to watch, what is nested in what."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from bridge.regression.design import term_name
from bridge.regression.results import ModelResult, Nested
from bridge.regression.spec import CategoryTerm, Errors, FitBy, NumberTerm, Shape
from bridge.sheets import figures, in_short, readings, typical, words
from bridge.sheets.book import Book, ModelSheet

ALIKE = 1.05  # misses within 5% of each other count as equal (common practice)
ROWS_PER_COEFFICIENT = 10  # fewer is few (common practice)
OPTIMISM = 0.1
MOST_EFFECTS = 3
MOST_CONCERNS = 3
MOST_NESTED = 10

Fitted = tuple[ModelSheet, ModelResult]


# --- which predicts best ------------------------------------------------------------------------


def rivals(book: Book) -> list[list[Fitted]]:
    """The fitted models that estimate the same column of the same sheet, best typical miss first; one list each."""
    groups: dict[tuple[str, str], list[Fitted]] = {}
    for model, result in book.fitted:
        sheet = model.table.sheet if model.table is not None else ""
        groups.setdefault((sheet, result.spec.response), []).append((model, result))
    return [sorted(group, key=lambda one: _miss(one[1])) for group in groups.values()]


def best(book: Book) -> Fitted | None:
    """The model whose charts the page shows: the best of the first response's models."""
    groups = rivals(book)
    return groups[0][0] if groups else None


def comparison(book: Book) -> list[str]:
    """Which model predicts new cases best and by how much, a paragraph per response with rivals."""
    return [_compared(group, len(book.fitted) > len(group)) for group in rivals(book) if len(group) > 1]


def _compared(group: list[Fitted], several: bool) -> str:
    known = [one for one in group if math.isfinite(_miss(one[1]))]
    if len(known) < 2:
        return "There are too few rows to say which model predicts new cases best."
    first, result = known[0]
    unit = words.unit_in(first.table, result.spec.response)
    what = f"For {words.name_in(first.table, result.spec.response)}: " if several else ""
    opening = _alike(known, unit) if _miss(known[1][1]) < ALIKE * _miss(result) else _best(known, unit)
    care = "" if _same_rows(known) else " The models were not fitted to the same rows, so compare with care."
    return f"{what}{opening}{care}"


def _best(known: list[Fitted], unit: str) -> str:
    name, miss = known[0][0].name, _miss(known[0][1])
    others = [f"{_number(_miss(result), miss)} for {model.name}" for model, result in known[1:]]
    less = figures.percent(1 - miss / _miss(known[1][1]), 2)
    return (
        f"Model {name} predicts new cases best: on rows it has not seen it misses by "
        f"{words.with_unit(_number(miss, miss), unit)} (root mean square), against {words.listing(others, most=5)}. "
        f"That is {less} less than the next."
    )


def _alike(known: list[Fitted], unit: str) -> str:
    miss = _miss(known[0][1])
    close = [one for one in known if _miss(one[1]) < ALIKE * miss]
    rest = known[len(close) :]
    names = words.listing([model.name for model, _ in close], most=8)
    misses = words.listing([_number(_miss(result), miss) for _, result in close], most=8)
    simplest = min(close, key=lambda one: len(one[1].design.columns))
    tail = f"; {words.listing([f'{model.name} by {_number(_miss(result), miss)}' for model, result in rest], most=5)}"
    fewest = min(len(result.design.columns) for _, result in close)
    plain = [model.name for model, result in close if len(result.design.columns) == fewest]
    simple = f" The plainest of them is {simplest[0].name}, with {words.plural(fewest, 'coefficient')}."
    return (
        f"Models {names} predict new cases about equally well: on rows they have not seen they miss by "
        f"{words.with_unit(misses, unit)} (root mean square){tail if rest else ''}."
        f"{simple if len(plain) == 1 else ''}"
    )


def _number(value: float, reference: float) -> str:
    return figures.placed_number(value, reference, 3)


def _miss(result: ModelResult) -> float:
    miss = result.cross_validation.rmse
    return miss if math.isfinite(miss) else math.inf


def _same_rows(group: Sequence[Fitted]) -> bool:
    return len({model.taken.used if model.taken is not None else () for model, _ in group}) == 1


# --- what a model found -------------------------------------------------------------------------


def answer(model: ModelSheet, result: ModelResult) -> str:
    """Two or three sentences: what was asked and how much it accounts for, the main effects, a middling case."""
    said = [_accounts(model, result), *_effects(model, result), *_middling(model, result)]
    return f"{model.name}: " + " ".join(said)


def _accounts(model: ModelSheet, result: ModelResult) -> str:
    spec, fit = result.spec, result.fit
    shape = "" if spec.response_shape is Shape.AS_IS else f"the {spec.response_shape.value} of "
    response = f"{shape}{words.name_in(model.table, spec.response)}"
    terms = [words.name_in(model.table, term.column) for term in spec.terms]
    rows = ", ".join([words.plural(fit.n, "row"), *_asked(model, result)])
    if not terms:
        return f"the mean of {response}, from {rows}, with nothing to explain it."
    share = figures.share(fit.r_squared)
    about = "of its variation" if spec.intercept else "of its sum of squares about zero"
    unseen = ""
    if math.isfinite(fit.loo_r_squared) and fit.r_squared - fit.loo_r_squared > OPTIMISM:
        unseen = f" (but for only {figures.percent(max(fit.loo_r_squared, 0.0))} on rows left out)"
    return f"{response} by {words.listing(terms, most=5)}, from {rows}. It accounts for {share} {about}{unseen}."


def _asked(model: ModelSheet, result: ModelResult) -> list[str]:
    """What was asked besides the columns, where it is not the usual."""
    spec, said = result.spec, []
    for one in model.request.filters:
        values = words.listing([str(value) if isinstance(value, str) else f"{value:g}" for value in one.values])
        comparison = one.comparison if one.comparison in ("equals", "is not") else f"is {one.comparison}"
        said.append(f"only where {words.name_in(model.table, one.column)} {comparison} {values}")
    if spec.weight is not None:
        said.append(f"weighted by {words.name_in(model.table, spec.weight)}")
    if spec.fit_by is FitBy.RESISTANT:
        said.append("outlying rows counting for less")
    if spec.errors is not Errors.ORDINARY:
        said.append(f"standard errors for {_ERRORS[spec.errors]}")
    if result.search is not None:
        dropped = [words.label_in(model.table, term) for term in result.search.dropped]
        left = f", {words.listing(dropped)} left out" if dropped else ""
        said.append(f"terms chosen by {result.search.by}{left}")
    return said


_ERRORS = {Errors.UNEVEN_SPREAD: "uneven spread", Errors.GROUPED: "grouped rows", Errors.SERIAL: "a series"}


def _effects(model: ModelSheet, result: ModelResult) -> list[str]:
    if not result.spec.terms:
        return []
    if not in_short.standing_out(result):
        return ["No single effect stands out from chance."]
    found = in_short.strongest(model, result, MOST_EFFECTS)
    alone = len(result.spec.terms) < 2 or not any(in_short.GOES in phrase for phrase in found)
    return [f"{words.capital(words.listing(found))}{'' if alone else ', all else equal'}."] if found else []


def _middling(model: ModelSheet, result: ModelResult) -> list[str]:
    case = typical.case(model, result)
    return [] if case is None else [case]


# --- what to watch ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Concern:
    text: str
    weight: int


def watch(models: Sequence[Fitted]) -> list[str]:
    """What to watch, the same thing said once for all the models it holds for; the gravest first within a model."""
    said: dict[str, list[str]] = {}
    for model, result in models:
        concerns = sorted(_concerns(model, result), key=lambda concern: -concern.weight)[:MOST_CONCERNS]
        for concern in concerns or [_Concern("Nothing among the checks stands out.", 0)]:
            said.setdefault(concern.text, []).append(model.name)
    return [f"{words.listing(names, most=12)}: {text}" for text, names in said.items()]


def _concerns(model: ModelSheet, result: ModelResult) -> list[_Concern]:
    found = [_Concern(words.SEARCH_WARNING, 3)] if result.search is not None else []
    found += [_Concern(readings.alias(one, model.table), 3) for one in result.design.aliased]
    found += _few_rows(result)
    if not result.checks:
        found.append(_Concern(readings.NO_RESIDUAL, 3))
    found += [_Concern(reading.text, reading.weight) for reading in _telling(readings.checks(model, result))]
    found += _entangled(model, result)
    found += _digits(result)
    return found


def _telling(checks: Sequence[readings.Reading]) -> list[readings.Reading]:
    """The checks that found something; of two that look for the same thing, the one that says more."""
    found = {reading.name: reading for reading in checks if reading.weight}
    for general, special in readings.SAME_MATTER:
        if special in found:
            found.pop(general, None)
    return list(found.values())


def _few_rows(result: ModelResult) -> list[_Concern]:
    n, p = result.fit.n, len(result.design.columns)
    if n >= ROWS_PER_COEFFICIENT * p:
        return []
    rows = f"{words.plural(n, 'row')} for {words.plural(p, 'coefficient')}"
    text = f"{rows} is few (under {ROWS_PER_COEFFICIENT} rows each, common practice): look at the intervals."
    return [_Concern(words.sentence(text), 3 if n < 5 * p else 1)]


def _entangled(model: ModelSheet, result: ModelResult) -> list[_Concern]:
    # powers and products of one column are near-dependent by their making: nobody needs to act on that
    crossed = {name for term in result.spec.crossed for name in (term.first, term.second)}
    own = {term_name(term) for term in result.spec.terms if _plain(term) and term.column not in crossed}
    names = [
        words.label_in(model.table, term.term)
        for term in result.collinearity.terms
        if term.term in own and readings.vif(term)[1] == 2
    ]
    if not names:
        return []
    several = len(names) > 1
    text = (
        f"{words.listing(names)} {'are' if several else 'is'} hard to tell apart from other terms: the estimates may "
        f"be sound, but {'their' if several else 'its'} single {'effects are' if several else 'effect is'} not."
    )
    return [_Concern(text, 1)]


def _plain(term: NumberTerm | CategoryTerm) -> bool:
    return not isinstance(term, NumberTerm) or (term.degree == 1 and not term.bends)


def _digits(result: ModelResult) -> list[_Concern]:
    digits = result.fit.digits
    if digits is None or digits >= 8:
        return []
    text = f"The columns are so alike in their scales that the figures are good to about {digits:.0f} digits."
    return [_Concern(text, 3 if digits < 4 else 1)]


def reach(models: Sequence[Fitted]) -> list[str]:
    """The data's reach of the number predictors, one sentence per data sheet: where estimates stop being backed."""
    spans: dict[str, str] = {}
    for model, result in models:
        for one in result.ranges:
            unit = words.unit_in(model.table, one.column)
            low, high = (figures.plain_number(figures.rounded(end, 5)) for end in (one.low, one.high))
            ends = f"{low} to {words.with_unit(high, unit)}"
            spans.setdefault(words.name_in(model.table, one.column), ends)
    if not spans:
        return []
    parts = [f"{name} {ends}" for name, ends in spans.items()]
    return [f"The rows used reach over {words.listing(parts, most=8)}. Nothing is known beyond that."]


# --- nested models ------------------------------------------------------------------------------


def nested(book: Book) -> list[str]:
    """Each pair of nested models with its partial F, in words; pairs that follow from two others are left out."""
    results = {model.name: (model, result) for model, result in book.fitted}
    inside: dict[str, set[str]] = {}
    for pair in book.nested:
        inside.setdefault(pair.large, set()).add(pair.small)
    told = [
        _nested(pair, results[pair.small], results[pair.large])
        for pair in book.nested
        if pair.small in results
        and pair.large in results
        and not any(pair.small in inside.get(between, ()) for between in inside[pair.large])
    ]
    more = len(told) - MOST_NESTED
    return told if more <= 0 else [*told[:MOST_NESTED], f"{words.plural(more, 'more pair')} of models likewise."]


def _nested(pair: Nested, small: Fitted, large: Fitted) -> str:
    terms = dict.fromkeys(column.term for column in large[1].design.columns)
    there = {column.term for column in small[1].design.columns}
    added = [words.label_in(large[0].table, term) for term in terms if term not in there]
    if not added:  # the same terms in a richer form: a bend, a power
        known = {column.label for column in small[1].design.columns}
        labels = [column.label for column in large[1].design.columns if column.label not in known]
        added = [words.label_in(large[0].table, label) for label in labels]
    what = f"adds {words.listing(added)}" if added else f"adds {words.plural(pair.df, 'coefficient')}"
    figure = (
        f"partial F = {figures.sentence_number(pair.f, 3)} on {pair.df} and {pair.df_residual} degrees of freedom, "
        f"{figures.p_words(pair.p)}"
    )
    if pair.p < 0.05:
        return f"{pair.large} contains {pair.small} and {what}: that explains more than chance would ({figure})."
    return f"{pair.large} contains {pair.small} and {what}: that explains no more than chance may ({figure})."
