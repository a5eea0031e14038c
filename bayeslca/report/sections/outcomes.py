"""What follows from class: outcomes, by every way, with their checks."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca.assess.predictive_words import records
from bayeslca.posterior.tables import OVERALL
from bayeslca.relate.outcome_quantities import EFFECTS
from bayeslca.relate.outcome_tables import likeliest_order
from bayeslca.relate.outcome_words import MEAN_WORDS, WAY_WORDS, priors_in_words
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
from bayeslca.report.wording import (
    NOTHING,
    called,
    counted,
    decimal,
    level,
    listed,
    percent,
    percent_interval,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.class_outcomes import ClassOutcomes
    from bayeslca.report.content import ReportContent
    from bayeslca.report.facts import Facts

ANCHOR, HEADING = "outcomes", "What follows from class"
PAPERS = ("Plummer 2015", "Bolck et al. 2004", "Vermunt 2010", "Bakk & Vermunt 2016")
MOST_ROWS = 12
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
        _means_table(found, content.interval),
        *_differences(found, content.interval),
        *_orders(found, orders),
        *_categories(found, content.interval),
        *_parameters(found, content.interval),
        *_moved(content, found),
        *_checks(found, number),
        Paragraph(f"Priors: {'; '.join(priors_in_words(found))}."),
    ]


def outcome_lead(found: ClassOutcomes, interval: float = 0.95) -> str:
    """Return what was found of an outcome, in a sentence or two."""
    way = next(iter(found.ways)) if "cut" not in found.ways else "cut"
    mine = records(found.means(interval))
    shown = [
        f"{_value(found, row)} in {called(row['latent_class'])}"
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
        text += f" The likeliest order is {order}, with a probability of {percent(probability)}."
    return text


def _value(found: ClassOutcomes, row: dict[str, Any]) -> str:
    """Return a mean with its interval."""
    if found.outcome.kind == "binary":
        if math.isfinite(row["median"]) and not math.isfinite(row["lower"]):
            return percent(row["median"])
        return percent_interval(row["median"], row["lower"], row["upper"])
    return _number(row["median"], row["lower"], row["upper"])


def _number(middle: float, lower: float, upper: float) -> str:
    if not math.isfinite(middle):
        return NOTHING
    if not math.isfinite(lower):
        return f"{significant(middle, 3)} (no interval: at its edge)"
    return f"{significant(middle, 3)} ({significant(lower, 3)} to {significant(upper, 3)})"


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


def _means_table(found: ClassOutcomes, interval: float) -> PageTable:
    frame = found.means(interval)
    by_way = {way: records(frame[frame["way"] == way]) for way in found.ways}
    rows = tuple(
        (
            name,
            significant(float(found.expected_cases[k]), 3),
            *(_value(found, by_way[way][k]) for way in found.ways),
        )
        for k, name in enumerate(found.class_names)
    )
    heads = (
        Head("Class", numeric=False),
        Head("Cases", "expected, with a value"),
        *(Head(WAY_WORDS[way].capitalize(), f"{level(interval)} interval") for way in found.ways),
    )
    mean = MEAN_WORDS[found.outcome.kind]
    notes: tuple[str, ...] = ()
    if found.outcome.kind == "ordered":
        notes = (
            f"Places: {', '.join(f'{i} {t}' for i, t in enumerate(found.outcome.levels, 1))}.",
        )
    return PageTable(f"{found.outcome.text}: {mean} by class", heads, rows, notes)


def _differences(found: ClassOutcomes, interval: float) -> list[Block]:
    """Return the differences by the way to report, and folded by every way."""
    frame = found.differences(interval)
    rows = sorted(records(frame), key=lambda row: _pair_rank(found, row))
    main = "cut" if "cut" in found.ways else found.ways[0]
    caption = f"{found.outcome.text}: differences between classes"
    own = [row for row in rows if row["way"] == main]
    tables: list[Block] = [
        PageTable(
            f"{caption} ({WAY_WORDS[main]})",
            _difference_heads(found, interval, by_way=False),
            tuple(_difference_row(found, row, by_way=False) for row in own),
        )
    ]
    if len(found.ways) > 1:
        heads = _difference_heads(found, interval, by_way=True)
        every = tuple(_difference_row(found, row, by_way=True) for row in rows)
        tables.append(PageTable(f"{caption}, by every way", heads, every, folded=True))
    return tables


def _difference_heads(found: ClassOutcomes, interval: float, *, by_way: bool) -> tuple[Head, ...]:
    is_binary = found.outcome.kind == "binary"
    return (
        Head("Difference", "of class means", numeric=False),
        *([Head("Way", numeric=False)] if by_way else []),
        Head("Percentage points" if is_binary else "Size", f"{level(interval)} interval"),
        Head("Above 0", "probability that the first class has the larger mean"),
        Head(EFFECTS[found.outcome.kind].capitalize(), f"effect, {level(interval)} interval"),
    )


def _difference_row(found: ClassOutcomes, row: dict[str, Any], *, by_way: bool) -> tuple[str, ...]:
    size = _points(row) if found.outcome.kind == "binary" else _number(*_ends(row))
    return (
        f"{row['latent_class']} less {row['other_class']}",
        *([WAY_WORDS[row["way"]]] if by_way else []),
        size,
        percent(row["probability_larger"]),
        _number(row["effect"], row["effect_lower"], row["effect_upper"]),
    )


def _ends(row: dict[str, Any]) -> tuple[float, float, float]:
    return row["median"], row["lower"], row["upper"]


def _points(row: dict[str, Any]) -> str:
    if not math.isfinite(row["median"]):
        return NOTHING
    low, mid, high = (decimal(100 * row[name], 0) for name in ("lower", "median", "upper"))
    return f"{mid} ({low} to {high})"


def _pair_rank(found: ClassOutcomes, row: dict[str, Any]) -> tuple[int, int, int]:
    names, ways = found.class_names, found.ways
    return (
        names.index(row["latent_class"]),
        names.index(row["other_class"]),
        ways.index(row["way"]),
    )


def _orders(found: ClassOutcomes, orders: tuple[str, ...]) -> list[Block]:
    if not orders or not found.drawn:
        return []
    rows = tuple(
        (
            order,
            WAY_WORDS[row["way"]],
            percent(row["posterior_probability"]),
            percent(row["prior_probability"]),
        )
        for order in orders
        for row in records(found.order(order))
    )
    heads = (
        Head("Order of means", numeric=False),
        Head("Way", numeric=False),
        Head("Probability", "after the data"),
        Head("Before", "of any order of so many classes"),
    )
    return [PageTable("Orders that the study asks for", heads, rows)]


def _categories(found: ClassOutcomes, interval: float) -> list[Block]:
    if found.outcome.kind != "ordered":
        return []
    way = "cut" if "cut" in found.ways else found.ways[0]
    frame = found.categories(interval)
    mine = records(frame[frame["way"] == way])
    n = len(found.outcome.levels)
    rows = tuple(
        (
            name,
            *(
                percent_interval(row["median"], row["lower"], row["upper"])
                for row in mine[k * n : (k + 1) * n]
            ),
        )
        for k, name in enumerate(found.class_names)
    )
    heads = (
        Head("Class", numeric=False),
        *(Head(text, f"{level(interval)} interval") for text in found.outcome.levels),
    )
    return [PageTable(f"{found.outcome.text}: categories by class ({WAY_WORDS[way]})", heads, rows)]


def _parameters(found: ClassOutcomes, interval: float) -> list[Block]:
    frame = found.parameters(interval)
    if frame.empty:
        return []
    rows = tuple(
        (
            row["parameter"] + (f" in {row['latent_class']}" if row["latent_class"] else ""),
            WAY_WORDS[row["way"]],
            _number(row["median"], row["lower"], row["upper"]),
        )
        for row in records(frame)
        if math.isfinite(row["median"])
    )
    heads = (
        Head("Parameter", numeric=False),
        Head("Way", numeric=False),
        Head("Value", f"{level(interval)} interval"),
    )
    caption = f"{found.outcome.text}: spread within classes" + (
        ", and slopes of covariates" if found.covariate_names else ""
    )
    return [PageTable(caption, heads, rows, folded=True)]


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
            "all cases" if row["latent_class"] == OVERALL else row["latent_class"],
            significant(row["observed"], 3),
            _number(row["expected"], row["lower"], row["upper"]),
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
    return [Picture(figure), PageTable(caption, heads, rows, folded=len(rows) > MOST_ROWS // 2)]


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
