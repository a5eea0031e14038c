"""The workbook: every table, every column explained, and no formula ever."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest

from bayeslca.report.content import ReportContent
from bayeslca.report.tables import FileTable, file_tables
from bayeslca.report.workbook import write_workbook


def test_sheets_hold_the_tables_with_heads_in_words(content: ReportContent, tmp_path: Path) -> None:
    tables = file_tables(content)
    write_workbook(tmp_path / "t.xlsx", tables, ["A study"])
    book = openpyxl.load_workbook(tmp_path / "t.xlsx")
    assert book.sheetnames == ["read me", *(table.name for table in tables)]
    for table in tables:
        rows = list(book[table.name].iter_rows(values_only=True))
        assert list(rows[1]) == list(table.frame.columns)
        assert len(rows) == 2 + len(table.frame)
        assert all(isinstance(head, str) and head for head in rows[0])
    prevalence = list(book["prevalence"].iter_rows(min_row=3, values_only=True))
    assert prevalence[0][1] == pytest.approx(content.posterior.prevalence()["median"].iloc[0])


@pytest.mark.parametrize(
    "text", ["=1+1", "+1", "-1", "@SUM(A1)", '=HYPERLINK("http://x")', "=cmd|' /C calc'!A0"]
)
def test_text_stays_text(tmp_path: Path, text: str) -> None:
    frame = pd.DataFrame({"item": [text], text: [1.0]})
    write_workbook(tmp_path / "t.xlsx", [FileTable("answers", text, frame)], [text])
    book = openpyxl.load_workbook(tmp_path / "t.xlsx")
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]
    assert sum(cell.value == text for cell in cells) >= 4
    assert all(cell.data_type != "f" for cell in cells)
    guarded = [cell for cell in cells if cell.value == text]
    assert all(cell.quotePrefix for cell in guarded)


def test_numbers_stay_numbers_and_missing_ones_are_empty(tmp_path: Path) -> None:
    frame = pd.DataFrame({"median": [0.5, np.nan, np.inf], "tied": [True, False, True]})
    write_workbook(tmp_path / "t.xlsx", [FileTable("x", "", frame)], [])
    sheet = openpyxl.load_workbook(tmp_path / "t.xlsx")["x"]
    assert [cell.value for cell in sheet["A"][2:]] == [0.5, None, None]
    assert [cell.value for cell in sheet["B"][2:]] == [True, False, True]


def test_a_warning_stands_above_every_table(content: ReportContent, tmp_path: Path) -> None:
    tables = file_tables(content)
    write_workbook(tmp_path / "t.xlsx", tables, [], warning="Not to be trusted yet")
    book = openpyxl.load_workbook(tmp_path / "t.xlsx")
    for table in tables:
        sheet = book[table.name]
        assert sheet["A1"].value == "Not to be trusted yet"
        assert sheet["A3"].value == table.frame.columns[0]
        assert sheet.freeze_panes == "A4"


def test_the_level_of_the_interval_is_explained(content: ReportContent) -> None:
    (columns,) = [table for table in file_tables(content) if table.name == "columns"]
    lower = columns.frame.query("column == 'lower' and table == 'prevalence'")
    assert "95 % interval" in lower["meaning"].iloc[0]


def test_control_characters_do_not_break_the_file(tmp_path: Path) -> None:
    frame = pd.DataFrame({"item": ["a\x00b\x0bc"]})
    write_workbook(tmp_path / "t.xlsx", [FileTable("x", "", frame)], [])
    sheet = openpyxl.load_workbook(tmp_path / "t.xlsx")["x"]
    assert sheet["A3"].value == "a b c"
