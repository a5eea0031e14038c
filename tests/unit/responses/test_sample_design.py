"""Weights, clusters and strata: what is read, and what is refused by name."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.responses import Responses
from bayeslca.responses.sample_design import SampleDesign


def frame(**columns: Any) -> pd.DataFrame:
    answers = {"fees": ["yes", "no"] * 3, "meets": ["no", "no", "yes"] * 2}
    return pd.DataFrame({**answers, **columns})


def read(columns: dict[str, Any], **roles: Any) -> Responses:
    return Responses.from_frame(frame(**columns), items=["fees", "meets"], **roles)


GOOD = [1.5, 2, 3, 4, 5, 6]

REFUSED: dict[str, tuple[dict[str, Any], dict[str, Any], list[str]]] = {
    "negative": ({"w": [1, 2, -3, 4, 5, 6]}, {"weight": "w"}, ["negative weight ('-3')", "row 3"]),
    "nought": ({"w": [1, 2, 0, 4, 5, 6]}, {"weight": "w"}, ["weight 0", "row 3", "keep_only"]),
    "missing": ({"w": [1, 2, None, 4, 5, 6]}, {"weight": "w"}, ["no weight in row 3"]),
    "text": ({"w": [*"12x456"]}, {"weight": "w"}, ["not a number ('x') in row 3"]),
    "comma": ({"w": ["1,234", *"23456"]}, {"weight": "w"}, ["a thousand, or a decimal?", "row 1"]),
    "no column": ({"wt": GOOD}, {"weight": "w"}, ["weight: there is no column 'w'", "'wt'"]),
    "no name": ({"w": GOOD}, {"weight": 3}, ["weight=3 is no column name"]),
    "item as weight": ({}, {"weight": "fees"}, ["named as items and as weight"]),
    "weight and cluster": (
        {"w": GOOD},
        {"weight": "w", "cluster": "w"},
        ["named as weight and as cluster"],
    ),
    "group as weight": ({"w": GOOD}, {"weight": "w", "group": "w"}, ["as group and as weight"]),
    "torn cluster": (
        {"c": [1, 1, 2, 2, 3, 3], "s": [*"aabbab"]},
        {"cluster": "c", "stratum": "s"},
        ["'3' in 'a', 'b'", "A cluster lies in one stratum"],
    ),
    "lone stratum": (
        {"c": [1, 1, 2, 2, 3, 3], "s": [*"aaaabb"]},
        {"cluster": "c", "stratum": "s"},
        ["one cluster only in 'b'", "merge_lone_strata"],
    ),
    "lone case": ({"s": [*"aaaaab"]}, {"stratum": "s"}, ["one case only in 'b'"]),
    "one cluster": ({"c": [1] * 6}, {"cluster": "c"}, ["there is one in all"]),
    "cluster missing": ({"c": [1, 1, None, 2, 3, 3]}, {"cluster": "c"}, ["no cluster in row 3"]),
    "strata alike": ({"s": ["a", "A", "b"] * 2}, {"stratum": "s"}, ["'A', 'a' differ only"]),
    "counts too": (
        {"n": [1, 2, 3, 4, 5, 6], "w": GOOD},
        {"counts": "n", "weight": "w"},
        ["counts='n' and weight='w'", "one row a case"],
    ),
    "nothing to merge": ({"w": GOOD}, {"weight": "w", "merge_lone_strata": True}, ["needs strata"]),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refused_by_name(name: str) -> None:
    columns, roles, parts = REFUSED[name]
    with pytest.raises(ResponsesError) as caught:
        read(columns, **roles)
    for part in parts:
        assert part in str(caught.value)


def test_what_is_read() -> None:
    columns = {"w": [1, 2, 3, 4, 5, 6.5], "c": [10, 10, 9, 9, 2, 1], "s": [*"bbbbaa"]}
    design = read(columns, weight="w", cluster="c", stratum="s").design
    assert design is not None
    np.testing.assert_array_equal(design.weight, [1, 2, 3, 4, 5, 6.5])
    np.testing.assert_array_equal(design.cluster, [3, 3, 2, 2, 1, 0])  # by number, not by letter
    np.testing.assert_array_equal(design.stratum, [1, 1, 1, 1, 0, 0])
    np.testing.assert_array_equal(design.clusters_in_stratum, [2, 2])
    assert design.degrees_of_freedom == 2
    assert design.effective_size == pytest.approx(21.5**2 / 97.25)
    assert not design.changes_nothing
    assert read({}).design is None


def test_rows_that_keep_only_leaves_out_have_no_weight() -> None:
    columns = {"w": [*"1234", "", "x"], "year": [1, 1, 1, 1, 2, 2]}
    design = read(columns, weight="w", keep_only={"year": [1]}).design
    assert design is not None
    np.testing.assert_array_equal(design.weight, [1, 2, 3, 4])


def test_lone_strata_are_joined_with_the_next_when_asked() -> None:
    columns = {"c": [1, 2, 3, 4, 5, 6], "s": [*"abbccd"]}
    found = read(columns, cluster="c", stratum="s", merge_lone_strata=True)
    assert found.design is not None
    assert found.design.stratum_levels == ("a + b", "c + d")
    np.testing.assert_array_equal(found.design.stratum, [0, 0, 0, 1, 1, 1])
    (finding,) = [f for f in found.findings if f.kind == "strata_merged"]
    assert "'a', 'd'" in finding.message
    assert finding.value == 2


def test_weights_that_say_little_are_noticed() -> None:
    same = read({"w": [2.0] * 6}, weight="w")
    assert [f.kind for f in same.findings if f.kind.startswith("w")] == ["weights_constant"]
    assert same.design is not None
    assert same.design.changes_nothing
    uneven = read({"w": [1.0] * 5 + [50]}, weight="w")
    assert [f.kind for f in uneven.findings if f.kind.startswith("w")] == ["weights_uneven"]


def test_a_group_may_be_the_stratum_too(tmp_path: Path) -> None:
    path = tmp_path / "answers.csv"
    frame(zone=[*"aaabbb"]).to_csv(path, index=False)
    found = Responses.read(path, items=["fees", "meets"], group="zone", stratum="zone")
    assert found.groups is not None
    assert found.design is not None
    assert found.design.n_strata == 2
    assert found.with_items(["fees"]).design is found.design


def test_a_design_by_hand_is_checked() -> None:
    one = np.zeros(2, dtype=np.int64)
    with pytest.raises(ResponsesError, match="2, 2 and 1 entries"):
        SampleDesign(np.ones(2), one, one[:1])
    with pytest.raises(ResponsesError, match="not positive"):
        SampleDesign(np.array([1.0, -1.0]), one, one)
