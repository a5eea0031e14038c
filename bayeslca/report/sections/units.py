"""How common each class is, unit by unit: alone, pooled, and what lies between units."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from bayeslca.model.pooled_prevalence import new_unit_name
from bayeslca.posterior.partial_pooling import MEAN, SD
from bayeslca.report.blocks import Block, Bullets, Head, PageTable, Paragraph, Picture, Section
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, Figure, draw
from bayeslca.report.unit_plots import SIDE_BY_SIDE, draw_units, unit_order, units_height
from bayeslca.report.wording import (
    called,
    counted,
    decimal,
    level,
    listed,
    number_interval,
    percent,
    percent_bound,
    percent_interval,
    percent_value,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    import pandas as pd

ANCHOR, HEADING = "units", "How common each class is, unit by unit"
MOST_SHOWN = 40
"""Units in the figure at the most: those with most cases; the table holds all."""
FEW_DRAWS = 200


def heading(facts: Facts) -> str:
    """Return the section's heading: ``How common each class is, district by district``."""
    return HEADING.replace("unit", _name(facts))


def units_section(facts: Facts) -> Section | None:
    """Return the section on pooled units; None where units are neither pooled nor compared."""
    blocks: list[Block] = []
    if facts.posterior.model.pooled:
        frame = facts.posterior.partial_pooling(interval=facts.content.interval)
        between = facts.posterior.between_units(interval=facts.content.interval)
        blocks += [Paragraph(_pooled_in_words(facts, frame)), Bullets(_by_class(facts, between))]
        blocks += [Picture(figure) for figure in _figures(facts, frame)]
        blocks += [_table(facts, frame), _between_table(facts, between)]
        blocks.append(Paragraph(_sensitivity_in_words(facts)))
    if facts.content.units is not None:
        blocks += [Paragraph(_left_out_in_words(facts)), _left_out_table(facts)]
    return Section(ANCHOR, heading(facts), tuple(blocks)) if blocks else None


def _name(facts: Facts) -> str:
    groups = facts.posterior.model.groups
    return groups.name if groups else "unit"


def _pooled_in_words(facts: Facts, frame: pd.DataFrame) -> str:
    name = _name(facts)
    sizes = frame.drop_duplicates("group")
    n, fewest, most = len(sizes), int(sizes["cases"].min()), int(sizes["cases"].max())
    borrowed = sizes["borrowed"]
    return (
        f"The cases lie in {counted(n, 'unit')} ({name}) of {whole(fewest)} to "
        f"{counted(most, 'case')} each. A {name} with few cases says little by itself: its own "
        "cases may all be of one class by chance. Units are therefore pooled: each estimate is "
        f"drawn towards the mean of all, the more so the fewer cases the {name} has and the more "
        "alike units turn out to be. Of the estimates, at least "
        f"{percent(float(borrowed.min()))} (with most cases) to {percent(float(borrowed.max()))} "
        "(with fewest) comes from all units together."
    )


def _by_class(facts: Facts, between: pd.DataFrame) -> tuple[tuple[str, str], ...]:
    """Say for each class how it varies, and what is expected of a unit that was not observed."""
    name, interval = _name(facts), facts.content.interval
    new = facts.posterior.prevalence(interval=interval)
    new = new[new["group"] == new_unit_name(name)]
    expected = {str(row["latent_class"]): row for row in new.to_dict("records")}
    entries = []
    for latent_class in facts.class_names:
        mean, sd = _row(between, MEAN, latent_class), _row(between, SD, latent_class)
        one = expected[latent_class]
        points = (
            f"{percent_value(sd['median'])} percentage points "
            f"({percent_bound(sd['lower'])} to {percent_bound(sd['upper'])})"
        )
        entries.append(
            (
                sentence(called(latent_class)).rstrip(".") + ":",
                f"{percent_interval(mean['median'], mean['lower'], mean['upper'])} in the mean of "
                f"all units, between which its share varies with a standard deviation of {points}. "
                f"In a {name} that was not observed, expect "
                f"{percent_interval(one['median'], one['lower'], one['upper'])}.",
            )
        )
    return tuple(entries)


def _row(between: pd.DataFrame, quantity: str, latent_class: str = "") -> dict[Any, Any]:
    here = (between["quantity"] == quantity) & (between["latent_class"] == latent_class)
    row: dict[Any, Any] = between[here].to_dict("records")[0]
    return row


def _figures(facts: Facts, frame: pd.DataFrame) -> Iterator[Figure]:
    interval = facts.content.interval
    # Of two classes one says all; units stand in the order of the class that is named first.
    names = facts.class_names if len(facts.class_names) > 2 else facts.class_names[:1]
    sizes = frame.drop_duplicates("group").sort_values("cases", ascending=False, kind="stable")
    kept = set(sizes["group"].head(MOST_SHOWN))
    shown = [unit for unit in unit_order(frame, names[0]) if unit in kept]
    of_all = (
        "" if len(shown) == len(sizes) else
        f" The {len(shown)} units with most cases; the table holds all."
    )  # fmt: skip
    for first in range(0, len(names), SIDE_BY_SIDE):
        some = names[first : first + SIDE_BY_SIDE]
        yield draw(
            "units" if first == 0 else f"units-{first // SIDE_BY_SIDE + 1}",
            lambda drawing, some=some: draw_units(  # type: ignore[misc]
                drawing, facts.posterior, some, shown, interval
            ),
            size=(WIDTH, units_height(len(shown))),
            caption=(
                f"Each {_name(facts)} with its cases in brackets: a marker at the pooled median, a "
                f"line over its {level(interval)} interval, an upright stroke at what its own "
                f"cases alone say, a dotted line at the mean of all units. In order of "
                f"{called(names[0])}.{of_all}"
            ),
            alt=(
                f"Pooled shares of {listed([called(name) for name in some])} in "
                f"{counted(len(shown), 'unit')}; the table below holds the numbers."
            ),
        )


