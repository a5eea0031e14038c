"""All tables as one workbook, with a sheet that explains every column."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bayeslca.report.columns import column
from bayeslca.report.tables import FileTable, records

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

WIDEST = 60


def write_workbook(
    path: Path, tables: Sequence[FileTable], notes: Sequence[str], *, warning: str = ""
) -> None:
    """Write the tables as sheets; text from data stays text, whatever it begins with.

    Parameters
    ----------
    path : Path
    tables : sequence of FileTable
    notes : sequence of str
        Lines for the first sheet: what this is, and whether it is to be trusted.
    warning : str
        Stands above every table when the numbers are not to be trusted.
    """
    from openpyxl import Workbook

    book = Workbook()
    first = book.active
    first.title = "read me"
    for note in notes:
        _append(first, [note])
    for table in tables:
        _append(first, [table.name, table.title])
    first.column_dimensions["A"].width = 30
    for table in tables:
        _add_sheet(book.create_sheet(table.name[:31]), table, warning)
    book.save(path)


def _add_sheet(sheet: Worksheet, table: FileTable, warning: str) -> None:
    from openpyxl.styles import Font

    names = [str(name) for name in table.frame.columns]
    if warning:
        _append(sheet, [warning])
    heads = 2 if warning else 1
    _append(sheet, [column(name).words for name in names])
    _append(sheet, names)
    for cell in sheet[heads]:
        cell.font = Font(bold=True)
    for cell in sheet[heads + 1]:
        cell.font = Font(italic=True, color="FF595959")
    for record in records(table.frame):
        _append(sheet, [record[name] for name in names])
    sheet.freeze_panes = f"A{heads + 2}"
    for cells in sheet.columns:
        longest = max(len(str(cell.value or "")) for cell in cells[heads - 1 : 200])
        sheet.column_dimensions[cells[0].column_letter].width = min(WIDEST, max(10, longest + 2))


def _append(sheet: Worksheet, values: Sequence[Any]) -> None:
    row = sheet.max_row + 1 if sheet.max_row > 1 or sheet["A1"].value is not None else 1
    for at, value in enumerate(values, start=1):
        cell = sheet.cell(row=row, column=at)
        if isinstance(value, str):
            # Set as a string on purpose: "=1+1" in an answer is an answer, never a formula
            cell.value = _allowed(value)
            cell.data_type = "s"
            cell.quotePrefix = value.startswith(("=", "+", "-", "@"))
        elif isinstance(value, float) and not math.isfinite(value):
            cell.value = None
        else:
            cell.value = value


def _allowed(text: str) -> str:
    """Take out the control characters that a workbook cannot hold."""
    return "".join(c if c.isprintable() or c in "\n\t" else " " for c in text)
