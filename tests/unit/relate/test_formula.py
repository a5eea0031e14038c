"""Formulas: what they may say; nothing in them is run."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.relate.predictors.formula import read_formula


def test_terms_factors_and_columns():
    found = read_formula("district*log(age) + `km to parts` + I(age**2) + C(code)")
    assert [factor.text for factor in found.factors] == [
        "district",
        "log(age)",
        "km to parts",
        "I(age ** 2)",
        "C(code)",
    ]
    assert found.columns == ("district", "age", "km to parts", "code")
    assert (0, 1) in found.terms
    assert found.factors[4].is_category


def test_factors_are_worth_what_they_say():
    (factor,) = read_formula("log10(`a b` * 10) - 0 + 1").factors
    assert factor.value({"a b": np.array([1.0, 10.0])}).tolist() == [1.0, 2.0]
    (factor,) = read_formula("I(2 * x - x / 4)").factors
    assert factor.value({"x": np.array([4.0])}).tolist() == [7.0]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("kind ~ age", "without '~'"),
        ("age | district", r"'\|' has no meaning"),
        ("age +", "cannot be read"),
        ("1", "names no covariate"),
        ("age - 1", "leaves out the intercept"),
        ("logg(age)", r"no function 'logg' \(near names: 'log'"),
        ("log(age, 3)", "log takes one column"),
        ("__import__('os').system('true')", "cannot be read|is not arithmetic"),
        ("I(age.__class__)", "is not arithmetic"),
        ("I(age % 2)", "is not arithmetic"),
        ("I(age > 2)", "is not arithmetic"),
        ("log(C(age))", "stands by itself"),
        ("log(3)", "names no column"),
    ],
)
def test_what_cannot_be_meant_is_refused(text, message):
    with pytest.raises(ModelError, match=message):
        read_formula(text)
