"""All file types and frames give the same responses."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pandas as pd
import polars as pl
import pyarrow as pa
import pyreadstat
import pytest

from bayeslca.responses.item import Item, ItemSpec
from bayeslca.responses.reading import read_table
from bayeslca.responses.responses import Responses

ROLES = {"items": ["fees", "mechanic", "wear"], "case": "committee", "group": "district"}


def _frame() -> pd.DataFrame:
    """60 made-up committees; numbers are floats, because some are missing."""
    rng = np.random.default_rng(20)
    fees = rng.choice(["yes", "no"], 60).astype(object)
    fees[[3, 17]] = None
    mechanic = rng.integers(0, 2, 60).astype(float)
    mechanic[[3, 40]] = np.nan
    return pd.DataFrame(
        {
            "committee": [101 + i for i in range(60)],
            "district": rng.choice(["north", "south", "hills"], 60),
            "fees": fees,
            "mechanic": mechanic,
            "wear": rng.integers(1, 5, 60),
        }
    )


def _write(kind: str, folder: Path) -> Path:
    frame = _frame()
    path = folder / f"answers.{kind}"
    text = frame.assign(fees=frame["fees"].fillna(""))
    if kind == "csv":
        frame.to_csv(path, index=False)
    elif kind == "tsv":
        frame.to_csv(path, index=False, sep="\t")
    elif kind == "txt":
        frame.to_csv(path, index=False, sep=";")
    elif kind == "parquet":
        frame.to_parquet(path)
    elif kind == "xlsx":
        frame.to_excel(path, index=False)
    elif kind == "sav":
        pyreadstat.write_sav(text, path)
    elif kind == "dta":
        pyreadstat.write_dta(text, path)
    elif kind == "xpt":
        pyreadstat.write_xport(text, path, file_format_version=8)
    return path


@pytest.fixture(scope="module")
def expected() -> Responses:
    return Responses.from_frame(_frame(), **ROLES)


def _same(one: Responses, other: Responses) -> None:
    assert one.items == other.items
    assert one.groups == other.groups
    assert one.row_names == other.row_names
    assert np.array_equal(one.codes, other.codes)
    assert np.array_equal(one.group_codes, other.group_codes)
    assert np.array_equal(one.counts, other.counts)
    assert one.data_hash == other.data_hash
    assert one.row_names_hash == other.row_names_hash


@pytest.mark.parametrize("kind", ["csv", "tsv", "txt", "parquet", "xlsx", "sav", "dta", "xpt"])
def test_every_file_type_reads_the_same(kind: str, tmp_path: Path, expected: Responses) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the writers' own
        path = _write(kind, tmp_path)
    responses = Responses.read(path, **ROLES)
    _same(responses, expected)
    assert responses.items[1].categories == ("0", "1")  # never "0.0"
    assert responses.source == f"answers.{kind}"


@pytest.mark.parametrize("kind", ["polars", "lazy", "arrow", "text", "object", "categorical"])
def test_every_frame_reads_the_same(kind: str, expected: Responses) -> None:
    frame = _frame()
    text = frame.astype(object).where(frame.notna(), None)
    taken = {
        "polars": lambda: pl.from_pandas(frame),
        "lazy": lambda: pl.from_pandas(frame).lazy(),
        "arrow": lambda: pa.Table.from_pandas(frame),
        "text": lambda: text.map(lambda v: None if v is None else str(v)),
        "object": lambda: text,
        "categorical": lambda: frame.astype({"fees": "category", "district": "category"}),
    }[kind]()
    _same(Responses.from_frame(taken, **ROLES), expected)


def test_a_frame_is_not_changed() -> None:
    frame = _frame()
    before = frame.copy(deep=True)
    Responses.from_frame(frame, **ROLES, merge={"yes": ["yes", "y"]})
    pd.testing.assert_frame_equal(frame, before)


def test_labels_give_names_order_and_missing(tmp_path: Path) -> None:
    frame = pd.DataFrame(
        {
            "trust": [1.0, 2.0, 3.0, 8.0, 9.0, 3.0, 97.0, np.nan],
            "fees": [1.0, 0.0, 1.0, 1.0, 0.0, 0.0, 1.0, 1.0],
        }
    )
    pyreadstat.write_sav(
        frame,
        tmp_path / "a.sav",
        column_labels={"trust": "Trust in the committee", "fees": "Collects fees"},
        variable_value_labels={
            "trust": {3.0: "low", 2.0: "middle", 1.0: "high", 4.0: "none", 8.0: "don't know"},
            "fees": {0.0: "no", 1.0: "yes"},
        },
        missing_ranges={"trust": [{"lo": 8, "hi": 9}, 97]},
    )
    responses = Responses.read(tmp_path / "a.sav", items=["trust", "fees"])
    assert responses.items == (
        Item("trust", ("high", "middle", "low"), "Trust in the committee"),
        Item("fees", ("no", "yes"), "Collects fees", yes="yes"),
    )
    assert responses.codes[:, 0].tolist() == [0, 1, 2, -1, -1, 2, -1, -1]
    kinds = {finding.kind: finding.message for finding in responses.findings}
    assert "'none'" in kinds["labelled_answers_not_chosen"]
    assert "\"don't know\" (1), '9' (1), '97' (1)" in kinds["declared_missing"]
    assert kinds["declared_missing"].endswith("because the file declares them missing.")


def test_text_files_as_they_come(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_bytes(
        b'\xef\xbb\xbfProvincial office\nfees;"what; else"\r\n"yes";"a;b"\r\n'
        b'no;"c\nd"\r\n\r\nyes;\r\n'
    )
    table = read_table(path, header_row=2)
    assert table.column_names == ("fees", "what; else")
    assert table.column("fees").texts() == ["yes", "no", "yes"]
    assert table.column("what; else").texts() == ["a;b", "c\nd", None]


def test_other_encodings(tmp_path: Path) -> None:
    for encoding in ("cp1252", "utf-16", "utf-8-sig", None):
        path = tmp_path / "a.csv"
        path.write_text("fees\nsí\nno\n", encoding=encoding or "utf-8")
        given = None if encoding == "utf-8-sig" else encoding
        responses = Responses.read(path, items=["fees"], encoding=given)
        assert responses.items[0].categories == ("no", "sí")
        assert responses.items[0].yes == "sí"


def test_a_sheet_below_its_title_with_empty_margins(tmp_path: Path) -> None:
    from openpyxl import Workbook

    book = Workbook()
    page = book.active
    page.title = "answers"
    for row in (["Survey 2025"], [], ["fees", "mechanic"], ["yes", 1], ["no", 0.0], ["no", True]):
        page.append(row)
    page.cell(row=90, column=9).value = "  "
    book.save(tmp_path / "a.xlsx")
    table = read_table(tmp_path / "a.xlsx", header_row=3)
    assert table.n_rows == 3
    assert table.column("mechanic").texts() == ["1", "0", "True"]
    assert table.place([1]) == "row 5"


def test_types_of_cells() -> None:
    frame = pd.DataFrame(
        {
            "truth": pd.array([True, False, None], dtype="boolean"),
            "small": np.array([0.1, 1.0, np.nan], dtype=np.float32),
            "mixed": [1, "b", 2.0],
            "truth or number": pd.Series([1.0, False, None], dtype=object),
            "when": pd.to_datetime(["2025-03-01", None, "2025-03-02"]),
            "text": ["1.0", "2.0", "2.5"],
            "zeros": ["01", "02", None],
        }
    )
    from bayeslca.responses.frames import table_from_frame

    table = table_from_frame(frame)
    got = {name: table.column(name).texts() for name in table.column_names}
    assert got == {
        "truth": ["True", "False", None],
        "small": ["0.1", "1", None],
        "mixed": ["1", "b", "2"],
        "truth or number": ["1", "False", None],
        "when": ["2025-03-01", None, "2025-03-02"],
        "text": ["1", "2", "2.5"],
        "zeros": ["01", "02", None],
    }
    assert [table.column(n).type for n in ("truth", "small", "when", "text")] == [
        "boolean",
        "number",
        "date",
        "text",
    ]


def test_new_cases_take_the_fitted_items() -> None:
    fitted = Responses.from_frame(_frame(), **ROLES)
    new = pd.DataFrame(
        {
            "wear": [4.0, np.nan],
            "fees": ["Yes", "Yes"],
            "mechanic": [None, None],
            "district": "south",
        }
    )
    again = Responses.from_frame(
        new, items=fitted.items, group=fitted.groups, merge={"yes": ["Yes"]}
    )
    assert again.items == fitted.items
    assert again.groups == fitted.groups
    assert again.codes.tolist() == [[1, -1, 3], [1, -1, -1]]
    specs = [
        ItemSpec(i.name, i.categories, merge={"yes": ["Yes"]}, fitted=True) for i in again.items[:2]
    ]
    assert Responses.from_frame(new, items=specs).codes.tolist() == [[1, -1], [1, -1]]
