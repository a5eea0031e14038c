"""Columns of the sample's design: weights, clusters and strata, with their checks."""

from __future__ import annotations

import re
from typing import Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.findings import Finding
from bayeslca.responses.item_column import keep_rows
from bayeslca.responses.no_answers import says_no_answer
from bayeslca.responses.problems import Problems
from bayeslca.responses.raw_table import RawTable
from bayeslca.responses.sample_design import SampleDesign
from bayeslca.responses.spelling import number_of, spelling_variants

_COMMA_GROUPED = re.compile(r"[+-]?\d{1,3}(,\d{3})+")
_UNEVEN = 0.5
"""Weights that leave less than this share of the cases effective are a finding."""
_LISTED = 5


def read_design(
    table: RawTable,
    weight: str | None,
    cluster: str | None,
    stratum: str | None,
    rows: Ints,
    *,
    merge_lone_strata: bool,
    problems: Problems,
    findings: list[Finding],
) -> SampleDesign | None:
    """Read the columns of the sample's design.

    Parameters
    ----------
    table : RawTable
    weight, cluster, stratum : str or None
        Names of the columns.
    rows : ndarray of int, shape (row,)
        The rows of the table that are cases.
    merge_lone_strata : bool
        Merge a stratum with one cluster into the next by name (the last into the one before);
        otherwise it is a problem.
    problems, findings
        Added to.

    Returns
    -------
    SampleDesign or None
        None where there is no such column, or a problem was found.
    """
    if weight is None and cluster is None and stratum is None:
        return None
    n_before = len(problems.messages)
    weights = np.ones(rows.size)
    if weight is not None:
        weights = _weights(table, weight, rows, problems)
    clusters: Ints = np.arange(rows.size, dtype=np.int64)
    cluster_names: list[str] = []
    if cluster is not None:
        clusters, cluster_names = _codes(table, "cluster", cluster, rows, problems)
    strata: Ints = np.zeros(rows.size, dtype=np.int64)
    levels = [""]
    if stratum is not None:
        strata, levels = _codes(table, "stratum", stratum, rows, problems)
    if len(problems.messages) > n_before:
        return None
    if cluster is not None and stratum is not None:
        _refuse_torn_clusters(cluster, clusters, cluster_names, strata, levels, problems)
    if len(problems.messages) == n_before:
        strata, levels = _with_enough_clusters(
            cluster, stratum, clusters, strata, levels, merge_lone_strata, problems, findings
        )
    if len(problems.messages) > n_before:
        return None
    design = SampleDesign(weights, clusters, strata, weight, cluster, stratum, tuple(levels))
    findings.extend(_weight_findings(design))
    return design


def _weights(table: RawTable, name: str, rows: Ints, problems: Problems) -> Floats:
    column = keep_rows(table.column(name), rows)
    where = f"weight column {name!r}"
    unclear = [column.type == "text" and bool(_COMMA_GROUPED.fullmatch(v)) for v in column.values]
    numbers = [number_of(value) for value in column.values]

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

    # One entry per distinct value, and a last one that code -1 (empty) looks up.
    as_number = np.array([*(np.nan if n is None else n for n in numbers), np.nan])
    value = as_number[column.codes]
    empty = column.codes < 0
    text = ~empty & np.isnan(value)
    refuse(
        np.array([*unclear, False])[column.codes],
        "a number with three digits after a comma: a thousand, or a decimal?",
        "Write weights with a decimal point and without separators.",
    )
    refuse(
        empty, "no weight", "Fill it in, or leave the case out with keep_only, if that is right."
    )
    refuse(text, "not a number", "A weight is a number above 0.")
    refuse(value < 0, "negative weight", "A weight is a number above 0; check how it was made.")
    refuse(
        value == 0,
        "weight 0",
        "Such a case stands for nobody: leave it out with keep_only, or correct the weight.",
    )
    refuse(np.isinf(value), "infinite weight", "Check the column.")
    return value


def _codes(
    table: RawTable, role: str, name: str, rows: Ints, problems: Problems
) -> tuple[Ints, list[str]]:
    """Return the index (row,) of each row's cluster or stratum, and their names in order."""
    column = keep_rows(table.column(name), rows)
    where = f"{role} column {name!r}"
    names = [column.labels.get(value, value) for value in column.values]
    gone = np.array([*(says_no_answer(value) for value in names), True])[column.codes]
    missing = np.flatnonzero(gone)
    if missing.size:
        problems.add(
            f"{where}: no {role} in {table.place(rows[missing])}. Fill it in, or leave the rows "
            "out with keep_only."
        )
        return np.zeros(rows.size, dtype=np.int64), [""]
    used = sorted({names[code] for code in np.unique(column.codes).tolist()}, key=_by_number)
    for same in spelling_variants(used):
        problems.add(
            f"{where}: {', '.join(map(repr, same))} differ only in case, spaces, accents or number "
            "format. Spell each in one way."
        )
    position = {level: i for i, level in enumerate(used)}
    by_value = np.array([position.get(level, 0) for level in names], dtype=np.int64)
    return by_value[column.codes], used


