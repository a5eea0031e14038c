"""What each class looks like: profiles with intervals, ordered items as stacked bars."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Picture, Section, Subheading
from bayeslca.report.facts import Facts, overall_shares, shares_in_words
from bayeslca.report.figures import WIDTH, Figure, draw
from bayeslca.report.palette import PRIOR_MARK
from bayeslca.report.plots import plot_ordered_item, plot_profile, profile_rows, row_height
from bayeslca.report.sections.portraits import PRIOR_LEGEND, portrait
from bayeslca.report.wording import (
    called,
    counted_in_words,
    level,
    listed_up_to,
    percent,
    percent_interval,
    sentence,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.item import Item

ANCHOR, HEADING = "classes", "What each class looks like"
TALLEST = 8.5
"""Inches; a taller profile is shown as several figures, so that each can be seen whole."""


def classes_section(facts: Facts) -> Section:
    """Return the section that shows the classes."""
    blocks: list[Block] = [Paragraph(_tells_apart(facts))] if len(facts.class_names) > 1 else []
    blocks += [Picture(figure) for figure in profile_figures(facts)]
    blocks.append(response_table(facts))
    for heading, posterior in facts.content.alternatives.items():
        blocks += _alternative(facts, heading, posterior)
    return Section(ANCHOR, HEADING, tuple(blocks))


def profile_figures(facts: Facts) -> Iterator[Figure]:
    """Yield the figures of all items: profiles in pieces, then one for each ordered item.

    Where response probabilities differ by group, each group has its own.
    """
    for group in facts.response_groups or (None,):
        yield from _figures_of(facts, group)


def _figures_of(facts: Facts, group: str | None) -> Iterator[Figure]:
    items = facts.posterior.model.items
    plain = [item for item in items if not (item.ordered and item.n_categories > 2)]
    pieces = list(_pieces(plain, facts.posterior.model.n_classes))
    end = "" if group is None else f"-group-{facts.response_groups.index(group) + 1}"
    for at, piece in enumerate(pieces, start=1):
        part = f", part {at} of {len(pieces)}" if len(pieces) > 1 else ""
        yield _profile(facts, piece, f"profile-{at}{end}", part, group)
    ordered = [item for item in items if item.ordered and item.n_categories > 2]
    for at, item in enumerate(ordered, start=1):
        yield _stacked(facts, item, f"ordered-{at}{end}", group)


def _in_group(group: str | None) -> str:
    return "" if group is None else f", in {group}"


def response_table(facts: Facts) -> PageTable:
    """Return the table of all answers' probabilities, a column for each class."""
    frame = facts.probabilities
    groups = list(dict.fromkeys(frame["group"])) if "group" in frame else [None]
    rows = []
    for group in groups:
        part = frame if group is None else frame[frame["group"] == group]
        cells = {
            (str(row["latent_class"]), str(row["item"]), str(row["category"])): row
            for row in part.to_dict("records")
        }
        for item, category in profile_rows(facts.posterior.model.items):
            shown = [
                _cell(facts, (str(group or ""), name, item.name, category), cells)
                for name in facts.class_names
            ]
            where = [] if group is None else [str(group)]
            rows.append((item.text, category, *where, *shown))
    heads = [
        Head("Item", "what was asked", numeric=False),
        Head("Answer", "yes/no items show one answer", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if groups != [None] else []),
        *(Head(called(name), f"median ({level(facts.content.interval)} interval)")
          for name in facts.class_names),
    ]  # fmt: skip
    ruled = any(PRIOR_MARK in cell for row in rows for cell in row)
    notes = [PRIOR_LEGEND] if ruled else []
    return PageTable(
        "The probability of each answer in each class", tuple(heads), tuple(rows), tuple(notes)
    )


def _cell(
    facts: Facts,
    key: tuple[str, str, str, str],
    cells: Mapping[tuple[str, str, str], Mapping[Any, float]],
) -> str:
    row = cells[key[1:]]
    mark = f" {PRIOR_MARK}" if key in facts.marked_answers else ""
    return percent_interval(row["median"], row["lower"], row["upper"]) + mark


