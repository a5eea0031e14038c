"""Whether the groups answer alike within a class: shared against free response probabilities."""

from __future__ import annotations

from typing import Any

from bayeslca.report.blocks import Block, Bullets, Head, PageTable, Paragraph, Section
from bayeslca.report.facts import Facts
from bayeslca.report.wording import decimal, sentence

ANCHOR, HEADING = "groups", "Do the groups answer alike"
ALIKE, FREE = "alike in all groups", "free by group"
"""Rows of the comparison: response probabilities shared by all groups, or different in each."""


def groups_section(facts: Facts) -> Section | None:
    """Return the section on groups; None when they were not compared."""
    comparison = facts.content.group_comparison
    if comparison is None:
        return None
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in comparison.findings)
    blocks: list[Block] = [
        Paragraph(_in_words(facts)),
        *([Bullets(noticed)] if noticed else []),
        _table(facts),
        Paragraph(
            "Where classes look the same in every group, only how common they are differs from "
            "group to group; where they do not, a class of one group is not the class of that "
            "name in another, and its prevalences should not be compared across groups."
        ),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def _in_words(facts: Facts) -> str:
    comparison = facts.content.group_comparison
    assert comparison is not None
    table = comparison.table
    name = facts.posterior.model.groups.name if facts.posterior.model.groups else "group"
    alike, free = table.loc[ALIKE], table.loc[FREE]
    gap = f"{decimal(abs(free['elpd'] - alike['elpd']))}"
    if alike["tied"] and free["tied"]:
        text = (
            f"Letting the answers of a class differ by {name} predicts neither clearly better nor "
            f"clearly worse than one set of probabilities for all (a difference of {gap}): the "
            "data do not ask for classes that differ by group, and cannot rule them out."
        )
    elif free["elpd"] > alike["elpd"]:
        text = (
            f"Letting the answers of a class differ by {name} predicts better (by {gap}): the "
            "same class does not answer alike in every group."
        )
    else:
        text = (
            f"One set of probabilities for all groups predicts better (by {gap}) than letting the "
            f"answers of a class differ by {name}: nothing speaks for classes that differ by group."
        )
    return text


def _table(facts: Facts) -> PageTable:
    comparison = facts.content.group_comparison
    assert comparison is not None
    heads = (
        Head("Response probabilities", "within a class", numeric=False),
        Head("Behind the best", "difference in predictive accuracy ± its standard error"),
        Head("Tied", "too close to the best to tell", numeric=False),
        Head("Predictive accuracy", "elpd by leave-one-out ± its standard error; higher is better"),
        Head("Effective parameters", "flexibility that the answers used up"),
        Head("Sampling", "is it to be trusted", numeric=False),
    )
    records = zip(comparison.table.index, comparison.table.to_dict("records"), strict=True)
    rows = tuple(_row(str(name), record) for name, record in records)
    return PageTable("Shared and free response probabilities", heads, rows)


def _row(name: str, row: dict[Any, Any]) -> tuple[str, ...]:
    return (
        name,
        f"{decimal(row['elpd_diff'])} ± {decimal(row['elpd_diff_se'])}",
        "yes" if row["tied"] else "no",
        f"{decimal(row['elpd'])} ± {decimal(row['elpd_se'])}",
        decimal(row["p_loo"]),
        "yes" if row["trustworthy"] else "no",
    )
