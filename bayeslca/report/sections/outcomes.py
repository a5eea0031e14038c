"""What follows from class: outcomes, by every way, with their checks."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.fit.predictive_words import records
from bayeslca.posterior.tables import OVERALL
from bayeslca.relate.outcomes.tables import likeliest_order
from bayeslca.relate.outcomes.words import MEAN_WORDS, WAY_WORDS, priors_in_words
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
    Subheading,
)
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.outcome_plots import (
    means_size,
    plot_outcome_distribution,
    plot_outcome_means,
)
from bayeslca.report.references import REFERENCES
from bayeslca.report.sections.outcome_blocks import (
    category_tables,
    difference_tables,
    means_table,
    number_text,
    order_tables,
    parameter_tables,
    value_text,
)
from bayeslca.report.wording import (
    called,
    chance,
    counted,
    decimal,
    level,
    listed,
    percent,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes
    from bayeslca.report.content import ReportContent
    from bayeslca.report.facts import Facts

ANCHOR, HEADING = "outcomes", "What follows from class"
PAPERS = ("Plummer 2015", "Bolck et al. 2004", "Vermunt 2010", "Bakk & Vermunt 2016")
MOST_ROWS = 6
"""Rows of a table that are shown unfolded."""


def outcomes_section(facts: Facts) -> Section | None:
    """Return the section on outcomes; None when the study relates none."""
    content = facts.content
    if not content.outcomes:
        return None
    blocks: list[Block] = [Paragraph(_how_in_words(content.outcomes))]
    for number, found in enumerate(content.outcomes, start=1):
        blocks += _of_outcome(content, found, number)
    blocks.append(Bullets(tuple((REFERENCES[name], "") for name in PAPERS)))
    return Section(ANCHOR, HEADING, tuple(blocks))


def _how_in_words(outcomes: tuple[ClassOutcomes, ...]) -> str:
    ways = {way for found in outcomes for way in found.ways}
    text = "Classes were settled first, without the outcome. "
    if "cut" in ways:
        text += (
            "By the cut, the figures to report, they are held as the answers make them: at each "
            "draw of the measurement model, classes and outcome are sampled together. "
        )
    if "joint" in ways:
        text += (
            "Jointly, the outcome helps to shape the classes; where the two differ, it has changed "
            "what the classes are. "
        )
    if ways - {"cut", "joint"}:
        text += (
            "In three steps, cases are placed, the outcome is related to where they were placed, "
            "and the error of placing is undone, by the inverse of the error matrix or by a "
            "likelihood that holds it fixed; standard errors include the first step. "
        )
    return text + (
        "Differences between classes go with class; they are no proof that class causes them."
    )


def _of_outcome(content: ReportContent, found: ClassOutcomes, number: int) -> list[Block]:
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in found.findings)
    orders = content.outcome_orders.get(found.outcome.name, ())
    return [
        Subheading(found.outcome.text),
        Paragraph(outcome_lead(found, content.interval)),
        *([Bullets(noticed)] if noticed else []),
        _means_figure(found, content.interval, number),
        means_table(found, content.interval),
        *difference_tables(found, content.interval),
        *order_tables(found, orders),
        *category_tables(found, content.interval),
        *parameter_tables(found, content.interval),
        *_moved(content, found),
        *_checks(found, number),
        Paragraph(f"Priors: {'; '.join(priors_in_words(found))}."),
    ]


def outcome_lead(found: ClassOutcomes, interval: float = 0.95) -> str:
    """Return what was found of an outcome, in a sentence or two."""
    way = next(iter(found.ways)) if "cut" not in found.ways else "cut"
    mine = records(found.means(interval))
    shown = [
        f"{value_text(found, row)} in {called(row['latent_class'])}"
        for row in sorted(
            (row for row in mine if row["way"] == way),
            key=lambda row: -row["median"] if math.isfinite(row["median"]) else math.inf,
        )
    ]
    adjusted = f", adjusted for {found.adjusted_for}" if found.adjusted_for else ""
    text = (
        f"{found.outcome.text}: the {MEAN_WORDS[found.outcome.kind]} is {listed(shown)} "
        f"({WAY_WORDS[way]}{adjusted}; {whole(found.model.seen.sum())} cases)."
    )
    if way in found.drawn:
        order, probability = likeliest_order(found, way)
        order = " < ".join(called(name) for name in order.split(" < "))
        text += f" The likeliest order is {order}, with a probability of {chance(probability)}."
    return text


def _means_figure(found: ClassOutcomes, interval: float, number: int) -> Picture:
    return Picture(
        draw(
            f"outcome-{number}-means",
            lambda drawing: plot_outcome_means(found, interval, ax=drawing.subplots()),
            size=means_size(found),
            caption=(
                f"{found.outcome.text}: {MEAN_WORDS[found.outcome.kind]} by class, with "
                f"{level(interval)} intervals, by every way."
            ),
            alt=outcome_lead(found, interval),
        )
    )


def moved_in_words(found: ClassOutcomes) -> str:
    """Return how much membership the joint way moved; empty when it was not done."""
    if "joint" not in found.drawn:
        return ""
    frame = found.membership_moved()
    moved = frame["moved"].to_numpy(dtype=np.float64)
    n = int(frame["changed"].sum())
    text = (
        f"Membership in the joint way, beside the cut: {counted(n, 'case')} of {whole(len(frame))} "
        f"{'has' if n == 1 else 'have'} another most probable class; memberships moved by "
        f"{percent(float(moved.mean()))} on average and by {percent(float(moved.max()))} at the "
        "most (half the sum of absolute differences)."
    )
    return text + f" Each case is in membership_with_{_file_name(found.outcome.name)}.csv."


def _moved(content: ReportContent, found: ClassOutcomes) -> list[Block]:
    text = moved_in_words(found)
    if not text:
        return []
    blocks: list[Block] = [Paragraph(text)]
    if content.show_cases:
        frame = found.membership_moved()
        base = "cut" if "cut" in found.drawn else "answers"
        changed = records(frame[frame["changed"]].sort_values("moved", ascending=False))
        rows = tuple(
            (
                row["case"],
                row[f"modal_class_{base}"],
                row["modal_class_joint"],
                percent(row["moved"]),
            )
            for row in changed
        )
        heads = (
            Head("Case", numeric=False),
            Head("By the cut", numeric=False),
            Head("Jointly", numeric=False),
            Head("Moved", "half the sum of absolute differences"),
        )
        if rows:
            blocks.append(PageTable("Cases that change class", heads, rows, folded=True))
    return blocks


def _checks(found: ClassOutcomes, number: int) -> list[Block]:
    if not found.drawn:
        return []
    way = "cut" if "cut" in found.drawn else next(iter(found.drawn))
    figure = draw(
        f"outcome-{number}-distribution",
        lambda drawing: plot_outcome_distribution(found, way, ax=drawing.subplots()),
        size=(WIDTH, 3.0),
        caption=(
            f"Does the model give such values? Dots: cases as observed. Bars: where "
            f"{level(found.distribution.attrs['interval'])} of replicates lie ({WAY_WORDS[way]}); "
            "the dash is their mean."
        ),
        alt=f"{found.outcome.text}: observed shares of cases, and those of replicates.",
    )
    frame = found.checks[found.checks["way"] == way]
    rows = tuple(
        (
            row["feature"],
            "all cases" if row["latent_class"] == OVERALL else called(row["latent_class"]),
            significant(row["observed"], 3),
            number_text(row["expected"], row["lower"], row["upper"]),
            decimal(row["p"], 2) if row["p"] >= 0.01 else "below 0.01",
        )
        for row in records(frame)
    )
    heads = (
        Head("Feature", "of the outcome's values", numeric=False),
        Head("Class", "cases weighted by membership", numeric=False),
        Head("Observed"),
        Head("Replicates", f"mean ({level(frame.attrs.get('interval', 0.95))} interval)"),
        Head("p", "twice the share of replicates as far to one side"),
    )
    caption = f"{found.outcome.text}: check of its distribution ({WAY_WORDS[way]})"
    return [Picture(figure), PageTable(caption, heads, rows, folded=len(rows) > MOST_ROWS)]


def outcome_tables(content: ReportContent) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the tables of all outcomes for the files, by name."""
    out: dict[str, tuple[str, pd.DataFrame]] = {}
    for found in content.outcomes:
        name, text, interval = _file_name(found.outcome.name), found.outcome.text, content.interval
        tables = {
            "means": (f"{text}: class means", found.means(interval)),
            "differences": (f"{text}: differences of class means", found.differences(interval)),
            "parameters": (f"{text}: spreads and slopes", found.parameters(interval)),
            "checks": (f"{text}: check of its distribution", found.checks),
            "distribution": (f"{text}: its values, observed and expected", found.distribution),
        }
        if found.outcome.kind == "ordered":
            tables["categories"] = (f"{text}: categories by class", found.categories(interval))
        out |= {
            f"outcome_{name}_{part}": table for part, table in tables.items() if not table[1].empty
        }
    return out


def _file_name(name: str) -> str:
    return "".join(sign if sign.isalnum() else "_" for sign in name)
