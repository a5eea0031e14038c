"""What each column of a file looks like: the base of `draft` and `inspect`."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from bayeslca.responses.category_order import infer_yes, order_categories, same_meaning
from bayeslca.responses.item_column import MOST_CATEGORIES, MOST_NUMBERS
from bayeslca.responses.no_answers import undeclared_no_answers
from bayeslca.responses.raw_table import RawColumn, RawTable
from bayeslca.responses.spelling import cleanest, number_of, spelling_variants

ColumnKind = Literal[
    "item", "id", "group", "count", "free_text", "number", "date", "constant", "empty",
    "too_many_categories", "weight", "cluster", "stratum",
]  # fmt: skip
SHOWN_VALUES = 12


def _called(names: str) -> re.Pattern[str]:
    return re.compile(rf"(^|[_\W])({names})([_\W](id|no))?$", re.I)


_DESIGN_NAMES: dict[ColumnKind, re.Pattern[str]] = {
    "weight": _called("weights?|weighting|wt|wgt|pweight|w"),
    "cluster": _called("clusters?|psu|primary_sampling_unit"),
    "stratum": _called("stratum|strata"),
}
"""How columns of a sample's design are often called."""
_MOST_LIKELY_ITEM = 12
_ID_NAME = re.compile(r"(^|[_\W])(id|ident|identifier|key|serial|uuid|code|nr|no|number)$", re.I)
_COUNT_NAME = re.compile(r"^(n|count|counts|freq|frequency|frequencies|cases|n_cases)$", re.I)
_GROUP_NAME = re.compile(
    r"(district|region|province|county|country|state|site|centre|center|zone|herd|ward|village|"
    r"clinic|hospital|group|arm|wave|year|sex|gender|population)",
    re.I,
)


@dataclass(frozen=True)
class ColumnReport:
    """What a column looks like, and what could be done with it.

    Attributes
    ----------
    name : str
    label : str
        The column's own text, where the file has one.
    kind : str
        "item", "id", "group", "count", "free_text", "number", "date", "constant", "empty",
        "too_many_categories", "weight", "cluster" or "stratum".
    reason : str
        Why, in words.
    values : mapping of str to int
        The most frequent values (by name) with their counts, at most 12.
    n_values : int
        Number of distinct values.
    n_missing : int
        Empty cells, and those the file declares missing.
    merge : mapping of str to tuple of str
        Proposed merges: spellings that are probably one answer.
    no_answer : tuple of str
        Values that look like 'no answer'.
    categories : tuple of str
        Proposed categories in their order, after merges and without 'no answer'.
    order_rule : str
        Where that order is from: "data", "number", "known pair", "known scale", "alphabet".
    ordered : bool
        True when the order seems to have a meaning: a guess, for the analyst to confirm.
    yes : str or None
        Proposed answer that counts as yes.
    """

    name: str
    label: str
    kind: ColumnKind
    reason: str
    values: Mapping[str, int]
    n_values: int
    n_missing: int
    merge: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    no_answer: tuple[str, ...] = ()
    categories: tuple[str, ...] = ()
    order_rule: str = ""
    ordered: bool = False
    yes: str | None = None


def describe_columns(raw: RawTable) -> tuple[ColumnReport, ...]:
    """Describe every column of a table.

    Parameters
    ----------
    raw : RawTable
        As :func:`bayeslca.responses.reading.read_table` gives it.
    """
    return tuple(_describe(raw.column(name), raw.n_rows) for name in raw.column_names)


def columns_like_items(raw: RawTable) -> list[str]:
    """Return the names of the columns that look like items."""
    return [report.name for report in describe_columns(raw) if report.kind == "item"]


def _describe(column: RawColumn, n_rows: int) -> ColumnReport:
    counts = column.counts()
    names = {value: column.labels.get(value, value) for value in counts}
    named: dict[str, int] = {}
    for value, n in counts.items():
        named[names[value]] = named.get(names[value], 0) + n
    frequent = sorted(named.items(), key=lambda pair: (-pair[1], pair[0]))[:SHOWN_VALUES]
    n_answers = sum(counts.values())

    def report(kind: ColumnKind, reason: str, proposal: _Proposal | None = None) -> ColumnReport:
        proposed = proposal or _Proposal()
        return ColumnReport(
            column.name,
            column.label,
            kind,
            reason,
            dict(frequent),
            len(named),
            n_rows - n_answers,
            merge=proposed.merge,
            no_answer=proposed.no_answer,
            categories=proposed.categories,
            order_rule=proposed.order_rule,
            ordered=proposed.ordered,
            yes=proposed.yes,
        )

    if not counts:
        return report("empty", "no row has a value")
    part = _part_of_design(column.name, named)
    if part is not None:
        return report(part, f"named like a {part} of a sample")
    if len(named) <= MOST_CATEGORIES:
        proposal = _propose(column, names, named)
        kind, reason = _few_values(column, proposal, n_rows, n_answers, len(named))
        return report(kind, reason, proposal if kind in ("item", "group") else None)
    kind, reason = _many_values(column, counts, n_rows)
    return report(kind, reason)


def _part_of_design(name: str, named: Mapping[str, int]) -> ColumnKind | None:
    """Return which part of a sample's design a column is named like, if any."""
    for kind, pattern in _DESIGN_NAMES.items():
        if not pattern.search(name) or len(named) < 2:
            continue
        numbers = [number_of(value) for value in named]
        if kind != "weight" or all(number is not None and number > 0 for number in numbers):
            return kind
    return None


