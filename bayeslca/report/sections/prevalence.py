"""How common each class is, in shares and in cases."""

from __future__ import annotations

import math
from typing import Any

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Picture, Section
from bayeslca.report.facts import Facts, shares_in_words
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.palette import PRIOR_MARK
from bayeslca.report.plots import plot_prevalence, without_pooled_units
from bayeslca.report.sections.portraits import PRIOR_LEGEND
from bayeslca.report.wording import (
    NOTHING,
    called,
    counted,
    level,
    listed,
    percent_interval,
    sentence,
    whole,
)

ANCHOR, HEADING = "prevalence", "How common each class is"
FEW = 5
"""A class with fewer expected cases is named as one with few."""


def prevalence_section(facts: Facts) -> Section:
    """Return the section on prevalences."""
    if len(facts.class_names) == 1:
        text = f"There is one class, so it holds all {counted(facts.n_cases, 'case')}."
        return Section(ANCHOR, HEADING, (Paragraph(text),))
    interval = facts.content.interval
    groups = facts.posterior.model.groups
    of_each = 1
    if groups is not None:
        of_each = 2 if facts.posterior.model.pooled else len(groups.levels) + 1
    n_rows = len(facts.class_names) * of_each
    figure = draw(
        "prevalence",
        lambda drawing: plot_prevalence(facts.posterior, interval=interval, ax=drawing.subplots()),
        size=(WIDTH, 1.0 + 0.36 * n_rows),
        caption=(
            f"The share of the cases in each class{' by group' if groups else ''}: a marker at the "
            f"median, a line over the {level(interval)} interval."
            + (f" {PRIOR_LEGEND}" if facts.marked_prevalences else "")
        ),
        alt=sentence(shares_in_words(facts.overall, facts.n_cases)),
    )
    blocks: list[Block] = [Paragraph(_in_words(facts)), Picture(figure), _table(facts)]
    return Section(ANCHOR, HEADING, tuple(blocks))


def _in_words(facts: Facts) -> str:
    groups = facts.posterior.model.groups
    among = "among all cases, groups weighted by their sizes, " if groups else ""
    text = sentence(f"{among}{shares_in_words(facts.overall, facts.n_cases)}")
    few = [
        f"{called(share.name)} (about {counted(round(share.median * facts.n_cases), 'case')})"
        for share in facts.overall
        if share.median * facts.n_cases < FEW
    ]
    if few:
        text += (
            f" Few cases are expected in {listed(few)}: what is said of so small a class rests on "
            "very little."
        )
    return text


def _in_cases(row: dict[Any, Any]) -> str:
    """Return a share in cases; of a unit that was not observed there are none."""
    if not math.isfinite(row["cases"]):
        return NOTHING
    low, high = whole(row["cases_lower"]), whole(row["cases_upper"])
    return f"{whole(row['cases'])} ({low} to {high})"


def _table(facts: Facts) -> PageTable:
    frame = facts.posterior.prevalence(interval=facts.content.interval)
    frame = without_pooled_units(facts.posterior, frame)
    groups = facts.posterior.model.groups
    rows = []
    for name in facts.class_names:
        for row in frame[frame["latent_class"] == name].to_dict("records"):
            share = percent_interval(row["median"], row["lower"], row["upper"])
            where = [str(row["group"])] if groups else []
            if (where[0] if where else "", name) in facts.marked_prevalences:
                share += f" {PRIOR_MARK}"
            rows.append((called(name), *where, share, _in_cases(row)))
    heads = (
        Head("Class", "the class that the row is about", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if groups else []),
        Head("Share", f"of the cases, median ({level(facts.content.interval)} interval)"),
        Head("In cases", "the share times the cases that gave an answer"),
    )
    notes = (PRIOR_LEGEND,) if facts.marked_prevalences else ()
    return PageTable("The share of the cases in each class", heads, tuple(rows), notes)