def _tells_apart(facts: Facts) -> str:
    frame = facts.probabilities
    if "group" in frame:
        frame = frame[frame["group"] == frame["group"].iloc[0]]
    ranges = []
    for item, category in profile_rows(facts.posterior.model.items):
        mine = frame[(frame["item"] == item.name) & (frame["category"] == category)]
        low, high = float(mine["median"].min()), float(mine["median"].max())
        stop = "" if item.text.endswith("?") else ":"
        name = item.text if item.n_categories == 2 else f"{item.text}{stop} {category}"
        ranges.append((high - low, f"{name} ({percent(low)} to {percent(high)})"))
    ranges.sort(key=lambda pair: -pair[0])
    best = [text for _, text in ranges[:3]]
    return sentence(
        f"the answers that differ most between the classes are {listed_up_to(best, 3)}, from the "
        "class that gives them least often to the one that gives them most often"
        + (f" (in {facts.response_groups[0]})" if facts.response_groups else "")
    )


def _pieces(items: Sequence[Item], n_classes: int) -> Iterator[list[Item]]:
    """Split items into runs of similar height, none taller than a figure may be."""
    heights = [len(profile_rows([item])) * row_height(n_classes) for item in items]
    n_pieces = math.ceil(sum(heights) / TALLEST)
    piece: list[Item] = []
    used, cuts = 0.0, 1
    for item, height in zip(items, heights, strict=True):
        if piece and used + height / 2 > cuts * sum(heights) / n_pieces:
            yield piece
            piece, cuts = [], cuts + 1
        piece.append(item)
        used += height
    if piece:
        yield piece


def _profile(
    facts: Facts, items: Sequence[Item], name: str, part: str, group: str | None
) -> Figure:
    interval, n_classes = facts.content.interval, facts.posterior.model.n_classes
    height = 1.2 + len(profile_rows(items)) * row_height(n_classes)
    chosen = [item.name for item in items]
    return draw(
        name,
        lambda drawing: plot_profile(
            facts.posterior,
            items=chosen,
            interval=interval,
            group=group,
            ax=drawing.subplots(),
        ),
        size=(WIDTH, height),
        caption=(
            f"The probability of each answer in each class{part}{_in_group(group)}: a marker at "
            f"the median, a line over the {level(interval)} interval. Each class has a colour and "
            "a marker of its own." + (f" {PRIOR_LEGEND}" if facts.marked_answers else "")
        ),
        alt="Profile plot. "
        + " ".join(f"{called(k)}: {portrait(facts, k)}" for k in facts.class_names),
    )


def _stacked(facts: Facts, item: Item, name: str, group: str | None) -> Figure:
    interval, n_classes = facts.content.interval, facts.posterior.model.n_classes
    return draw(
        name,
        lambda drawing: plot_ordered_item(
            facts.posterior, item.name, interval=interval, group=group, ax=drawing.subplots()
        ),
        size=(WIDTH, 1.8 + 0.46 * n_classes),
        caption=(
            f"{item.text}{_in_group(group)}: a bar for each class, its answers in their order, "
            f"with their mean probabilities in per cent. The thin lines are {level(interval)} "
            "intervals of the borders between answers."
        ),
        alt=f"Stacked bars of {item.text}; the numbers stand in the table below.",
    )


def _alternative(facts: Facts, heading: str, posterior: Posterior) -> list[Block]:
    """Show another number of classes that the data support as well, in brief."""
    interval = facts.content.interval
    shares = overall_shares(posterior, interval)
    frame: pd.DataFrame = posterior.response_probabilities(interval=interval)
    names = posterior.model.class_names
    cells = {
        (str(row["latent_class"]), str(row["item"]), str(row["category"])): row
        for row in frame.to_dict("records")
    }
    rows = tuple(
        (
            item.text,
            category,
            *(
                percent_interval(*(cells[(name, item.name, category)][k] for k in _INTERVAL))
                for name in names
            ),
        )
        for item, category in profile_rows(posterior.model.items)
    )
    heads = (
        Head("Item", "what was asked", numeric=False),
        Head("Answer", "yes/no items show one answer", numeric=False),
        *(Head(called(name), f"median ({level(interval)} interval)") for name in names),
    )
    text = (
        f"with {counted_in_words(len(names), 'class', 'classes')}, the data are predicted as well"
    )
    if len(names) > 1:
        text += f": {shares_in_words(shares, facts.n_cases)}"
    return [
        Subheading(f"The same answers with {heading}"),
        Paragraph(sentence(text)),
        PageTable(f"The probability of each answer with {heading}", heads, rows, folded=True),
    ]


_INTERVAL = ("median", "lower", "upper")
