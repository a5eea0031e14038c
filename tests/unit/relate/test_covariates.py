"""The design matrix: standardised, centred, and refused where it says nothing."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.relate.case_table import CaseTable
from bayeslca.relate.predictors.covariates import design_of


def table(**columns):
    frame = pd.DataFrame({name: pd.Series(values) for name, values in columns.items()})
    kinds = {
        name: "number" if frame[name].dtype.kind == "f" else "category" for name in frame.columns
    }
    return CaseTable(frame, kinds)


AGES = [1.0, 2.0, 3.0, 6.0, 8.0, 10.0]
DISTRICTS = ["hill", "lake", "hill", "plain", "lake", "hill"]


def test_numbers_are_standardised_and_categories_compared_with_the_commonest():
    design = design_of(table(age=AGES, district=DISTRICTS), "age + district")
    assert [column.name for column in design.columns] == [
        "intercept",
        "age",
        "district=lake",
        "district=plain",
    ]
    assert design.columns[1].meaning == f"a rise by {np.std(AGES):.3g} (one standard deviation)"
    assert design.columns[2].meaning == "lake against hill"
    assert np.allclose(design.matrix[:, 0], 1.0)
    assert np.allclose(design.matrix[:, 1:].mean(axis=0), 0.0)
    assert np.allclose(design.matrix[:, 1], (np.array(AGES) - 5.0) / np.std(AGES))
    assert np.ptp(design.matrix[:, 2]) == 1.0


def test_interactions_multiply_standardised_numbers():
    design = design_of(table(age=AGES, km=[4.0, 1.0, 3.0, 2.0, 9.0, 2.0]), "age * log(km)")
    age = (np.array(AGES) - np.mean(AGES)) / np.std(AGES)
    km = np.log([4.0, 1.0, 3.0, 2.0, 9.0, 2.0])
    km = (km - km.mean()) / km.std()
    assert design.columns[3].name == "age x log(km)"
    assert np.allclose(design.matrix[:, 3], age * km - np.mean(age * km))


def test_other_cases_get_the_same_columns():
    columns = table(age=[*AGES, 4.0, 5.5], district=[*DISTRICTS, "plain", "plain"])
    design = design_of(columns, "age * district")
    assert np.allclose(design.matrix_of(columns.frame), design.matrix)
    assert np.allclose(design.matrix_of(columns.frame.iloc[2:4]), design.matrix[2:4])
    other = pd.DataFrame({"age": [3.0], "district": ["valley"]})
    with pytest.raises(
        ModelError, match=r"'valley' was not among the cases .* Known are hill, lake"
    ):
        design.matrix_of(other)
    with pytest.raises(ModelError, match="covariate 'district' is missing"):
        design.matrix_of(other[["age"]])
    with pytest.raises(ModelError, match="covariate 'age' has no value in 1 rows"):
        design.matrix_of(other.assign(age=np.nan, district="hill"))


def test_codes_are_categories_when_asked():
    design = design_of(table(code=[2.0, 1.0, 2.0, 10.0, 10.0, 2.0], age=AGES), "C(code)")
    assert [column.name for column in design.columns[1:]] == ["code=1", "code=10"]


def test_cases_that_miss_a_covariate_are_left_out_and_counted():
    columns = table(age=[*AGES[:5], np.nan], district=[None, *DISTRICTS[1:]])
    design = design_of(columns, "age + district")
    assert design.used.tolist() == [False, True, True, True, True, False]
    (finding,) = design.findings
    assert finding.kind == "covariates_missing"
    assert "2 of 6 cases miss a covariate (age 1, district 1)" in finding.message
    with pytest.raises(ModelError, match=r"2 of 6 cases miss .* missing='refuse' is set"):
        design_of(columns, "age + district", missing="refuse")


@pytest.mark.parametrize(
    ("columns", "formula", "message"),
    [
        ({"age": [3.0] * 6}, "age", "covariate 'age' is 3 in all 6 cases"),
        ({"district": ["hill"] * 6}, "district", "covariate 'district' is 'hill' in all 6 cases"),
        (
            {"age": AGES, "months": [12 * a for a in AGES]},
            "age + months",
            "covariate 'months' says the same as age .*collinear",
        ),
        ({"age": [0.0, *AGES[1:]]}, "log(age)", r"no value for 1 cases \(age = 0\)"),
        ({"district": DISTRICTS}, "log(district)", "'district' holds categories"),
        ({"age": [np.nan] * 6}, "age", "6 of 6 cases miss a covariate .* none is left"),
    ],
)
def test_covariates_that_say_nothing_are_named(columns, formula, message):
    with pytest.raises(ModelError, match=message):
        design_of(table(**columns), formula)


def test_new_cases_are_read_as_those_of_the_fit():
    design = design_of(table(age=AGES, district=DISTRICTS), "age + district")
    same = design.matrix_of(pd.DataFrame({"age": ["2"], "district": ["lake "]}))
    assert np.allclose(same[0], design.matrix[1])
    with pytest.raises(ModelError, match="'age' should hold numbers; found values such as 'old'"):
        design.matrix_of(pd.DataFrame({"age": ["old"], "district": ["lake"]}))
