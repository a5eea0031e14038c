"""Columns that are no items: case ids, groups and counts."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import near_names
from bayeslca.findings import Finding
from bayeslca.responses.category_order import order_categories
from bayeslca.responses.item import Groups, ItemSpec
from bayeslca.responses.item_column import SPARSE, keep_rows
from bayeslca.responses.no_answers import says_no_answer
from bayeslca.responses.problems import Problems, listed_with_counts
from bayeslca.responses.raw_table import RawTable
from bayeslca.responses.spelling import find_value, number_of, spelling_variants

_MOST_CASES = 10**12
_GROUPED = re.compile(r"[+-]?\d{1,3}([.,]\d{3})+")


def read_counts(
    table: RawTable, name: str, rows: Ints, problems: Problems, findings: list[Finding]
) -> tuple[Ints, Ints]:
    """Return the rows that stand for cases, and for how many each.

    Returns
    -------
    rows, counts : ndarray, shape (row,)
        Rows with a count of nought are left out.
    """
    column = keep_rows(table.column(name), rows)
    # "1,000" and "1.000" in a text are a thousand or one: not for us to say.
    unclear = column.type == "text" and [bool(_GROUPED.fullmatch(v)) for v in column.values]
    numbers = [number_of(value) for value in column.values]
    where = f"counts column {name!r}"
    n_before = len(problems.messages)

    def refuse(wrong: Any, what: str, remedy: str) -> None:
        if not wrong.any():
            return
        found = np.flatnonzero(wrong)
        codes = column.codes[found[:3]]
        shown = ", ".join(repr(column.values[code]) for code in codes if code >= 0)
        problems.add(
            f"{where}: {what}{f' ({shown})' if shown else ''} in {table.place(rows[found])}. "
            f"{remedy}"
        )

    # One entry per distinct value, and a last one that answers code -1 (empty).
    if unclear:
        refuse(
            np.array([*unclear, False])[column.codes],
            "a number with three digits after a comma or point",
            "Write whole numbers without separators.",
        )
    as_number = np.array([*(np.nan if n is None else n for n in numbers), 0.0])
    empty = column.codes < 0
    value = as_number[column.codes]
    refuse(empty, "no count", "Fill it in, or take the row out.")
    refuse(np.isnan(value), "not a number", "A count is a whole number of cases.")
    refuse(value < 0, "negative count", "A count is 0 or more cases.")
    refuse(
        (value >= 0) & (value % 1 != 0) & np.isfinite(value),
        "a count that is not whole",
        "Is this a sampling weight? Then give it as weight; a count is a whole number of cases.",
    )
    refuse(value > _MOST_CASES, "a count beyond all measure", "Check the column.")
    if len(problems.messages) > n_before:
        return rows, np.ones(rows.size, dtype=np.int64)
    counts = value.astype(np.int64)
    standing = counts > 0
    n_empty = int(rows.size - standing.sum())
    if n_empty == rows.size:
        problems.add(f"{where}: all counts are 0, so there are no cases. Check the column.")
        return rows, np.ones(rows.size, dtype=np.int64)
    if n_empty:
        findings.append(
            Finding(
                "patterns_without_cases",
                "note",
                f"{n_empty:,} rows with a count of 0 left out.",
                about=(name,),
                value=float(n_empty),
            )
        )
    return rows[standing], counts[standing]


def read_case_ids(
    table: RawTable, name: str, rows: Ints, problems: Problems
) -> tuple[str, ...] | None:
    """Return the name of each row; note missing and repeated ones."""
    column = keep_rows(table.column(name), rows)
    missing = np.flatnonzero(column.codes < 0)
    if missing.size:
        problems.add(
            f"case column {name!r}: no id in {table.place(rows[missing])}. Give each row an id of "
            "its own, or leave case out: rows are then numbered."
        )
    times = np.bincount(column.codes[column.codes >= 0], minlength=len(column.values))
    repeated = np.flatnonzero(times > 1)
    if repeated.size:
        shown = "; ".join(
            f"{column.values[code]!r} in {table.place(rows[column.codes == code])}"
            for code in repeated[:5]
        )
        more = f"; and {repeated.size - 5:,} more ids" if repeated.size > 5 else ""
        problems.add(
            f"case column {name!r}: ids stand more than once: {shown}{more}. Each case has one "
            "row and an id of its own: correct the ids, or choose rows with keep_only."
        )
    if missing.size or repeated.size:
        return None
    values = column.values
    return tuple(values[code] for code in column.codes.tolist())


def read_groups(
    table: RawTable,
    name: str,
    known: Groups | None,
    rows: Ints,
    weights: Ints,
    no_answer: Sequence[Any],
    problems: Problems,
    findings: list[Finding],
) -> tuple[Groups | None, Ints]:
    """Return the groups and each row's group, shape (row,)."""
    column = keep_rows(table.column(name), rows)
    where = f"group column {name!r}"
    nobody = np.zeros(rows.size, dtype=np.int32)
    level_of = {value: column.labels.get(value, value) for value in column.counts()}
    for wanted in ItemSpec(name, no_answer=no_answer).no_answer:
        for value in find_value(wanted, level_of):
            level_of.pop(value)
    known_levels = set(known.levels) if known else set()
    for value, level in list(level_of.items()):
        if level not in known_levels and says_no_answer(level):
            level_of.pop(value)
    grouped = np.array([*(value in level_of for value in column.values), False])[column.codes]
    missing = np.flatnonzero(~grouped)
    if missing.size:
        problems.add(
            f"{where}: no group in {table.place(rows[missing])}. Fill in the group, or leave the "
            "rows out with keep_only."
        )
    names = list(dict.fromkeys(level_of.values()))
    for same in spelling_variants(names):
        if not set(same) <= known_levels:
            problems.add(
                f"{where}: {', '.join(map(repr, same))} differ only in case, spaces, accents or "
                "number format. Spell each group in one way."
            )
    for level in names:
        codes = [value for value, other in level_of.items() if other == level]
        if len(codes) > 1:
            problems.add(
                f"{where}: the codes {codes} have the same label {level!r}. Tell them apart."
            )
    if known:
        unseen = [level for level in names if level not in known.levels]
        if unseen:
            values = [value for value, level in level_of.items() if level in unseen]
            found = np.flatnonzero(np.isin(column.codes, [column.values.index(v) for v in values]))
            problems.add(
                f"{where}: {', '.join(map(repr, unseen[:5]))} in {table.place(rows[found])} is no "
                f"group of the model{near_names(unseen[0], known.levels)}. Its groups are "
                f"{', '.join(known.levels)}."
            )
            return None, nobody
        levels = known.levels
    elif not names:
        return None, nobody
    else:
        in_data = tuple(dict.fromkeys(column.labels.get(v, v) for v in column.order))
        levels = order_categories(names, in_data).categories
    if not known and len(levels) > 10 and len(levels) == rows.size:
        problems.add(
            f"{where}: every row has a group of its own, so it is probably an id. Give it as case=."
        )
        return None, nobody
    position = {level: i for i, level in enumerate(levels)}
    by_value = [position.get(level_of.get(value, ""), 0) for value in column.values]
    codes_of_rows = np.array([*by_value, 0], dtype=np.int32)[column.codes]
    if not known:
        sizes = np.zeros(len(levels), dtype=np.int64)
        np.add.at(sizes, codes_of_rows, weights)
        small = {level: int(n) for level, n in zip(levels, sizes, strict=True) if n < SPARSE}
        if small:
            message = f"Groups of {name} with few cases: {listed_with_counts(small)}."
            findings.append(
                Finding(
                    "small_group",
                    "note",
                    message,
                    about=(name, *small),
                    value=float(min(small.values())),
                )
            )
    return Groups(name, levels), codes_of_rows
