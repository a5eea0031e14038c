"""Every malformed frame or argument gives one error that says what, where and what to do."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pandas as pd
import pytest

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.item import Groups, Item, ItemSpec
from bayeslca.responses.responses import Responses

YES_NO = ["yes", "no", "yes", "no", "no", "yes"]
FEES = Item("fees", ("no", "yes"))


def _frame(**columns: Any) -> pd.DataFrame:
    return pd.DataFrame({"fees": YES_NO, "meets": YES_NO[::-1], **columns})


FRAMES: dict[str, tuple[Callable[[], Any], dict[str, Any], list[str]]] = {
    "no items": (
        _frame,
        {},
        ["items is not given", "look like items: ['fees', 'meets']"],
    ),
    "items a text": (_frame, {"items": "fees"}, ["items='fees' is not a list", "write ['fees']"]),
    "items a number": (_frame, {"items": [3]}, ["items holds 3", "name columns"]),
    "unknown column": (
        _frame,
        {"items": ["feees", "meets"]},
        ["no column 'feees'", "near names: 'fees'"],
    ),
    "unknown column, none near": (
        _frame,
        {"items": ["qqq", "meets"]},
        ["no column 'qqq'", "The columns are 'fees', 'meets'"],
    ),
    "two roles": (
        lambda: _frame(committee=list("abcdef")),
        {"items": ["fees", "meets"], "case": "fees"},
        ["column 'fees'", "as items and as case", "one role"],
    ),
    "item twice": (_frame, {"items": ["fees", "fees"]}, ["'fees' stands twice in items"]),
    "header twice": (
        lambda: pd.DataFrame([["yes", "no"]], columns=["fees", "fees"]),
        {"items": ["fees"]},
        ["'fees'", "more than once", "Rename"],
    ),
    "one category": (
        lambda: _frame(fenced=["yes"] * 6),
        {"items": ["fees", "fenced"]},
        ["item 'fenced'", "one category, 'yes' (6 cases)", "Take it off"],
    ),
    "no answer at all": (
        lambda: _frame(fenced=[None] * 6),
        {"items": ["fees", "fenced"]},
        ["item 'fenced'", "no answer in any row"],
    ),
    "more than 64 categories": (
        lambda: pd.DataFrame({"name": [f"WP-{i}" for i in range(70)]}),
        {"items": ["name"]},
        ["item 'name'", "70 different values", "at most 64", "case="],
    ),
    "a measurement": (
        lambda: pd.DataFrame({"depth": [i * 1.5 for i in range(30)]}),
        {"items": ["depth"]},
        ["item 'depth'", "30 different numbers", "measurement", "group it"],
    ),
    "dates": (
        lambda: pd.DataFrame({"day": pd.date_range("2025-01-01", periods=5)}),
        {"items": ["day"]},
        ["item 'day'", "dates (2025-01-01", "Take it off"],
    ),
    "case": (
        lambda: _frame(fenced=["yes", "Yes", "no", "yes", "no", None]),
        {"items": ["fenced"]},
        ["'yes' (2), 'Yes' (1)", "case, spaces, accents", 'merge = { "yes" = ["Yes"] }'],
    ),
    "spaces": (
        lambda: _frame(fenced=["yes", "yes ", "no", "yes", "no", None]),
        {"items": ["fenced"]},
        ["'yes' (2), 'yes ' (1)", 'merge = { "yes" = ["yes "] }'],
    ),
    "accents": (
        lambda: _frame(fenced=["sí", "si", "no", "sí", "no", None]),
        {"items": ["fenced"]},
        ["'sí' (2), 'si' (1)", "merge"],
    ),
    "number format": (
        lambda: _frame(fenced=["1", "1.0", "0", "1", "01", "1,0"]),
        {"items": ["fenced"]},
        ["'1' (2), '1.0' (1), '01' (1), '1,0' (1)", "number format", "merge"],
    ),
    "don't know": (
        lambda: _frame(fenced=["yes", "Don’t know", "no", "yes", "no", "no"]),
        {"items": ["fenced"]},
        ["item 'fenced'", "(1) in row 2", "no_answer = [", "categories = ['no', 'yes',"],
    ),
    "99": (
        lambda: _frame(fenced=[1, 0, 99, 1, 0, 99]),
        {"items": ["fenced"]},
        ["'99' (2) in rows 3, 6", "no_answer = ['99']", "categories = ['0', '1', '99']"],
    ),
    "-9": (
        lambda: _frame(fenced=[1, 0, -9, 1, 0, 1]),
        {"items": ["fenced"]},
        ["'-9' (1) in row 3", "no_answer"],
    ),
    "a dot": (
        lambda: _frame(fenced=["yes", ".", "no", "yes", "no", "?"]),
        {"items": ["fenced"]},
        ["'.' (1), '?' (1) in rows 2, 6", "look like no answer"],
    ),
    "not among the categories": (
        lambda: _frame(fenced=["yes", "maybe", "no", "yes", "no", "maybe"]),
        {"items": [ItemSpec("fenced", categories=["no", "yes"])]},
        ["'maybe' (2) in rows 2, 6", "categories 'no', 'yes'", "no_answer"],
    ),
    "new category for a fitted model": (
        lambda: _frame(fees=["yes", "no", "yes", "often", "no", "no"]),
        {"items": [FEES]},
        ["'often' (1) in row 4", "The model was fitted"],
    ),
    "ordered without an order": (
        lambda: _frame(wear=["worn", "new", "rusty", "worn", "new", "rusty"]),
        {"items": [ItemSpec("wear", ordered=True)]},
        ["item 'wear'", "marked as ordered", "categories"],
    ),
    "yes is no category": (
        _frame,
        {"items": [ItemSpec("fees", yes="always")]},
        ["item 'fees'", "'always'", "Set yes"],
    ),
    "categories twice": (
        _frame,
        {"items": [ItemSpec("fees", categories=["no", "yes", "no"])]},
        ["item 'fees'", "'no' more than once"],
    ),
    "merged twice": (
        lambda: _frame(fenced=["y", "yes", "no", "n", "no", "no"]),
        {"items": [ItemSpec("fenced", merge={"yes": ["y", "n"], "no": ["n"]})]},
        ["merge puts 'n' into 'yes' and into 'no'"],
    ),
    "no_answer a text": (
        _frame,
        {"items": ["fees"], "no_answer": "NA"},
        ["no_answer='NA' is not a list", "write ['NA']"],
    ),
    "items one number": (_frame, {"items": 5}, ["items=5 is not a list"]),
    "no_answer a number": (
        _frame,
        {"items": ["fees"], "no_answer": 99},
        ["no_answer=99 is not a list", "write [99]"],
    ),
    "merge a list": (_frame, {"items": ["fees"], "merge": ["x"]}, ["merge=['x'] is no mapping"]),
    "merge into a number": (
        _frame,
        {"items": ["fees"], "merge": {"yes": 1}},
        ["merge, 'yes'=1 is not a list"],
    ),
    "keep_only a list": (
        _frame,
        {"items": ["fees"], "keep_only": ["x"]},
        ["keep_only=['x'] is no mapping"],
    ),
    "case a number": (_frame, {"items": ["fees"], "case": 3}, ["case=3 is no column name"]),
    "missing id": (
        lambda: _frame(committee=["a", None, "c", "d", "e", "f"]),
        {"items": ["fees"], "case": "committee"},
        ["case column 'committee'", "no id in row 2"],
    ),
    "id twice": (
        lambda: _frame(committee=["a", "b", "a", "d", "e", "f"]),
        {"items": ["fees"], "case": "committee"},
        ["case column 'committee'", "'a' in rows 1, 3", "keep_only"],
    ),
    "missing group": (
        lambda: _frame(district=["north", None, "south", "", "north", "south"]),
        {"items": ["fees"], "group": "district"},
        ["group column 'district'", "no group in rows 2, 4", "keep_only"],
    ),
    "group spelled twice": (
        lambda: _frame(district=["north", "North", "south", "south", "north", "south"]),
        {"items": ["fees"], "group": "district"},
        ["group column 'district'", "'north', 'North' differ only"],
    ),
    "group unknown to the model": (
        lambda: _frame(district=["north", "sooth", "south", "south", "north", "south"]),
        {"items": ["fees"], "group": Groups("district", ("north", "south"))},
        ["'sooth' in row 2", "near names: 'south'"],
    ),
    "group is an id": (
        lambda: pd.DataFrame({"fees": ["no", "yes"] * 10, "who": [f"c{i}" for i in range(20)]}),
        {"items": ["fees"], "group": "who"},
        ["group column 'who'", "probably an id", "case="],
    ),
    "negative count": (
        lambda: _frame(n=[1, 2, -3, 4, 5, 6]),
        {"items": ["fees"], "counts": "n"},
        ["counts column 'n'", "negative count ('-3') in row 3"],
    ),
    "fractional count": (
        lambda: _frame(n=[1.5, 2, 3, 4, 5, 6]),
        {"items": ["fees"], "counts": "n"},
        ["'1.5'", "row 1", "Is this a sampling weight?"],
    ),
    "missing count": (
        lambda: _frame(n=[1, None, 3, 4, 5, 6]),
        {"items": ["fees"], "counts": "n"},
        ["no count in row 2", "Fill it in"],
    ),
    "count in words": (
        lambda: _frame(n=["1", "two", "3", "4", "5", "6"]),
        {"items": ["fees"], "counts": "n"},
        ["not a number ('two') in row 2"],
    ),
    "count with thousands": (
        lambda: _frame(n=["1,000", "2", "3.000", "4", "5", "6"]),
        {"items": ["fees"], "counts": "n"},
        ["three digits after a comma", "('1,000', '3.000') in rows 1, 3", "without separators"],
    ),
    "counts all nought": (
        lambda: _frame(n=[0] * 6),
        {"items": ["fees"], "counts": "n"},
        ["all counts are 0"],
    ),
    "endless count": (
        lambda: _frame(n=[1e15, 2, 3, 4, 5, 6]),
        {"items": ["fees"], "counts": "n"},
        ["beyond all measure", "row 1"],
    ),
    "weight": (_frame, {"items": ["fees"], "weight": "w"}, ["weight: there is no column 'w'"]),
    "cluster": (_frame, {"items": ["fees"], "cluster": "v"}, ["cluster: there is no column 'v'"]),
    "stratum": (_frame, {"items": ["fees"], "stratum": "s"}, ["stratum: there is no column 's'"]),
    "keep_only unknown column": (
        _frame,
        {"items": ["fees"], "keep_only": {"yaer": ["2025"]}},
        ["keep_only", "no column 'yaer'"],
    ),
    "keep_only unknown value": (
        lambda: _frame(year=[2024, 2025] * 3),
        {"items": ["fees"], "keep_only": {"year": [2026]}},
        ["column 'year' has no value '2026'", "It has '2024', '2025'"],
    ),
    "keep_only keeps nothing": (
        lambda: _frame(year=[2024, 2025] * 3, half=["a", "b"] * 3),
        {"items": ["fees"], "keep_only": {"year": [2024], "half": ["b"]}},
        ["keeps no row", "year: [2024]"],
    ),
    "no rows": (lambda: _frame().iloc[:0], {"items": ["fees"]}, ["no rows of answers"]),
    "not a frame": (lambda: {"fees": YES_NO}, {"items": ["fees"]}, ["dict", "pandas, polars"]),
    "lists in cells": (
        lambda: _frame(fenced=[["a"], ["b"], ["a"], ["b"], ["a"], ["a"]]),
        {"items": ["fenced"]},
        ["column 'fenced'", "type list", "Turn it into"],
    ),
    "periods in cells": (
        lambda: _frame(fenced=pd.period_range("2025-01", periods=6, freq="M")),
        {"items": ["fenced"]},
        ["column 'fenced'", "Period"],
    ),
}


@pytest.mark.parametrize("name", FRAMES)
def test_malformed_frame(name: str) -> None:
    make, roles, parts = FRAMES[name]
    with pytest.raises(ResponsesError) as caught:
        Responses.from_frame(make(), **roles)
    for part in parts:
        assert part in str(caught.value)


def test_all_problems_at_once() -> None:
    frame = _frame(fenced=["yes"] * 6, mechanic=[1, 0, 99, 1, 0, 1], committee=list("aacdef"))
    with pytest.raises(ResponsesError) as caught:
        Responses.from_frame(frame, items=["fenced", "mechanic", "fes"], case="committee")
    text = str(caught.value)
    assert text.startswith("the data frame: 4 problems")
    for part in ("'fes'", "'a' in rows 1, 2", "item 'fenced'", "item 'mechanic'"):
        assert part in text


def test_first_five_rows_are_named() -> None:
    frame = pd.DataFrame({"fees": ["yes", "no", *["refused"] * 9]})
    with pytest.raises(ResponsesError, match="rows 3, 4, 5, 6, 7 and 4 more"):
        Responses.from_frame(frame, items=["fees"])


@pytest.mark.parametrize(
    ("arguments", "part"),
    [
        ({"name": "fees", "categories": "yes"}, r"categories='yes' is not a list"),
        ({"name": "fees", "categories": 5}, r"categories=5 is not a list"),
        ({"name": "fees", "merge": ["x"]}, r"merge=\['x'\] is no mapping"),
        ({"name": "fees", "merge": {"yes": "Y"}}, r"merge='Y' is not a list"),
        ({"name": "fees", "no_answer": 9}, r"no_answer=9 is not a list"),
        ({"name": "fees", "fitted": True}, r"needs the fitted model's categories"),
        ({"name": 3}, r"an item's name is 3"),
    ],
)
def test_malformed_spec(arguments: dict[str, Any], part: str) -> None:
    with pytest.raises(ResponsesError, match=part):
        ItemSpec(**arguments)
