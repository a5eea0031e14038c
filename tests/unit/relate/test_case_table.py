"""Columns beside the answers: matched by case, and what cannot be matched is named."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.exceptions import ResponsesError
from bayeslca.relate.case_table import read_case_table


def answers(case="committee"):
    frame = pd.DataFrame(
        {
            "committee": ["a", "b", "c", "d"],
            "fees": ["yes", "no", "yes", "no"],
            "meets": ["yes", "no", "no", None],
        }
    )
    return lca.Responses.from_frame(frame, items=["fees", "meets"], case=case)


def other(**changed):
    columns = {
        "committee": ["d", "c", "b", "a"],
        "age": ["4", "3.5", "", "1"],
        "district": ["hill", "lake", None, "hill "],
    }
    return pd.DataFrame(columns | changed)


def test_rows_are_matched_by_id_and_kinds_found_out():
    found = read_case_table(answers(), other(), ["age", "district"])
    assert found.kinds == {"age": "number", "district": "category"}
    assert found.frame["age"].tolist()[0::2] == [1.0, 3.5]
    assert np.isnan(found.frame["age"][1])
    assert found.frame["district"].tolist() == ["hill", None, "lake", "hill"]
    assert found.missing().tolist() == [False, True, False, False]
    assert found.findings == ()


def test_a_file_is_read_like_the_answers(tmp_path):
    path = tmp_path / "more.csv"
    path.write_text("id;age\na;1,5\nb;2\nc;99\nd;4\nx;5\n")
    found = read_case_table(answers(), path, ["age"], case="id", no_answer=[99])
    assert found.source == "more.csv"
    assert found.frame["age"].tolist()[:2] == [1.5, 2.0]
    assert found.missing().tolist() == [False, False, True, False]
    (finding,) = found.findings
    assert finding.kind == "rows_of_other_cases"
    assert finding.about == ("x",)


def test_cases_without_a_row_are_named_and_count_as_missing():
    found = read_case_table(answers(), other().iloc[:3], ["age"])
    (finding,) = found.findings
    assert finding.kind == "cases_without_row"
    assert finding.about == ("a",)
    assert found.missing().tolist() == [True, True, False, False]


def test_codes_may_be_declared_categories():
    found = read_case_table(answers(), other(age=[1, 2, 2, 3]), ["age"], kinds={"age": "category"})
    assert found.frame["age"].tolist() == ["3", "2", "2", "1"]
    with pytest.raises(ResponsesError, match=r"column 'age' should hold numbers; found '2' \(2\)"):
        found.numbers("age")


@pytest.mark.parametrize(
    ("data", "columns", "message"),
    [
        (other(committee=["p", "q", "r", "s"]), ["age"], "holds none of the 4 cases .*'p'.*'a'"),
        (other(committee=["d", "c", "a", "a"]), ["age"], "more than once: 'a' in rows 3, 4"),
        (other(), ["agee"], r"no column 'agee' \(near names: 'age'\)"),
        (other().drop(columns="committee"), ["age"], "no column 'committee'.*match rows"),
        (
            other(age=["1", "2", "3", "old"]),
            ["age"],
            r"column 'age': holds numbers and also 'old' \(1\), in row 4",
        ),
        (other(age=pd.to_datetime(["2024-01-01"] * 4)), ["age"], "column 'age': holds dates"),
    ],
)
def test_what_is_wrong_is_named(data, columns, message):
    with pytest.raises(ResponsesError, match=message):
        read_case_table(answers(), data, columns)


def test_cases_without_ids_are_matched_by_position_only_if_numbers_agree():
    found = read_case_table(answers(case=None), other(), ["age"])
    assert found.frame["age"].tolist()[0] == 4.0
    with pytest.raises(ResponsesError, match="has 3 rows, and there are 4 cases without ids"):
        read_case_table(answers(case=None), other().iloc[:3], ["age"])


def test_a_table_of_patterns_has_no_cases():
    frame = pd.DataFrame({"fees": ["yes", "no"], "n": [3, 4]})
    responses = lca.Responses.from_frame(frame, items=["fees"], counts="n")
    with pytest.raises(ResponsesError, match=r"table of patterns .* which case has which 'age'"):
        read_case_table(responses, other(), ["age"])


@pytest.mark.parametrize(
    ("values", "unclear"),
    [
        (["1,234", "300", "12.5"], True),
        (["1,234", "12,5", "300"], False),  # commas are decimals here
        (["0,125", "0,250", "0,5"], False),
        (["300", "12.5", "7"], False),
    ],
)
def test_a_thousand_or_a_decimal_is_asked_about(values, unclear):
    frame = pd.DataFrame(
        {"id": ["a", "b", "c"], "i": ["yes", "no", "yes"], "j": ["no", "no", "yes"], "x": values}
    )
    responses = lca.Responses.from_frame(frame, items=["i", "j"], case="id")
    if unclear:
        with pytest.raises(ResponsesError, match=r"'1,234' .* a thousand, or a decimal"):
            read_case_table(responses, frame, ["x"])
    else:
        wanted = [float(value.replace(",", ".")) for value in values]
        assert read_case_table(responses, frame, ["x"]).numbers("x").tolist() == wanted
