"""Tables of an outcome as the page shows them."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from bayeslca.assess.fit.predictive_words import records
from bayeslca.relate.outcomes.quantities import EFFECTS
from bayeslca.relate.outcomes.words import MEAN_WORDS, WAY_WORDS
from bayeslca.report.blocks import (
    Block,
    Head,
    PageTable,
)
from bayeslca.report.wording import (
    NOTHING,
    called,
    chance,
    decimal,
    level,
    percent,
    percent_interval,
    significant,
)

if TYPE_CHECKING:
    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes


def value_text(found: ClassOutcomes, row: dict[str, Any]) -> str:
    """Return a mean with its interval."""
    if found.outcome.kind == "binary":
        if math.isfinite(row["median"]) and not math.isfinite(row["lower"]):
            return percent(row["median"])
        return percent_interval(row["median"], row["lower"], row["upper"])
    return number_text(row["median"], row["lower"], row["upper"])


def number_text(middle: float, lower: float, upper: float) -> str:
    """Return a number with its interval; nan ends are those of an estimate at its edge."""
    if not math.isfinite(middle):
        return NOTHING
    if not math.isfinite(lower):
        return f"{significant(middle, 3)} (no interval: at its edge)"
    return f"{significant(middle, 3)} ({significant(lower, 3)} to {significant(upper, 3)})"


def means_table(found: ClassOutcomes, interval: float) -> PageTable:
    """Return class means, a column for each way."""
    frame = found.means(interval)
    by_way = {way: records(frame[frame["way"] == way]) for way in found.ways}
    rows = tuple(
        (
            called(name),
            significant(float(found.expected_cases[k]), 3),
            *(value_text(found, by_way[way][k]) for way in found.ways),
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


def difference_tables(found: ClassOutcomes, interval: float) -> list[Block]:
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
    size = _points(row) if found.outcome.kind == "binary" else number_text(*_ends(row))
    return (
        f"{called(row['latent_class'])} less {called(row['other_class'])}",
        *([WAY_WORDS[row["way"]]] if by_way else []),
        size,
        chance(row["probability_larger"]),
        number_text(row["effect"], row["effect_lower"], row["effect_upper"]),
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


def order_tables(found: ClassOutcomes, orders: tuple[str, ...]) -> list[Block]:
    """Return the probabilities of the orders that the study asks for."""
    if not orders or not found.drawn:
        return []
    rows = tuple(
        (
            order,
            WAY_WORDS[row["way"]],
            chance(row["posterior_probability"]),
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


def category_tables(found: ClassOutcomes, interval: float) -> list[Block]:
    """Return the categories of an ordered outcome by class, by the way to report."""
    if found.outcome.kind != "ordered":
        return []
    way = "cut" if "cut" in found.ways else found.ways[0]
    frame = found.categories(interval)
    mine = records(frame[frame["way"] == way])
    n = len(found.outcome.levels)
    rows = tuple(
        (
            called(name),
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


def parameter_tables(found: ClassOutcomes, interval: float) -> list[Block]:
    """Return spreads and slopes, folded."""
    frame = found.parameters(interval)
    if frame.empty:
        return []
    rows = tuple(
        (
            row["parameter"]
            + (f" in {called(row['latent_class'])}" if row["latent_class"] else ""),
            WAY_WORDS[row["way"]],
            number_text(row["median"], row["lower"], row["upper"]),
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
    notes: tuple[str, ...] = ()
    if found.outcome.kind == "count":
        notes = ("Size: the smaller it is, the more counts vary beyond a Poisson's.",)
    return [PageTable(caption, heads, rows, notes, folded=True)]