def _table(facts: Facts, frame: pd.DataFrame) -> PageTable:
    rows = []
    for row in frame.to_dict("records"):
        rows.append(
            (
                str(row["group"]),
                called(str(row["latent_class"])),
                whole(row["cases"]),
                percent(row["alone"]),
                percent_interval(row["median"], row["lower"], row["upper"]),
                percent(row["borrowed"]),
            )
        )
    heads = (
        Head(_name(facts).capitalize(), "the unit of cases", numeric=False),
        Head("Class", "the class that it is about", numeric=False),
        Head("Cases", "of the unit, with at least one answer"),
        Head("Alone", "share that the unit's own cases are most probable under"),
        Head("Pooled", f"median ({level(facts.content.interval)} interval)"),
        Head("Borrowed", "part of the estimate that comes from all units together, at least"),
    )
    return PageTable(
        "Each unit alone and pooled", heads, tuple(rows), folded=len(rows) > 12,
        notes=(
            "Read these as estimates with intervals, not as a ranking: units whose intervals "
            "overlap widely are not told apart.",
        ),
    )  # fmt: skip


def _between_table(facts: Facts, between: pd.DataFrame) -> PageTable:
    rows = []
    for row in between.to_dict("records"):
        about = str(row["quantity"])
        name = f", {called(str(row['latent_class']))}" if row["latent_class"] else ""
        shares = about in (MEAN, SD)
        now, before = (
            percent_interval(*values) if shares else _number(values)
            for values in (
                (row["median"], row["lower"], row["upper"]),
                (row["prior_median"], row["prior_lower"], row["prior_upper"]),
            )
        )
        rows.append((sentence(about).rstrip(".") + name, now, before))
    heads = (
        Head("Between units", "", numeric=False),
        Head("After the data", f"median ({level(facts.content.interval)} interval)"),
        Head("Before the data", "the same of the prior"),
    )
    return PageTable(
        "How much units differ", heads, tuple(rows),
        notes=(
            "The spread is 0 when all units are alike and 1 when each holds one class only; its "
            "square is the correlation of two cases of one unit. The concentration is that of the "
            "units' Dirichlet distribution: as many cases as the mean of all units counts for.",
        ),
    )  # fmt: skip


def _number(values: tuple[float, float, float]) -> str:
    median, lower, upper = (significant(value) for value in values)
    return f"{median} ({lower} to {upper})"


def _sensitivity_in_words(facts: Facts) -> str:
    frame = facts.posterior.spread_sensitivity(interval=facts.content.interval)
    stated, others = frame.iloc[0], frame.iloc[1:]
    largest = float(others["largest_change"].max())
    text = (
        f"Would another prior on the spread change this? Under the stated one the spread is "
        f"{number_interval(stated['median'], stated['lower'], stated['upper'])}; under "
        f"{len(others)} others (half and twice as strong, one that favours units alike and one "
        f"that favours them different) its median lies between {decimal(others['median'].min(), 2)}"
        f" and {decimal(others['median'].max(), 2)}, and no unit's mean share of a class moves by "
        f"more than {percent_value(largest)} percentage points."
    )
    if float(frame["draws_that_count"].min()) < FEW_DRAWS:
        text += " Few draws count under some of them: fit the model with that prior to be sure."
    return text


def _left_out_in_words(facts: Facts) -> str:
    assert facts.content.units is not None  # asked before
    table, name = facts.content.units.table, _name(facts)
    best = str(table["elpd"].idxmax())
    others = [str(row) for row in table.index if row != best and table.loc[row, "tied"]]
    behind = [str(row) for row in table.index if not table.loc[row, "tied"]]
    text = (
        f"How well is a {name} predicted that the model has not seen? One {name} at a time was "
        "left out and all its answers were predicted from the others, its own prevalences summed "
        f"out. “{sentence(best).rstrip('.')}” predicts best"
    )
    text += f", tied with {listed([f'“{row}”' for row in others])}" if others else ""
    text += f"; {listed([f'“{row}”' for row in behind])} predicts worse." if behind else "."
    return text + (
        f" This is not the accuracy for a new case of a known {name}, by which numbers of classes "
        "are compared elsewhere on this page."
    )


def _left_out_table(facts: Facts) -> PageTable:
    assert facts.content.units is not None  # asked before
    rows = tuple(
        (
            str(name),
            f"{decimal(row['elpd_diff'])} ± {decimal(row['elpd_diff_se'])}",
            "yes" if row["tied"] else "no",
            f"{decimal(row['elpd'])} ± {decimal(row['elpd_se'])}",
            whole(row["pareto_k_high"]),
        )
        for name, row in facts.content.units.table.iterrows()
    )
    heads = (
        Head("Units are", "pooled, with a prior each, or no matter", numeric=False),
        Head("Behind the best", "difference in predictive accuracy ± its standard error"),
        Head("Tied", "too close to the best to tell", numeric=False),
        Head("Accuracy", "elpd of whole units left out ± its standard error over units"),
        Head("Unreliable", "units whose importance weights are not reliable"),
    )
    return PageTable("One unit left out at a time", heads, rows)
