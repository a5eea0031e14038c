"""Columns beside the answers, brought into the order of the responses' cases.

Covariates, outcomes, units and weights stand in the file of the answers or in another one. Cases
are matched by their ids; what cannot be matched is named, never guessed.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bayeslca._typing import Bools, Ints
from bayeslca.exceptions import ResponsesError
from bayeslca.findings import Finding
from bayeslca.responses.item_column import keep_rows
from bayeslca.responses.problems import Problems, listed_with_counts
from bayeslca.responses.raw_table import RawColumn, RawTable
from bayeslca.responses.spelling import number_of

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.responses.responses import Responses

Kind = Literal["number", "category"]

_THOUSAND = re.compile(r"[+-]?[1-9]\d{0,2},\d{3}")
MOST_SHOWN = 5
MOSTLY = 0.5
"""A column with at least this share of numbers is one of numbers; its other values are named."""


@dataclass(frozen=True, eq=False)
class CaseTable:
    """Columns in the order of the responses' rows.

    Attributes
    ----------
    frame : DataFrame
        A row per row of the responses, indexed 0 to N - 1: numbers as float64 (nan where there is
        none), everything else as text (None where there is none).
    kinds : mapping of str to {"number", "category"}
        What each column holds.
    source : str
        Where the columns came from, for the report; no folders.
    findings : tuple of Finding
        Cases without a row there, and rows of other cases.
    """

    frame: pd.DataFrame
    kinds: Mapping[str, Kind]
    source: str = ""
    findings: tuple[Finding, ...] = ()

    def missing(self, columns: Sequence[str] | None = None) -> Bools:
        """Return which rows (N,) miss a value in any of the columns (in any at all: None)."""
        chosen = self.frame if columns is None else self.frame[list(columns)]
        return np.asarray(chosen.isna().any(axis=1), dtype=np.bool_)

    def numbers(self, column: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        """Return a column of numbers (N,), nan where there is none.

        Raises
        ------
        ResponsesError
            When it does not hold numbers.
        """
        if self.kinds[column] != "number":
            values = self.frame[column].value_counts().to_dict()
            msg = (
                f"{self.source or 'the data frame'}: column {column!r} should hold numbers; found "
                f"{listed_with_counts({str(v): int(n) for v, n in values.items()}, MOST_SHOWN)}."
            )
            raise ResponsesError(msg)
        return self.frame[column].to_numpy(dtype=np.float64)


def read_case_table(
    responses: Responses,
    data: Any,
    columns: Sequence[str],
    *,
    case: str | None = None,
    kinds: Mapping[str, Kind] | None = None,
    no_answer: Sequence[Any] = (),
    keep_only: Mapping[str, Sequence[Any]] | None = None,
    sheet: str | int | None = None,
    header_row: int = 1,
    encoding: str | None = None,
    separator: str | None = None,
) -> CaseTable:
    """Bring columns of a file or data frame into the order of the responses' cases.

    Parameters
    ----------
    responses : Responses
        Of single cases. With case ids, rows are matched by id; without, ``data`` must have as
        many rows, in the same order.
    data : path, or any data frame that narwhals reads
        The file of the answers itself, or another one.
    columns : sequence of str
    case : str, optional
        Column of case ids in ``data``; named like that of the answers when left out.
    kinds : mapping of str to {"number", "category"}, optional
        What a column holds, where that should not be found out: codes such as 1, 2, 3 may be
        categories.
    no_answer : sequence
        Values that mean that there is none; empty cells always do.
    keep_only : mapping of str to sequence, optional
        Values of a column whose rows are kept, as for the answers.
    sheet, header_row, encoding, separator
        How to read a file; see :meth:`bayeslca.Responses.read`.

    Returns
    -------
    CaseTable

    Raises
    ------
    ResponsesError
        When a column or the id column is missing, ids stand more than once, no case is found,
        or a column mixes numbers and other values.
    """
    if responses.is_table_of_patterns:
        msg = (
            "the answers are a table of patterns with counts, so it is not known which case has "
            f"which {columns[0]!r}. Read the answers with a row for each case."
        )
        raise ResponsesError(msg)
    if isinstance(data, (str, Path)):
        from bayeslca.responses.reading import read_table

        table = read_table(
            data, sheet=sheet, header_row=header_row, encoding=encoding, separator=separator
        )
    else:
        from bayeslca.responses.frames import table_from_frame

        table = table_from_frame(data)
    problems = Problems(table.title)
    for name in dict.fromkeys(columns):
        if name not in table.column_names:
            problems.add(table.no_column(name))
    problems.stop_if_any()
    rows = _kept(table, keep_only or {})
    row_of_case, findings = _matched(responses, table, case, rows, problems)
    problems.stop_if_any()
    values, found_kinds = {}, {}
    for name in dict.fromkeys(columns):
        column = table.column(name)
        kind = (kinds or {}).get(name) or _kind(column, rows, no_answer, table, problems)
        found_kinds[name] = kind
        values[name] = _values(column, kind, row_of_case, no_answer)
    problems.stop_if_any()
    import pandas as pd

    frame = pd.DataFrame(
        {name: pd.Series(value, dtype=value.dtype) for name, value in values.items()}
    )
    return CaseTable(frame, found_kinds, table.source, findings)


def _kept(table: RawTable, keep_only: Mapping[str, Sequence[Any]]) -> Ints:
    rows = np.arange(table.n_rows)
    for name, wanted in keep_only.items():
        texts = np.array(table.column(name).texts(), dtype=object)
        rows = rows[np.isin(texts[rows], [str(value) for value in wanted])]
    return rows


def _matched(
    responses: Responses, table: RawTable, case: str | None, rows: Ints, problems: Problems
) -> tuple[Ints, tuple[Finding, ...]]:
    """Return for each case its row in the table, -1 where it has none."""
    name = case or responses.case_name
    if responses.case_ids is None or name is None:
        if rows.size != responses.n_rows:
            problems.add(
                f"has {rows.size:,} rows, and there are {responses.n_rows:,} cases without ids. "
                "Read the answers with case=..., so that rows can be matched by id."
            )
        return rows, ()
    if name not in table.column_names:
        problems.add(
            f"{table.no_column(name)} It is needed to match rows with the cases of the answers: "
            "name the column of case ids with case."
        )
        return rows, ()
    column = keep_rows(table.column(name), rows)
    at: dict[str, list[int]] = {}
    for row, text in zip(rows.tolist(), column.texts(), strict=True):
        if text is not None:
            at.setdefault(text.strip(), []).append(row)
    ids = [text.strip() for text in responses.case_ids]
    repeated = [text for text in ids if len(at.get(text, ())) > 1]
    if repeated:
        shown = "; ".join(f"{text!r} in {table.place(at[text])}" for text in repeated[:MOST_SHOWN])
        more = f"; and {len(repeated) - MOST_SHOWN:,} more" if len(repeated) > MOST_SHOWN else ""
        problems.add(
            f"case column {name!r}: ids of cases stand more than once: {shown}{more}. Each case "
            "has one row: correct the ids, or choose rows with keep_only."
        )
    found = np.array([at.get(text, [-1])[0] for text in ids], dtype=np.int64)
    without = [text for text, row in zip(ids, found, strict=True) if row < 0]
    if len(without) == len(ids):
        theirs = ", ".join(repr(text) for text in list(at)[:3])
        problems.add(
            f"case column {name!r}: holds none of the {len(ids):,} cases that gave answers (here "
            f"{theirs}; there {', '.join(repr(text) for text in ids[:3])}). Are these the same "
            "cases, and spelled alike?"
        )
    others = [text for text in at if text not in set(ids)]
    return found, _findings(table.title, without, others, len(ids))


def _findings(
    title: str, without: list[str], others: list[str], n_cases: int
) -> tuple[Finding, ...]:
    out = []
    if without:
        more = ", ..." if len(without) > MOST_SHOWN else ""
        out.append(
            Finding(
                "cases_without_row",
                "warning",
                f"{len(without):,} of {n_cases:,} cases that gave answers have no row in {title}: "
                f"{', '.join(without[:MOST_SHOWN])}{more}. Their values count as missing.",
                remedy="Check that ids are spelled alike in both files.",
                about=tuple(without),
                value=float(len(without)),
            )
        )
    if others:
        more = ", ..." if len(others) > MOST_SHOWN else ""
        out.append(
            Finding(
                "rows_of_other_cases",
                "note",
                f"rows of cases without answers in {title} were left out ({len(others):,}): "
                f"{', '.join(others[:MOST_SHOWN])}{more}.",
                about=tuple(others),
                value=float(len(others)),
            )
        )
    return tuple(out)


def _kind(
    column: RawColumn, rows: Ints, no_answer: Sequence[Any], table: RawTable, problems: Problems
) -> Kind:
    """Find out whether a column holds numbers or categories; note a mixture."""
    gone = {str(value) for value in no_answer}
    counts = {
        value: n
        for value, n in keep_rows(column, rows).counts().items()
        if value not in gone and column.labels.get(value) not in gone
    }
    if column.type == "date":
        problems.add(
            f"column {column.name!r}: holds dates. Turn them into numbers (such as days since a "
            "day) or categories first."
        )
        return "category"
    if any(value in column.labels for value in counts):
        return "category"
    strange = {value: n for value, n in counts.items() if number_of(value) is None}
    n_numbers = sum(counts.values()) - sum(strange.values())
    if not strange:
        thousands = _thousands_or_decimals(counts)
        if thousands:
            where = np.flatnonzero(np.isin(column.codes, _codes_of(column, thousands)))
            problems.add(
                f"column {column.name!r}: {listed_with_counts(thousands, MOST_SHOWN)} in "
                f"{table.place(where)}: a thousand, or a decimal? Write it without a comma."
            )
        return "number"
    if n_numbers < MOSTLY * sum(counts.values()):
        return "category"
    problems.add(
        f"column {column.name!r}: holds numbers and also "
        f"{listed_with_counts(strange, MOST_SHOWN)}, in "
        f"{table.place(np.flatnonzero(np.isin(column.codes, _codes_of(column, strange))))}. If "
        "these mean that there is no value, say so with no_answer; if the column holds "
        "categories, say so with kinds (in a study file: categories)."
    )
    return "number"


def _thousands_or_decimals(counts: Mapping[str, int]) -> dict[str, int]:
    """Return numbers such as ``1,234`` that may be thousands; none where commas are decimals."""
    commas = {value: n for value, n in counts.items() if "," in value}
    unclear = {value: n for value, n in commas.items() if _THOUSAND.fullmatch(value.strip())}
    return unclear if len(unclear) == len(commas) else {}


def _codes_of(column: RawColumn, values: Mapping[str, int]) -> list[int]:
    return [column.values.index(value) for value in values]


def _values(column: RawColumn, kind: Kind, row_of_case: Ints, no_answer: Sequence[Any]) -> Any:
    gone = {str(value) for value in no_answer}
    codes = np.where(row_of_case >= 0, column.codes[row_of_case], -1)
    names = column.names()
    kept = [None if value in gone or names[value] in gone else value for value in column.values]
    if kind == "number":
        as_number = [np.nan if value is None else number_of(value) for value in kept]
        looked_up = [np.nan if number is None else number for number in as_number]
        return np.array([*looked_up, np.nan], dtype=np.float64)[codes]
    texts = [None if value is None else names[value].strip() for value in kept]
    return np.array([*texts, None], dtype=object)[codes]