@dataclass(frozen=True)
class _Proposal:
    merge: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    no_answer: tuple[str, ...] = ()
    categories: tuple[str, ...] = ()
    order_rule: str = ""
    ordered: bool = False
    yes: str | None = None


def _few_values(
    column: RawColumn, proposal: _Proposal, n_rows: int, n_answers: int, n_values: int
) -> tuple[ColumnKind, str]:
    n = len(proposal.categories)
    numbers = all(number_of(name) is not None for name in proposal.categories)
    numbers = numbers and not column.labels
    if not n:
        return "empty", "all its values look like no answer"
    if n == 1:
        return "constant", f"the only answer is {proposal.categories[0]!r}"
    if column.type == "date":
        return "date", "holds dates"
    all_different = n_values == n_rows and n_rows > 5
    if _wordy(proposal.categories):
        return "free_text", f"{n} different texts, most of them sentences"
    if all_different and (column.type != "number" or _ID_NAME.search(column.name)):
        return "id", "every row has a value of its own"
    whole = numbers and all((number_of(c) or 0) % 1 == 0 for c in proposal.categories)
    if whole and _COUNT_NAME.match(column.name):
        return "count", "whole numbers in a column named like a count of cases"
    if numbers and (
        n > MOST_NUMBERS or not whole or (n > _MOST_LIKELY_ITEM and n_answers < 10 * n)
    ):
        return "number", f"{n} different numbers: probably a measurement"
    if not numbers and n > 5 and n > 0.5 * n_answers:
        return "free_text", f"{n} different texts in {n_answers} rows: probably free text"
    if n > _MOST_LIKELY_ITEM and not column.labels:
        return "too_many_categories", f"{n} different values are many for an item"
    if _GROUP_NAME.search(column.name) and proposal.yes is None:
        return "group", f"{n} values in a column named like a grouping of cases"
    if column.labels:
        return "item", f"{n} answers with labels"
    spelled = f" (of {n_values} different values)" if n < n_values else ""
    return "item", f"{n} different answers{spelled}"


def _wordy(names: tuple[str, ...]) -> bool:
    """Tell whether most values are sentences."""
    return len(names) > 3 and sum(len(name.split()) >= 4 for name in names) > 0.5 * len(names)


def _many_values(
    column: RawColumn, counts: Mapping[str, int], n_rows: int
) -> tuple[ColumnKind, str]:
    n = len(counts)
    if column.type == "date":
        return "date", f"{n:,} different dates"
    numbers = [number_of(value) for value in counts]
    is_number = all(number is not None for number in numbers)
    whole = is_number and all((number or 0) % 1 == 0 for number in numbers)
    if not is_number and _wordy(tuple(counts)):
        return "free_text", f"{n:,} different texts, most of them sentences"
    if n == n_rows and (not is_number or (whole and _looks_counted(column))):
        return "id", f"all {n:,} rows have a value of their own"
    if is_number:
        return "number", f"{n:,} different numbers: probably a measurement"
    if n > 0.5 * sum(counts.values()):
        return "free_text", f"{n:,} different texts: probably free text or an id"
    return "too_many_categories", f"{n:,} different values; an item has at most {MOST_CATEGORIES}"


def _looks_counted(column: RawColumn) -> bool:
    """Tell ids 1, 2, 3... and columns named as ids from measurements."""
    if _ID_NAME.search(column.name):
        return True
    numbers = sorted(number_of(value) or 0.0 for value in column.values)
    return numbers[-1] - numbers[0] == len(numbers) - 1


def _propose(column: RawColumn, names: Mapping[str, str], named: Mapping[str, int]) -> _Proposal:
    no_answer = undeclared_no_answers(dict(names))
    answers = {name: n for name, n in named.items() if name not in no_answer}
    merge = _propose_merges(answers)
    into = {spelling: kept for kept, spellings in merge.items() for spelling in spellings}
    remaining = list(dict.fromkeys(into.get(name, name) for name in answers))
    in_data = tuple(
        dict.fromkeys(into.get(n, n) for n in (column.labels.get(v, v) for v in column.order))
    )
    if not remaining:
        return _Proposal(no_answer=no_answer)
    order = order_categories(remaining, in_data)
    ordered = len(remaining) > 2 and (column.ordered or order.rule in ("known scale", "number"))
    return _Proposal(
        merge, no_answer, order.categories, order.rule, ordered, infer_yes(order.categories)
    )


def _propose_merges(answers: Mapping[str, int]) -> dict[str, tuple[str, ...]]:
    """Propose one answer for spellings that differ little, and for the words of yes and no."""
    together: dict[str, list[str]] = {name: [name] for name in answers}
    for same in spelling_variants(answers):
        kept = cleanest(same, answers)
        together[kept] = sorted(same, key=lambda name: -answers[name])
        for name in same:
            if name != kept:
                together.pop(name)
    by_frequency = sorted(together, key=lambda kept: -sum(answers[n] for n in together[kept]))
    for kept, others in same_meaning(by_frequency).items():
        together[kept] = [spelling for n in (kept, *others) for spelling in together[n]]
        for name in others:
            together.pop(name)
    return {
        kept: tuple(name for name in spellings if name != kept)
        for kept, spellings in together.items()
        if len(spellings) > 1
    }
