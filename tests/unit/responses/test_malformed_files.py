"""Every malformed file gives one error that says what, where and what to do."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.responses import Responses

FILES: dict[str, tuple[str, bytes, dict[str, Any], list[str]]] = {
    "empty": ("a.csv", b"", {}, ["a.csv", "empty (0 bytes)"]),
    "blank": ("a.csv", b"\n \n", {}, ["a.csv", "the file is empty"]),
    "header only": ("a.csv", b"fees,meets\n", {}, ["a.csv", "no rows of answers"]),
    "ragged": (
        "a.csv",
        b"fees,meets\nyes,no\nyes\nno,no\nno,yes,yes\n",
        {},
        ["a.csv", "2 columns (separated by comma)", "line 3 has 1, line 5 has 3", "quotes"],
    ),
    "ragged by semicolon": (
        "a.csv",
        b"fees;meets\nyes;no\nyes;1;2\nno;no\n",
        {},
        ["separated by semicolon", "line 3 has 3"],
    ),
    "wrong encoding": (
        "a.csv",
        "fees,meets\nyes,no\nsí,no\n".encode("latin-1"),
        {},
        ["a.csv, line 3", "b'\\xed'", "not UTF-8", "encoding='cp1252'", "'sí,no'"],
    ),
    "wrong encoding given": (
        "a.csv",
        "fees,meets\nsí,no\n".encode(),
        {"encoding": "ascii"},
        ["a.csv, line 2", "not ascii text"],
    ),
    "unknown encoding": (
        "a.csv",
        b"fees\nyes\n",
        {"encoding": "utf9"},
        ["unknown encoding 'utf9'"],
    ),
    "utf-16": ("a.csv", "fees\nyes\nno\n".encode("utf-16"), {}, ["UTF-16", "encoding='utf-16'"]),
    "zero bytes": ("a.csv", b"fees\nyes\0\nno\n", {}, ["a.csv, line 2", "zero byte"]),
    "open quote": (
        "a.csv",
        b'fees,meets\nyes,"no\nyes,no\nno,yes\n',
        {},
        ["a.csv, line 2", "quote"],
    ),
    "header row too low": (
        "a.csv",
        b"fees\nyes\nno\n",
        {"header_row": 9},
        ["header_row is 9", "3 lines"],
    ),
    "header row 0": ("a.csv", b"fees\nyes\nno\n", {"header_row": 0}, ["header_row is 0"]),
    "no column names": ("a.csv", b",\nyes,no\n", {}, ["a.csv, line 1", "no column names"]),
    "columns twice": (
        "a.csv",
        b"fees,meets,fees\nyes,no,no\n",
        {},
        ["a.csv", "'fees' in columns 1, 3"],
    ),
    "separator too long": ("a.csv", b"fees\nyes\n", {"separator": "::"}, ["one character"]),
    "separator a quote": ("a.csv", b"fees\nyes\n", {"separator": '"'}, ["one character"]),
    "separator a number": ("a.csv", b"fees\nyes\n", {"separator": 3}, ["separator is 3"]),
    "encoding a number": ("a.csv", b"fees\nyes\n", {"encoding": 3}, ["encoding is 3"]),
    "encoding of another kind": ("a.csv", b"fees\n", {"encoding": "rot13"}, ["encoding 'rot13'"]),
    "another separator": (
        "a.csv",
        b"fees|meets\nyes|no\n",
        {},
        ["no column 'fees'", "'fees|meets' (one column: is the separator right?)"],
    ),
    "sheet of a text file": ("a.csv", b"fees\nyes\n", {"sheet": "x"}, ["sheet does not apply"]),
    "workbook named csv": ("a.csv", b"PK\x03\x04rest", {}, ["is not a text file", ".xlsx"]),
    "not a workbook": ("a.xlsx", b"fees\nyes\n", {}, ["a.xlsx", "not an Excel workbook"]),
    "damaged parquet": ("a.parquet", b"PAR1 nonsense", {}, ["a.parquet", "cannot be read"]),
    "damaged sav": ("a.sav", b"nonsense", {}, ["a.sav", "cannot be read", "damaged"]),
    "damaged dta": ("a.dta", b"nonsense", {}, ["a.dta", "cannot be read"]),
    "damaged sas": ("a.sas7bdat", b"nonsense", {}, ["a.sas7bdat", "cannot be read"]),
    "damaged xpt": ("a.xpt", b"nonsense", {}, ["a.xpt", "cannot be read"]),
    "old workbook": ("a.xls", b"nonsense", {}, ["'.xls' are not read", "save it as .xlsx"]),
    "unknown ending": ("a.qqq", b"nonsense", {}, ["'.qqq' are not read", ".csv"]),
    "encoding of parquet": ("a.parquet", b"x", {"encoding": "utf-8"}, ["encoding does not apply"]),
    "variants with lines": (
        "a.csv",
        b"fees\nyes\nno\n\n99\n99\n",
        {},
        ["item 'fees'", "'99' (2) in lines 5, 6"],
    ),
}


@pytest.mark.parametrize("name", FILES)
def test_malformed_file(name: str, tmp_path: Path) -> None:
    file, content, how, parts = FILES[name]
    (tmp_path / file).write_bytes(content)
    with pytest.raises(ResponsesError) as caught:
        Responses.read(tmp_path / file, items=["fees"], **how)
    for part in parts:
        assert part in str(caught.value)
    assert str(tmp_path) not in str(caught.value)


def test_missing_file_folder_and_sheets(tmp_path: Path) -> None:
    (tmp_path / "committees.csv").write_text("fees\nyes\nno\n")
    with pytest.raises(ResponsesError, match=r"no such file \(near names: 'committees.csv'\)"):
        Responses.read(tmp_path / "comittees.csv", items=["fees"])
    with pytest.raises(ResponsesError, match="is a folder"):
        Responses.read(tmp_path, items=["fees"])
    frame = pd.DataFrame({"fees": ["yes", "no"]})
    with pd.ExcelWriter(tmp_path / "two.xlsx") as book:
        frame.to_excel(book, sheet_name="answers", index=False)
        frame.to_excel(book, sheet_name="notes", index=False)
    with pytest.raises(ResponsesError, match=r"has 2 sheets \('answers', 'notes'\)"):
        Responses.read(tmp_path / "two.xlsx", items=["fees"])
    with pytest.raises(ResponsesError, match=r"no sheet 'answer' \(near names: 'answers'\)"):
        Responses.read(tmp_path / "two.xlsx", items=["fees"], sheet="answer")
    with pytest.raises(ResponsesError, match="no sheet 3"):
        Responses.read(tmp_path / "two.xlsx", items=["fees"], sheet=3)
    with pytest.raises(ResponsesError, match="no column names in row 40"):
        Responses.read(tmp_path / "two.xlsx", items=["fees"], sheet=1, header_row=40)


def test_two_codes_with_one_label(tmp_path: Path) -> None:
    import pyreadstat

    frame = pd.DataFrame({"fees": [1.0, 2.0, 3.0, 1.0]})
    labels = {"fees": {1.0: "no", 2.0: "yes", 3.0: "yes"}}
    pyreadstat.write_sav(frame, tmp_path / "a.sav", variable_value_labels=labels)
    with pytest.raises(ResponsesError, match=r"codes '2', '3' have the same name 'yes'"):
        Responses.read(tmp_path / "a.sav", items=["fees"])
    settled = Responses.read(tmp_path / "a.sav", items=["fees"], merge={"yes": ["2", "3"]})
    assert settled.codes[:, 0].tolist() == [0, 1, 1, 0]
