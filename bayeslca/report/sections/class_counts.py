"""How many classes the data support: comparison of models, ties called ties."""

from __future__ import annotations

from typing import Any

from bayeslca.report.blocks import Block, Bullets, Head, PageTable, Paragraph, Picture, Section
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.plots import plot_class_counts, row_name
from bayeslca.report.wording import (
    NOTHING,
    counted_in_words,
    decimal,
    listed,
    percent,
    sentence,
)

ANCHOR, HEADING = "class-counts", "How many classes the data support"


def class_counts_section(facts: Facts) -> Section:
    """Return the section on the number of classes."""
    comparison = facts.content.comparison
    if comparison is None:
        text = "Different numbers of classes were not compared in this study."
        return Section(ANCHOR, HEADING, (Paragraph(text),))
    table, study_row = comparison.table, facts.content.study_row
    figure = draw(
        "class-counts",
        lambda drawing: plot_class_counts(comparison, study_row=study_row, ax=drawing.subplots()),
        size=(WIDTH, 1.2 + 0.34 * len(table)),
        caption=(
            "How far each model predicts behind the best, with two standard errors of the "
            "difference. Filled: tied with the best. Square: the model the answer rests on. An "
            "arrow stands for a model too far behind to be shown to scale."
        ),
        alt=sentence(comparison.verdict),
    )
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in comparison.findings)
    blocks: list[Block] = [
        Paragraph(_in_words(facts)),
        *([Bullets(noticed)] if noticed else []),
        Picture(figure),
        _table(facts),
        Paragraph(
            "Predictive accuracy is of a case's answers with its class summed out, left out one "
            "case at a time. Differences below 4, or within two standard errors, are called ties."
        ),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def tie_in_words(facts: Facts) -> str:
    """Return which models are tied: ``2 classes and 3 classes``."""
    return listed([row_name(name) for name in facts.tied])


def _in_words(facts: Facts) -> str:
    comparison = facts.content.comparison
    if comparison is None:
        return ""
    text = sentence(comparison.verdict)
    if facts.content.chosen_because:
        chosen = counted_in_words(len(facts.class_names), "class", "classes")
        text += " " + sentence(f"the study has {chosen} because {facts.content.chosen_because}")
    if facts.outside_tie:
        text += (
            " The study's own model lies outside the tie: the data alone would not have led to it."
        )
    return text


def _table(facts: Facts) -> PageTable:
    comparison = facts.content.comparison
    if comparison is None:
        msg = "there is no comparison to show"
        raise ValueError(msg)
    rows = tuple(
        _row(facts, name, record)
        for name, record in zip(
            comparison.table.index, comparison.table.to_dict("records"), strict=True
        )
    )
    heads = (
        Head("Model", "the number of classes, or the study's model", numeric=False),
        Head("Behind the best", "difference in predictive accuracy ± its standard error"),
        Head("Tied", "too close to the best to tell", numeric=False),
        Head("Predictive accuracy", "elpd by leave-one-out ± its standard error; higher is better"),
        Head("Effective parameters", "flexibility that the answers used up"),
        Head("Weight", "in the best mixture of the models' predictions"),
        Head("Smallest class", "its share of the cases"),
        Head("Separation", "1: every case placed surely; 0: by chance"),
        Head("Sampling", "is it to be trusted", numeric=False),
    )
    notes = ("Square brackets: the model the answer rests on.",)
    return PageTable("Models with different numbers of classes", heads, rows, notes)


def _row(facts: Facts, name: object, row: dict[Any, Any]) -> tuple[str, ...]:
    mine = name == facts.content.study_row
    text = row_name(name)
    separation = row["separation"]
    return (
        f"[{text}]" if mine else text,
        f"{decimal(row['elpd_diff'])} ± {decimal(row['elpd_diff_se'])}",
        "yes" if row["tied"] else "no",
        f"{decimal(row['elpd'])} ± {decimal(row['elpd_se'])}",
        decimal(row["p_loo"]),
        decimal(row["weight"], 2),
        percent(row["smallest_class"]),
        NOTHING if separation is None or separation != separation else decimal(separation, 2),
        "yes" if row["trustworthy"] else "no",
    )
