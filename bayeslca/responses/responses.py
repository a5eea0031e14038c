"""Responses: what was observed, as every other room reads it."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bayeslca._typing import Ints
from bayeslca.findings import Finding
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.units import Units

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False)
class Responses:
    """Answers of cases to categorical items.

    A row is a case, or a response pattern with a count.

    Attributes
    ----------
    items : tuple of Item
    codes : ndarray of int16, shape (row, item)
        Category codes, ``MISSING`` (-1) where there is no answer.
    counts : ndarray of int64, shape (row,)
        Cases per row; all 1 unless the data are a table of patterns.
    case_ids : tuple of str or None
        One name per row, unique; None when no case column was given (rows are then "1".."N").
    case_name : str or None
        Name of the case column.
    groups : Groups or None
    group_codes : ndarray of int32, shape (row,)
        Index into ``groups.levels``; all 0 when there are none.
    findings : tuple of Finding
        What reading noticed and did (merged answers, rows left out, cases set aside...).
    source : str
        Where the answers came from, for the report ("committees.csv"); no folders.
    """

    items: tuple[Item, ...]
    codes: Ints
    counts: Ints
    case_ids: tuple[str, ...] | None = None
    case_name: str | None = None
    groups: Groups | None = None
    group_codes: Ints = field(default=None)  # type: ignore[assignment]
    findings: tuple[Finding, ...] = ()
    source: str = ""

    # Contract (filled in by the responses room):
    #   Responses.read(path, *, items=None, case=None, group=None, counts=None, ...) -> Responses
    #   Responses.from_frame(frame, *, items=None, case=None, group=None, counts=None, ...)
    #   n_cases: int (sum of counts), n_set_aside: int, is_table_of_patterns: bool
    #   units: cached_property -> Units
    #   data_hash: cached_property -> str (sha256 of items, categories, groups and the sorted units)
    #   row_names: tuple[str, ...] (case ids or "1".."N")
    #   summary() -> pandas frame, __repr__, _repr_html_
