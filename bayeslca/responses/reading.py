"""Reading a file of any known type into a raw table."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

from bayeslca.exceptions import BayesLCAError, ResponsesError, near_names
from bayeslca.responses.raw_table import RawTable

TEXT = {".csv", ".tsv", ".tab", ".txt", ".dat"}
PARQUET = {".parquet", ".pq"}
SPREADSHEET = {".xlsx", ".xlsm"}
STATISTICAL = {".sav", ".zsav", ".dta", ".sas7bdat", ".xpt"}
REMEDIES = {
    ".xls": "Open it and save it as .xlsx.",
    ".ods": "Open it and save it as .xlsx or .csv.",
    ".por": "Save it as .sav.",
    ".rds": "Save it as .csv or .parquet.",
    ".rdata": "Save the table as .csv or .parquet.",
    ".zip": "Unpack it and name the file inside.",
    ".gz": "Unpack it and name the file inside.",
    ".feather": "Save it as .parquet.",
    ".json": "Save the table as .csv or .parquet.",
}


def read_table(
    path: str | Path,
    *,
    sheet: str | int | None = None,
    header_row: int = 1,
    encoding: str | None = None,
    separator: str | None = None,
) -> RawTable:
    """Read a file into a raw table, by the ending of its name.

    Parameters
    ----------
    path : str or Path
        CSV or other separated text (.csv, .tsv, .tab, .txt, .dat), Parquet, Excel (.xlsx), SPSS
        (.sav, .zsav), Stata (.dta) or SAS (.sas7bdat, .xpt).
    sheet : str or int or None
        Worksheet by name, or by position from 1; the only one when None.
    header_row : int
        The row with the column names, from 1 (text files and spreadsheets).
    encoding : str or None
        Encoding of a text file (UTF-8 when None) or of a statistical package's file.
    separator : str or None
        What separates the columns of a text file; found out when None.

    Raises
    ------
    ResponsesError
        When the file is missing, of an unknown type, damaged, empty or ragged.
    """
    if not isinstance(path, (str, Path)):
        msg = f"{path!r} is no path of a file. Give it as text."
        raise ResponsesError(msg)
    path = Path(path)
    ending = path.suffix.lower()
    _check_path(path, ending)
    _check_keys(path, ending, sheet, header_row, encoding, separator)
    if ending in TEXT:
        from bayeslca.responses.text_files import read_text_file

        return _guarded(path, read_text_file, header_row, encoding, separator)
    if ending in SPREADSHEET:
        from bayeslca.responses.spreadsheets import read_spreadsheet

        return _guarded(path, read_spreadsheet, sheet, header_row)
    if ending in PARQUET:
        from bayeslca.responses.frames import read_parquet

        return _guarded(path, read_parquet)
    from bayeslca.responses.statistical_files import read_statistical_file

    return _guarded(path, read_statistical_file, encoding)


def _guarded(path: Path, read: Callable[..., RawTable], *arguments: Any) -> RawTable:
    """Turn whatever a reading library raises into an error that names the file."""
    try:
        return read(path, *arguments)
    except BayesLCAError:
        raise
    except PermissionError:
        msg = (
            f"{path.name}: may not be read (no permission). Close it elsewhere, or ask for access."
        )
        raise ResponsesError(msg) from None
    except Exception as error:  # the libraries raise whatever a damaged file makes them trip over
        reason = " ".join(str(error).split())[:200] or type(error).__name__
        msg = (
            f"{path.name}: cannot be read as a {path.suffix.lower()} file ({reason}). The file may "
            "be damaged or of another type; open it in the program that made it and save it anew."
        )
        raise ResponsesError(msg) from error


def _check_path(path: Path, ending: str) -> None:
    known = TEXT | PARQUET | SPREADSHEET | STATISTICAL
    if path.is_dir():
        msg = f"{path.name}: is a folder. Name the file in it."
        raise ResponsesError(msg)
    if not path.exists():
        there = [other.name for other in path.parent.iterdir()] if path.parent.is_dir() else []
        where = "" if path.parent.is_dir() else f" (nor the folder {path.parent})"
        near = near_names(path.name, there, likeness=0.75)
        msg = f"{path}: there is no such file{where}{near}. Check the path."
        raise ResponsesError(msg)
    if ending not in known:
        remedy = REMEDIES.get(ending, "Save it as one of these.")
        msg = (
            f"{path.name}: files ending in {ending or 'nothing'!r} are not read; known endings are "
            f"{', '.join(sorted(known))}. {remedy}"
        )
        raise ResponsesError(msg)
    if path.stat().st_size == 0:
        msg = f"{path.name}: the file is empty (0 bytes). Check that it is the right file."
        raise ResponsesError(msg)


def _check_keys(
    path: Path,
    ending: str,
    sheet: str | int | None,
    header_row: int,
    encoding: str | None,
    separator: str | None,
) -> None:
    """Refuse what does not belong to the file's type: it would be ignored in silence."""
    wrong = []
    if sheet is not None and ending not in SPREADSHEET:
        wrong.append("sheet")
    if header_row != 1 and ending not in SPREADSHEET | TEXT:
        wrong.append("header_row")
    if encoding is not None and ending not in TEXT | STATISTICAL:
        wrong.append("encoding")
    if separator is not None and ending not in TEXT:
        wrong.append("separator")
    if wrong:
        msg = f"{path.name}: {', '.join(wrong)} does not apply to a {ending} file. Take it out."
        raise ResponsesError(msg)
    if encoding is not None and not isinstance(encoding, str):
        msg = f"{path.name}: encoding is {encoding!r}; give its name, such as 'cp1252'."
        raise ResponsesError(msg)
    if isinstance(header_row, bool) or not isinstance(header_row, int) or header_row < 1:
        msg = f"{path.name}: header_row is {header_row!r}; rows are counted from 1. Give 1 or more."
        raise ResponsesError(msg)
    if separator is not None and (
        not isinstance(separator, str) or len(separator) != 1 or separator in '"\r\n'
    ):
        msg = f"{path.name}: separator is {separator!r}; it is one character, such as ';'."
        raise ResponsesError(msg)
