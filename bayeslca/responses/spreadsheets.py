"""Excel workbooks, read with openpyxl: sheets, header row, empty margins."""

from __future__ import annotations

from pathlib import Path
from typing import Any
from zipfile import BadZipFile

from bayeslca.exceptions import ResponsesError, near_names
from bayeslca.responses.encode import encode_values
from bayeslca.responses.raw_table import RawTable
from bayeslca.responses.spelling import as_text


def read_spreadsheet(path: Path, sheet: str | int | None, header_row: int) -> RawTable:
    """Read one sheet of a workbook; formulas count as the values they last had."""
    from openpyxl import load_workbook

    try:
        book = load_workbook(path, read_only=True, data_only=True)
    except (BadZipFile, KeyError):
        msg = (
            f"{path.name}: is not an Excel workbook, or is damaged or protected by a password. "
            "Open it in the spreadsheet program and save it as .xlsx without a password."
        )
        raise ResponsesError(msg) from None
    try:
        name = _sheet_name(path.name, book.sheetnames, sheet)
        page = book[name]
        if not hasattr(page, "iter_rows"):
            msg = f"{path.name}: sheet {name!r} is a chart, not a table. Name another sheet."
            raise ResponsesError(msg)
        page.reset_dimensions()  # the size written in the file is often wrong
        rows = [list(row) for row in page.iter_rows(values_only=True)]
    finally:
        book.close()
    return _table(f"{path.name}, sheet {name!r}", path.name, rows, header_row)


def _sheet_name(file: str, names: list[str], sheet: str | int | None) -> str:
    listed = ", ".join(repr(name) for name in names)
    if sheet is None:
        if len(names) > 1:
            msg = (
                f"{file}: has {len(names)} sheets ({listed}). Name one (sheet; --sheet on the "
                "command line)."
            )
            raise ResponsesError(msg)
        return names[0]
    if isinstance(sheet, int):
        if not 1 <= sheet <= len(names):
            msg = f"{file}: there is no sheet {sheet}; sheets are counted from 1: {listed}."
            raise ResponsesError(msg)
        return names[sheet - 1]
    if sheet not in names:
        msg = f"{file}: there is no sheet {sheet!r}{near_names(sheet, names)}. It has {listed}."
        raise ResponsesError(msg)
    return sheet


def _table(place: str, source: str, rows: list[list[Any]], header_row: int) -> RawTable:
    # Formatted but empty rows and columns at the edges are no cases and no items.
    while rows and not any(as_text(value) for value in rows[-1]):
        rows.pop()
    if len(rows) < header_row:
        msg = (
            f"{place}: has no column names in row {header_row}. Check the sheet and the header row."
        )
        raise ResponsesError(msg)
    header, body = rows[header_row - 1], rows[header_row:]
    width = max(
        (i + 1 for row in [header, *body] for i, value in enumerate(row) if as_text(value)),
        default=0,
    )
    header = [*header, *[None] * width][:width]
    if not any(as_text(value) for value in header):
        msg = f"{place}: row {header_row} is empty. Give the row of the column names as header_row."
        raise ResponsesError(msg)
    if not body:
        msg = (
            f"{place}: has column names but no rows of answers. Check the sheet and the header row."
        )
        raise ResponsesError(msg)
    names = tuple(as_text(value) or f"column {i + 1}" for i, value in enumerate(header))
    return RawTable(
        source,
        names,
        len(body),
        lambda position: encode_values(
            names[position], (row[position] if position < len(row) else None for row in body)
        ),
        first_row=header_row + 1,
    )
