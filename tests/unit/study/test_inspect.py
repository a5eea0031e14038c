"""What `inspect` says of a workbook with a title above its header."""

from __future__ import annotations

from pathlib import Path

import pytest
from openpyxl import Workbook

from bayeslca.study.inspect import inspection


@pytest.fixture
def workbook(tmp_path: Path) -> Path:
    book = Workbook()
    page = book.active
    page.title = "Herds 2026"
    for row in (["A survey of herds"], ["animal", "blood", "milk"], *_animals()):
        page.append(row)
    book.create_sheet("Notes").append(["x"])
    book.save(tmp_path / "herds.xlsx")
    return tmp_path / "herds.xlsx"


def _animals() -> list[list[str]]:
    results = ["pos", "neg", "neg", "n.d."]
    return [[f"a{n}", results[n % 2], results[n % 4]] for n in range(12)]


def test_a_title_above_the_header_is_pointed_out(workbook: Path) -> None:
    said = inspection(workbook, sheet="Herds 2026")
    assert "2 of 3 columns have no name in row 1" in said
    assert "--header-row 2." in said


def test_the_next_command_reads_the_file_in_the_same_way(workbook: Path) -> None:
    said = inspection(workbook, sheet="Herds 2026", header_row=2)
    assert "have no name" not in said
    assert said.endswith("herds.xlsx --sheet 'Herds 2026' --header-row 2 -o study.toml")


def test_a_test_that_was_not_done_is_probably_no_answer(workbook: Path) -> None:
    # "n.d.", not done or not determined, of laboratory sheets: common practice, no source.
    assert "probably no answer: 'n.d.'" in inspection(workbook, sheet=1, header_row=2)
