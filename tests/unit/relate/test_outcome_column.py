"""Reading outcomes: what is taken, and every kind of bad input by name."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.exceptions import ModelError, ResponsesError
from bayeslca.relate.outcomes.column import Outcome, OutcomeKind, read_outcome

CASES = ["a", "b", "c", "d", "e", "f"]


def responses() -> lca.Responses:
    frame = pd.DataFrame(
        {"case": CASES, "fees": ["no", "yes"] * 3, "meets": ["no", "no", "yes"] * 2}
    )
    return lca.Responses.from_frame(frame, items=["fees", "meets"], case="case")


def read(values: list[Any], kind: OutcomeKind, ids: list[str] = CASES, **options: Any) -> Outcome:
    return read_outcome(
        responses(), pd.DataFrame({"case": ids, "days": values}), "days", kind, **options
    )


def test_numbers_come_in_the_order_of_the_answers() -> None:
    found = read([1.5, 2.0, np.nan, 4.0, 5.0, 6.0], "numeric", CASES[::-1])
    np.testing.assert_array_equal(found.value, [6.0, 5.0, 4.0, np.nan, 2.0, 1.5])
    (missing,) = found.findings
    assert missing.kind == "outcome_missing"
    assert missing.about == ("d",)


def test_binary_and_ordered_outcomes_are_codes() -> None:
    binary = read(["yes", "no", "no", "yes", "no", "no"], "binary")
    assert binary.levels == ("no", "yes")
    np.testing.assert_array_equal(binary.value, [1, 0, 0, 1, 0, 0])
    chosen = read(["up", "down", "up", "up", "down", "up"], "binary", yes="down")
    np.testing.assert_array_equal(chosen.value, [0, 1, 0, 0, 1, 0])
    numbered = read([3, 1, 2, 10, 1, 2], "ordered")
    assert numbered.levels == ("1", "2", "3", "10")
    named = read(["low", "high", "low", "low", "high", "low"], "ordered", levels=["low", "high"])
    np.testing.assert_array_equal(named.value, [0, 1, 0, 0, 1, 0])


@pytest.mark.parametrize(
    ("values", "kind", "options", "message"),
    [
        ([1, 2, 3, 4, 5, "many"], "numeric", {}, "numbers and also 'many'"),
        (["x", "y", "x", "y", "x", "y"], "numeric", {}, "should hold numbers"),
        ([1, -2, 3, 4, 5, 6], "count", {}, r"negative count: -2.0 \(case b\)"),
        ([1, 2.5, 3, 4, 5, 6], "count", {}, r"not whole: 2.5 \(case b\)"),
        ([1, np.inf, 3, 4, 5, 6], "numeric", {}, r"without bounds|inf"),
        ([7, 7, 7, 7, 7, 7], "numeric", {}, "constant: all 6 cases with a value have 7"),
        (["yes"] * 6, "binary", {}, "constant"),
        ([0, 1, 2, 0, 1, 0], "binary", {}, "two values; found 3"),
        (["up", "down"] * 3, "binary", {}, "counts as yes"),
        (["up", "down"] * 3, "binary", {"yes": "left"}, "is not among its values"),
        (["low", "high"] * 3, "ordered", {}, "order of its categories is not known"),
        (
            ["low", "hihg"] * 3,
            "ordered",
            {"levels": ["low", "high"]},
            r"no level: 'hihg' \(case b\).*near names: 'high'",
        ),
        (["low", "high"] * 3, "ordered", {"levels": ["low", "low"]}, "two or more, each once"),
        ([1, None, None, None, None, 2], "numeric", {}, "only 2 cases have a value"),
    ],
)
def test_values_that_cannot_be(
    values: list[Any], kind: OutcomeKind, options: dict[str, Any], message: str
) -> None:
    with pytest.raises(ResponsesError, match=message):
        read(values, kind, **options)


def test_cases_that_do_not_match() -> None:
    with pytest.raises(ResponsesError, match="holds none of the 6 cases"):
        read([1, 2, 3, 4, 5, 6], "numeric", ["u", "v", "w", "x", "y", "z"])
    with pytest.raises(ResponsesError, match="stand more than once: 'a'"):
        read([1, 2, 3, 4, 5, 6], "numeric", ["a", "a", "c", "d", "e", "f"])
    with pytest.raises(ResponsesError, match="no column 'dais'"):
        read_outcome(
            responses(), pd.DataFrame({"case": CASES, "days": range(6)}), "dais", "numeric"
        )
    some = read([1, 2, 3, 4, 5, 6], "numeric", ["a", "b", "c", "d", "y", "z"])
    assert {one.kind for one in some.findings} == {
        "cases_without_row",
        "rows_of_other_cases",
        "outcome_missing",
    }


def test_options_that_cannot_be() -> None:
    with pytest.raises(ModelError, match="no kind 'numbers'"):
        read([1, 2, 3, 4, 5, 6], "numbers")  # type: ignore[arg-type]
    with pytest.raises(ModelError, match="levels are of ordered outcomes"):
        read([1, 2, 3, 4, 5, 6], "numeric", levels=["1"])
    with pytest.raises(ModelError, match="yes is of binary outcomes"):
        read([1, 2, 3, 4, 5, 6], "numeric", yes="1")
