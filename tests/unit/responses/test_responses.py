"""Responses: roles, categories, findings, tables and text."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.category_order import infer_yes, order_categories
from bayeslca.responses.item import Item, ItemSpec
from bayeslca.responses.no_answers import codes_for_no_answer, says_no_answer, undeclared_no_answers
from bayeslca.responses.responses import Responses


def _one(values: list[object], **spec: object) -> Responses:
    frame = pd.DataFrame({"fees": pd.Series(values, dtype=object)})
    return Responses.from_frame(frame, items=[ItemSpec("fees", **spec)])  # type: ignore[arg-type]


def _messages(responses: Responses, kind: str) -> list[str]:
    return [finding.message for finding in responses.findings if finding.kind == kind]


def test_merge_settles_spellings() -> None:
    values: list[object] = ["Yes", "yes", "Y", 1, "no", "NO ", None]
    responses = _one(values, merge={"yes": ["Yes", "Y", "1"], "no": ["NO "]})
    assert responses.items == (Item("fees", ("no", "yes"), yes="yes"),)
    assert responses.codes[:, 0].tolist() == [1, 1, 1, 1, 0, 0, -1]
    assert _messages(responses, "merged_answers") == [
        "Item 'fees': 'Yes' (1), 'Y' (1), '1' (1) counted as 'yes', as merge says.",
        "Item 'fees': 'NO ' (1) counted as 'no', as merge says.",
    ]


def test_declared_no_answers_by_text_number_or_label() -> None:
    values: list[object] = ["1", "0", "99.0", "refused", "1", "NA"]
    assert _one(values, no_answer=[99, "refused", "NA"]).codes[:, 0].tolist() == [
        1,
        0,
        -1,
        -1,
        1,
        -1,
    ]


def test_listing_an_answer_keeps_it() -> None:
    responses = _one(["yes", "no", "don't know"], categories=["no", "don't know", "yes"])
    assert responses.codes[:, 0].tolist() == [2, 0, 1]
    alone = _one(["yes", "yes"], categories=["no", "yes"])
    assert alone.codes[:, 0].tolist() == [1, 1]
    assert _messages(alone, "sparse_category")


def test_categories_may_be_numbers() -> None:
    assert _one([1, 2, 1], categories=[2, 1.0]).codes[:, 0].tolist() == [1, 0, 1]


def test_words_of_one_meaning_are_pointed_at() -> None:
    responses = _one(["yes", "yes", "no", "Y"])
    assert _messages(responses, "answers_of_one_meaning")


@pytest.mark.parametrize(
    ("names", "in_data", "expected", "rule"),
    [
        (["yes", "no"], (), ("no", "yes"), "known pair"),
        (["Positive", "Negative"], (), ("Negative", "Positive"), "known pair"),
        (["TRUE", "FALSE"], (), ("FALSE", "TRUE"), "known pair"),
        (["present", "absent"], (), ("absent", "present"), "known pair"),
        (["10", "9", "-1"], (), ("-1", "9", "10"), "number"),
        (["often", "never", "Always"], (), ("never", "often", "Always"), "known scale"),
        (["b", "C", "a"], (), ("a", "b", "C"), "alphabet"),
        (["b", "a"], ("c", "b", "a"), ("b", "a"), "data"),
    ],
)
def test_order_of_categories(
    names: list[str], in_data: tuple[str, ...], expected: tuple[str, ...], rule: str
) -> None:
    order = order_categories(names, in_data)
    assert (order.categories, order.rule) == (expected, rule)


def test_alphabetical_order_is_stated() -> None:
    assert (
        "(new, rusty, worn)"
        in _messages(_one(["worn", "new", "rusty"]), "alphabetical_categories")[0]
    )
    assert not _messages(_one(["worn", "new"]), "alphabetical_categories")


@pytest.mark.parametrize(
    ("categories", "yes"),
    [
        (["no", "yes"], "yes"),
        (["0", "1"], "1"),
        (["Non", "Oui"], "Oui"),
        (["absent", "present"], "present"),
        (["1", "2"], None),
        (["a", "b"], None),
        (["no", "maybe", "yes"], None),
    ],
)
def test_yes_is_inferred_only_where_clear(categories: list[str], yes: str | None) -> None:
    assert infer_yes(categories) == yes


def test_yes_rule_is_stated_once() -> None:
    frame = pd.DataFrame({"fees": ["no", "yes"], "meets": ["yes", "no"], "well": [0, 1]})
    responses = Responses.from_frame(frame, items=list(frame))
    assert len(_messages(responses, "yes_inferred")) == 2
    assert "fees, meets" in _messages(responses, "yes_inferred")[0]


# Common practice of codebooks, no source.
@pytest.mark.parametrize(
    "text",
    ["Don't know", "DON’T KNOW", "dk", "Refused", "N/A", "n.a.", "NA", "not applicable", "?", ".",
     "99 - Refused", "Don't know / can't say", "prefer not to say", "#N/A", ".a", "missing",
     "Keine Angabe", "NS/NR"],
)  # fmt: skip
def test_words_for_no_answer(text: str) -> None:
    assert says_no_answer(text)


@pytest.mark.parametrize("text", ["no", "none", "never", "yes", "neutral", "other", "a", "nab"])
def test_words_that_are_answers(text: str) -> None:
    assert not says_no_answer(text)


@pytest.mark.parametrize(
    ("values", "suspects"),
    [
        (["0", "1", "9"], {"9"}),
        (["1", "2", "7", "8", "9"], {"7", "8", "9"}),
        (["1", "2", "3", "4", "5", "6", "7"], set()),
        ([str(i) for i in range(11)], set()),
        (["1", "2", "97", "98", "99"], {"97", "98", "99"}),
        (["95", "96", "97", "98"], set()),
        (["0", "1", "999"], {"999"}),
        (["0", "1", "-1"], {"-1"}),
        (["-2", "-1", "0", "1", "2"], {"-1", "-2"}),
        (["no", "yes", "9"], {"9"}),
        (["1 to 6", "7", "8"], set()),
        (["a", "b"], set()),
    ],
)
def test_codes_for_no_answer(values: list[str], suspects: set[str]) -> None:
    assert set(codes_for_no_answer(values)) == suspects


def test_a_label_says_what_its_code_means() -> None:
    assert undeclared_no_answers({"0": "none", "1": "some", "9": "nine or more"}) == ()
    assert undeclared_no_answers({"0": "no", "1": "yes", "8": "refused", "99": "99"}) == (
        "refused",
        "99",
    )


def test_table_of_patterns_with_groups() -> None:
    frame = pd.DataFrame(
        {
            "elisa": ["negative", "positive", "positive", "negative", None],
            "culture": ["negative", "negative", "positive", "positive", None],
            "herd": ["A", "A", "B", "B", "B"],
            "n": [40, 3, 12, 0, 2],
        }
    )
    responses = Responses.from_frame(frame, items=["elisa", "culture"], group="herd", counts="n")
    assert responses.is_table_of_patterns
    assert (responses.n_rows, responses.n_cases, responses.n_set_aside) == (4, 57, 2)
    assert responses.units.count.tolist() == [40, 3, 12]
    assert responses.units.unit_of_row.tolist() == [0, 1, 2, -1]
    assert responses.units.group.tolist() == [0, 0, 1]
    assert responses.groups is not None
    assert responses.groups.levels == ("A", "B")
    assert {"patterns_without_cases", "cases_set_aside"} <= {f.kind for f in responses.findings}


def test_keep_only_and_its_finding() -> None:
    frame = pd.DataFrame(
        {"fees": ["yes", "no", "maybe", "yes"], "year": [2025, 2025, 2024, 2025.0]}
    )
    responses = Responses.from_frame(frame, items=["fees"], keep_only={"year": ["2025"]})
    assert responses.items[0].categories == ("no", "yes")  # 'maybe' was left out with its row
    assert _messages(responses, "rows_left_out") == ["1 of 4 rows left out, as keep_only says."]


def _sample() -> Responses:
    frame = pd.DataFrame(
        {
            "fees": ["yes", "no", None, "yes", None],
            "meets": ["no", "no", "yes", "no", None],
            "who": list("abcde"),
        }
    )
    return Responses.from_frame(frame, items=["fees", "meets"], case="who")


def test_summary() -> None:
    table = _sample().summary()
    assert table.values.tolist() == [
        ["fees", "no", 1, 1 / 3, 2],
        ["fees", "yes", 2, 2 / 3, 2],
        ["meets", "no", 3, 0.75, 1],
        ["meets", "yes", 1, 0.25, 1],
    ]
    assert table.attrs == {"n_cases": 5, "n_set_aside": 1, "n_patterns": 3, "n_complete": 3}


def test_patterns_and_missing_patterns() -> None:
    patterns = _sample().patterns()
    assert patterns.to_dict("list") == {
        "fees": ["yes", None, "no"],
        "meets": ["no", "yes", "no"],
        "count": [2, 1, 1],
    }
    assert _sample().missing_patterns().to_dict("list") == {
        "missing": ["none", "fees", "fees, meets"],
        "n_missing": [0, 1, 2],
        "count": [3, 1, 1],
    }


def test_with_items_sets_aside_anew() -> None:
    only = _sample().with_items(["fees"])
    assert only.n_set_aside == 2
    assert [f.message for f in only.findings if f.kind == "cases_set_aside"] == [
        "2 cases without a single answer: set aside, kept in the case table."
    ]
    assert only.row_names == ("a", "b", "c", "d", "e")
    turned = _sample().with_items(["meets", "fees"])
    assert np.array_equal(turned.codes, _sample().codes[:, ::-1])
    with pytest.raises(ResponsesError, match=r"no item 'fes' \(near names: 'fees'\)"):
        _sample().with_items(["fes"])


def test_hash_is_of_the_answers_not_of_their_order() -> None:
    frame = _sample().to_frame()
    kept = {"items": ["fees", "meets"], "case": "who"}
    turned = Responses.from_frame(frame.iloc[::-1], **kept)
    assert turned.data_hash == _sample().data_hash
    assert turned.row_names_hash != _sample().row_names_hash
    frame.loc[1, "fees"] = "yes"
    changed = Responses.from_frame(
        frame, items=[ItemSpec("fees", ["no", "yes"]), "meets"], case="who"
    )
    assert changed.data_hash != _sample().data_hash


def test_text_fits_a_terminal_and_is_escaped_in_a_page() -> None:
    script = "<script>alert(1)</script>"
    frame = pd.DataFrame({script: ["no", "yes"], "b" * 90: ["x" * 60, "y" * 60]})
    for i in range(40):
        frame[f"item{i}"] = ["no", "yes"]
    responses = Responses.from_frame(frame, items=list(frame))
    lines = repr(responses).splitlines()
    assert max(map(len, lines)) <= 80
    assert lines[0] == "Responses: 2 cases, 42 items, 2 response patterns"
    assert "... and 12 more items" in repr(responses)
    assert script not in responses._repr_html_()
    assert "&lt;script&gt;" in responses._repr_html_()


def test_parts_must_fit_together() -> None:
    with pytest.raises(ResponsesError, match="codes have the shape"):
        Responses((Item("a", ("x", "y")),), np.zeros((3, 2), np.int16), np.ones(3, np.int64))
    with pytest.raises(ResponsesError, match="counts has 2 entries for 3 rows"):
        Responses((Item("a", ("x", "y")),), np.zeros((3, 1), np.int16), np.ones(2, np.int64))


def test_importing_is_light() -> None:
    code = (
        "import sys, bayeslca.responses.responses\n"
        "print([m for m in ('pandas', 'pyarrow', 'narwhals', 'openpyxl') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
