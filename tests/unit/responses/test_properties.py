"""Whatever comes in: an error of ours, or the answers unchanged."""

from __future__ import annotations

import io
from pathlib import Path

import pandas as pd
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bayeslca.exceptions import BayesLCAError
from bayeslca.responses.columns import describe_columns
from bayeslca.responses.frames import table_from_frame
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.reading import read_table
from bayeslca.responses.responses import Responses
from bayeslca.responses.spelling import as_text, folded

QUIET = settings(
    max_examples=120,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
ANSWERS = st.sampled_from(
    ["yes", "Yes", "no", " no", "1", "1.0", "01", "0", "99", "-9", "dk", "?", "", None, "a", "ä"]
)
CELLS = st.one_of(
    ANSWERS,
    st.none(),
    st.booleans(),
    st.integers(-(10**20), 10**20),
    st.floats(),
    st.text(max_size=6),
    st.binary(max_size=3),
    st.dates(),
    st.decimals(),
)


def _frame(values: list[object]) -> pd.DataFrame:
    return pd.DataFrame({"fees": pd.Series(values, dtype=object)})


@QUIET
@given(st.lists(CELLS, max_size=12))
def test_any_cells_read_unchanged_or_are_refused(values: list[object]) -> None:
    try:
        responses = Responses.from_frame(_frame(values), items=["fees"])
    except BayesLCAError:
        return
    answers = responses.to_frame()["fees"].tolist()
    for value, answer in zip(values, answers, strict=True):
        text = as_text(value)
        assert answer == text or (text is not None and answer == text.split(".")[0])
    assert (responses.units.unit_of_row >= 0).tolist() == [a is not None for a in answers]


@QUIET
@given(st.lists(ANSWERS, min_size=1, max_size=12))
def test_proposals_settle_what_is_asked(values: list[object]) -> None:
    (report,) = describe_columns(table_from_frame(_frame(values)))
    if report.kind != "item":
        return
    spec = ItemSpec(
        "fees", categories=report.categories, merge=report.merge, no_answer=report.no_answer
    )
    responses = Responses.from_frame(_frame(values), items=[spec])
    into = {s: kept for kept, spellings in report.merge.items() for s in spellings}
    for value, answer in zip(values, responses.to_frame()["fees"].tolist(), strict=True):
        if not value:
            assert answer is None
            continue
        read = str(value)
        for spelling in {read, read.removesuffix(".0")}:
            if spelling in report.no_answer:
                assert answer is None
                break
        else:
            assert answer in {into.get(s, s) for s in (read, read.removesuffix(".0"))}


@QUIET
@given(st.binary(max_size=80), st.sampled_from(["csv", "tsv", "txt"]))
def test_any_bytes_as_a_text_file(tmp_path: Path, content: bytes, ending: str) -> None:
    path = tmp_path / f"a.{ending}"
    path.write_bytes(content)
    try:
        table = read_table(path)
        for name in table.column_names:
            assert len(table.column(name).texts()) == table.n_rows
        describe_columns(table)
    except BayesLCAError:
        return


@QUIET
@given(st.text(alphabet='ab,;\t"\n 01', max_size=60))
def test_any_text_reads_as_pandas_reads_it(tmp_path: Path, text: str) -> None:
    path = tmp_path / "a.csv"
    path.write_text(text, newline="")
    try:
        table = read_table(path, separator=",")
        ours = [table.column(name).texts() for name in table.column_names]
    except BayesLCAError:
        return
    theirs = pd.read_csv(
        io.StringIO(text),
        sep=",",
        dtype=str,
        keep_default_na=False,
        index_col=False,
        skip_blank_lines=len(ours) > 1,
        engine="python",
    )
    for position, column in enumerate(ours):
        expected = [
            v if isinstance(v, str) and v.strip() else None for v in theirs.iloc[:, position]
        ]
        assert column == expected


@QUIET
@given(
    st.sampled_from(["xlsx", "parquet", "sav", "dta", "sas7bdat", "xpt"]), st.binary(max_size=60)
)
def test_any_bytes_as_any_file(tmp_path: Path, ending: str, content: bytes) -> None:
    path = tmp_path / f"a.{ending}"
    path.write_bytes(content)
    try:
        table = read_table(path)
        describe_columns(table)
    except BayesLCAError:
        return


@QUIET
@given(st.text(max_size=8))
def test_folding_is_stable(text: str) -> None:
    assert folded(folded(text)) == folded(text)
    assert folded(f" {text} ") == folded(text) or not text.strip()
