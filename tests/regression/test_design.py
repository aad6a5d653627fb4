"""Which columns a model asks for, what they are called, and what cannot be."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import design
from bridge.regression.errors import (
    BadWeight,
    ConstantResponse,
    NothingToFit,
    OneLevel,
    OutOfDomain,
    TooFewRows,
    TooManyColumns,
    UnknownBase,
)
from bridge.regression.leastsquares import solve
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Shape

LENGTH = np.array([9.5, 12.0, 15.0, 18.25, 22.0, 30.5])
HULL = Levels(np.array([2, 0, 1, 2, 2, 0]), ("alu", "steel", "wood"))
LINE = (NumberTerm("length"),)
BOATS = Observations({"length": LENGTH, "hull": HULL, "hours": LENGTH**1.2, "w": LENGTH / 10}, 6)


def labels(*terms, crossed=(), intercept=True, observations=BOATS):
    spec = ModelSpec("hours", terms=terms, crossed=crossed, intercept=intercept)
    return [column.label for column in design.layout(spec, observations).columns]


def test_numbers_powers_bends_and_shapes():
    assert labels(NumberTerm("length", degree=3)) == ["intercept", "length", "length^2", "length^3"]
    assert labels(NumberTerm("length", bends=(15.0, 20.5))) == [
        "intercept",
        "length",
        "length above 15",
        "length above 20.5",
    ]
    assert labels(NumberTerm("length", shape=Shape.LOG)) == ["intercept", "log length"]
    assert labels(NumberTerm("length", shape=Shape.RECIPROCAL), intercept=False) == ["reciprocal length"]


def test_treatment_coding_against_the_most_frequent_level():
    layout = design.layout(ModelSpec("hours", terms=(CategoryTerm("hull"),)), BOATS)
    assert layout.bases == (("hull", "wood"),)
    assert layout.levels == (("hull", (("alu", 2), ("steel", 1), ("wood", 3))),)
    assert [column.label for column in layout.columns] == ["intercept", "hull alu", "hull steel"]


def test_equally_frequent_levels_take_the_first_by_name():
    even = Observations({"hull": Levels(np.array([1, 0, 1, 0]), ("a", "b")), "hours": np.arange(4.0)}, 4)
    assert design.layout(ModelSpec("hours", terms=(CategoryTerm("hull"),)), even).bases == (("hull", "a"),)


def test_a_base_may_be_asked_for_whatever_its_case():
    layout = design.layout(ModelSpec("hours", terms=(CategoryTerm("hull", base="STEEL "),)), BOATS)
    assert layout.bases == (("hull", "steel"),)


def test_without_intercept_the_first_category_has_all_its_levels():
    assert labels(CategoryTerm("hull"), NumberTerm("length"), intercept=False) == [
        "hull alu",
        "hull steel",
        "hull wood",
        "length",
    ]


def test_without_intercept_the_fit_does_not_depend_on_the_base():
    fits = [
        solve(ModelSpec("hours", terms=(CategoryTerm("hull", base=base), NumberTerm("length")), intercept=False), BOATS)
        for base in ("wood", "alu")
    ]
    assert fits[0].kernel.fitted == pytest.approx(fits[1].kernel.fitted, rel=1e-14)


def test_products_of_all_columns_of_two_terms():
    crossed = (CrossedTerm("length", "hull"),)
    assert labels(NumberTerm("length", degree=2), CategoryTerm("hull"), crossed=crossed)[5:] == [
        "length x hull alu",
        "length x hull steel",
        "length^2 x hull alu",
        "length^2 x hull steel",
    ]


def test_values_in_doubles():
    terms = (NumberTerm("length", bends=(15.0,)), CategoryTerm("hull"))
    spec = ModelSpec("hours", terms=terms, crossed=(CrossedTerm("hull", "length"),))
    columns = design.layout(spec, BOATS).columns
    values = design.matrix(columns, BOATS)
    alu, steel = HULL.codes == 0, HULL.codes == 1
    above = np.maximum(LENGTH - 15, 0)
    wanted = [np.ones(6), LENGTH, above, alu, steel, alu * LENGTH, alu * above, steel * LENGTH, steel * above]
    assert (values == np.column_stack(wanted)).all()
    assert (design.matrix(columns, BOATS, slice(2, 5)) == values[2:5]).all()
    assert (design.matrix(columns, BOATS, np.array([4, 0])) == values[[4, 0]]).all()


def fit(observations=BOATS, response="hours", terms=LINE, **more):
    return solve(ModelSpec(response, terms=terms, **more), observations)


def test_what_cannot_be_fitted_names_column_and_row():
    with pytest.raises(NothingToFit):
        fit(terms=(), intercept=False)
    with pytest.raises(NothingToFit):
        fit(Observations({**BOATS.columns, "length": np.zeros(6)}, 6), intercept=False)
    with pytest.raises(UnknownBase) as error:
        fit(terms=(CategoryTerm("hull", base="brick"),))
    assert error.value.column == "hull"
    changed = {**BOATS.columns, "length": np.where(np.arange(6) == 3, -1.0, LENGTH)}
    for shape in (Shape.LOG, Shape.ROOT):
        with pytest.raises(OutOfDomain) as error:
            fit(Observations(changed, 6), terms=(NumberTerm("length", shape=shape),))
        assert (error.value.column, error.value.index) == ("length", 3)
    zero = {**BOATS.columns, "length": np.where(np.arange(6) == 2, 0.0, LENGTH)}
    with pytest.raises(OutOfDomain) as error:
        fit(Observations(zero, 6), terms=(NumberTerm("length", shape=Shape.RECIPROCAL),))
    assert error.value.index == 2
    with pytest.raises(OutOfDomain) as error:
        fit(Observations({**changed, "hours": -LENGTH}, 6), response_shape=Shape.LOG)
    assert (error.value.column, error.value.index) == ("hours", 0)


@pytest.mark.parametrize("bad", [0.0, -1.0])
def test_weights_must_be_positive(bad):
    columns = {**BOATS.columns, "w": np.where(np.arange(6) == 4, bad, 1.0)}
    with pytest.raises(BadWeight) as error:
        fit(Observations(columns, 6), weight="w")
    assert (error.value.column, error.value.index) == ("w", 4)


def test_too_few_rows_and_too_little_variation():
    with pytest.raises(TooFewRows) as error:
        fit(terms=(NumberTerm("length", degree=5),))
    assert (error.value.rows, error.value.coefficients) == (6, 6)
    with pytest.raises(ConstantResponse):
        fit(Observations({**BOATS.columns, "hours": np.full(6, 7.0)}, 6))
    one = Observations({**BOATS.columns, "hull": Levels(np.zeros(6, dtype=int), ("alu", "steel"))}, 6)
    with pytest.raises(OneLevel) as level:
        fit(one, terms=(CategoryTerm("hull"),))
    assert level.value.column == "hull"


def test_a_power_beyond_all_doubles():
    columns = {**BOATS.columns, "length": LENGTH * 1e150}
    with pytest.raises(OutOfDomain) as error:
        fit(Observations(columns, 6), terms=(NumberTerm("length", degree=3),))
    assert error.value.column == "length"


def test_there_is_an_upper_limit_of_columns():
    n = 400
    codes = np.arange(n)
    columns = {"y": codes * 1.0, "c": Levels(codes, tuple(f"{code:03}" for code in codes))}
    with pytest.raises(TooManyColumns):
        solve(ModelSpec("y", terms=(CategoryTerm("c"),)), Observations(columns, n))