def _by_number(name: str) -> tuple[float, str]:
    number = number_of(name)
    return (np.inf if number is None else number, name)


def _refuse_torn_clusters(
    name: str,
    clusters: Ints,
    cluster_names: list[str],
    strata: Ints,
    levels: list[str],
    problems: Problems,
) -> None:
    """Refuse clusters whose cases stand in several strata."""
    pairs = np.unique(np.column_stack([clusters, strata]), axis=0)
    times = np.bincount(pairs[:, 0], minlength=len(cluster_names))
    torn = np.flatnonzero(times > 1)
    if not torn.size:
        return
    shown = "; ".join(
        f"{cluster_names[c]!r} in {', '.join(repr(levels[s]) for s in pairs[pairs[:, 0] == c, 1])}"
        for c in torn[:_LISTED]
    )
    more = f"; and {torn.size - _LISTED:,} more" if torn.size > _LISTED else ""
    problems.add(
        f"cluster column {name!r}: clusters stand in several strata: {shown}{more}. A cluster lies "
        "in one stratum: correct it; where clusters are numbered anew in each stratum, give a "
        "column that joins the stratum's name and the number."
    )


def _with_enough_clusters(
    cluster: str | None,
    stratum: str | None,
    clusters: Ints,
    strata: Ints,
    levels: list[str],
    merge: bool,
    problems: Problems,
    findings: list[Finding],
) -> tuple[Ints, list[str]]:
    """Return strata that have two clusters or more, merged where that was asked for."""
    unit = "cluster" if cluster is not None else "case"
    held = _clusters_held(clusters, strata, len(levels))
    if held.sum() < 2:
        problems.add(
            f"{unit}s: there is one in all, and nothing can be said of the variation between "
            f"{unit}s. Give two or more."
        )
        return strata, levels
    lone = np.flatnonzero(held == 1)
    if not lone.size:
        return strata, levels
    names = ", ".join(repr(levels[s]) for s in lone[:_LISTED])
    names += f" and {lone.size - _LISTED:,} more" if lone.size > _LISTED else ""
    if not merge or len(levels) == 1:
        problems.add(
            f"stratum column {stratum!r}: one {unit} only in {names}, so the variation between "
            f"{unit}s of it is not known. Give a column in which similar strata are joined, or set "
            "merge_lone_strata = true: such a stratum is then joined with the next by name."
        )
        return strata, levels
    joined = [*levels]
    while len(joined) > 1 and (held == 1).any():
        one = int(np.flatnonzero(held == 1)[0])
        first = min(one, len(joined) - 2)  # the last is joined with the one before
        joined[first : first + 2] = [f"{joined[first]} + {joined[first + 1]}"]
        strata = np.where(strata > first, strata - 1, strata)
        held = _clusters_held(clusters, strata, len(joined))
    findings.append(
        Finding(
            "strata_merged",
            "warning",
            f"{lone.size:,} strata of {stratum} with one {unit} each ({names}) were joined with "
            f"the next by name: {len(levels):,} strata became {len(joined):,}.",
            "Standard errors are then usually too large rather than too small; name strata that "
            "are alike instead, if you know them.",
            about=tuple(levels[s] for s in lone),
            value=float(lone.size),
        )
    )
    return strata, joined


def _clusters_held(clusters: Ints, strata: Ints, n_strata: int) -> Ints:
    pairs = np.unique(np.column_stack([clusters, strata]), axis=0)
    return np.bincount(pairs[:, 1], minlength=n_strata)


def _weight_findings(design: SampleDesign) -> list[Finding]:
    if design.weight_name is None:
        return []
    n, name = design.weight.size, design.weight_name
    if not design.is_weighted:
        return [
            Finding(
                "weights_constant",
                "note",
                f"All weights ({name}) are {design.weight[0]:g}: they change nothing.",
                "Check that it is the right column.",
                about=(name,),
                value=float(design.weight[0]),
            )
        ]
    if design.effective_size >= _UNEVEN * n:
        return []
    return [
        Finding(
            "weights_uneven",
            "warning",
            f"Weights ({name}) are so uneven that {n:,} cases are worth about "
            f"{design.effective_size:,.0f} drawn with equal chances (Kish).",
            "Look at the largest weights: a few cases may decide the weighted figures.",
            about=(name,),
            value=design.effective_size,
        )
    ]
