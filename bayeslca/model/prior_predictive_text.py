"""What the priors imply, as text for the terminal."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.prior_predictive import PriorPredictive

WIDTH = 80
_NAME = 36
_SHORTEST = 10
"""Characters of what a row is about, and the fewest of an item's name."""
_QUANTITIES = {
    "distinct_patterns": "distinct patterns",
    "sum_score_mean": "sum score, mean",
    "sum_score_sd": "sum score, spread (sd)",
}


def as_text(prior: PriorPredictive, most: int | None = None) -> str:
    """Return all tables, at most 80 columns wide.

    Parameters
    ----------
    prior : PriorPredictive
    most : int, optional
        Rows of a table at the most; all when left out.
    """
    cases = "1 case" if prior.n_cases == 1 else f"{prior.n_cases:,} cases"
    lines = textwrap.wrap(
        f"What the priors imply for a study of {cases} ({prior.draws:,} simulated studies)", WIDTH
    )
    if prior.exploratory:
        lines += textwrap.wrap(
            "The classes are interchangeable before the data: all of them have the same prior.",
            WIDTH,
        )
    margins = _of_yes(prior, prior.item_margins)
    parts: list[tuple[str, pd.DataFrame, int]] = [
        ("Share of the cases in each class", prior.prevalence, 2),
        ("P(answer | class)", _of_yes(prior, prior.response_probabilities), 2),
        ("Share of those who answer the item", margins, 2),
        ("All answers of a case", prior.patterns, 1),
        ("Cases with each sum score", prior.sum_scores, 0),
    ]
    for title, frame, places in parts:
        if not frame.empty:
            lines += ["", *_part(title, _one_class(prior, frame), places, most)]
    return "\n".join(lines)


def _one_class(prior: PriorPredictive, frame: pd.DataFrame) -> pd.DataFrame:
    """Leave out the rows that only repeat another class."""
    if not prior.exploratory or "latent_class" not in frame:
        return frame
    first = frame[frame["latent_class"] == "1"]
    return first.assign(latent_class="any class")


def _of_yes(prior: PriorPredictive, frame: pd.DataFrame) -> pd.DataFrame:
    """Leave out the answer of items with two that does not count as yes."""
    left_out = {
        (item.name, category)
        for item in prior.items
        if item.n_categories == 2
        for category in item.categories
        if category != (item.yes or item.categories[-1])
    }
    keys = zip(frame["item"], frame["category"], strict=True)
    return frame[[key not in left_out for key in keys]]


def _part(title: str, frame: pd.DataFrame, places: int, most: int | None) -> Iterator[str]:
    rows = frame.to_dict("records")
    shown = rows if most is None or len(rows) <= most + 1 else rows[:most]
    cells = [_cells(row, places) for row in shown]
    heads = ["median", "50 % interval", "95 % interval", "seen"][: len(cells[0])]
    widths = [max(map(len, column)) for column in zip(heads, *cells, strict=True)]
    name_width = min(_NAME, WIDTH - sum(widths) - 2 * len(widths))
    names = [_cut(title, name_width), *(f"  {_name(row, name_width - 2)}" for row in shown)]
    for name, line in zip(names, [heads, *cells], strict=True):
        numbers = (f"  {text:>{width}}" for text, width in zip(line, widths, strict=True))
        yield f"{name:<{name_width}}{''.join(numbers)}"
    if len(shown) < len(rows):
        yield f"  ... and {len(rows) - len(shown):,} more rows; print() shows all"


def _cells(row: dict[Any, Any], places: int) -> list[str]:
    intervals = (
        f"{_number(row[f'lower_{level}'], places)} to {_number(row[f'upper_{level}'], places)}"
        for level in (50, 95)
    )
    seen = [_number(row["observed"], places)] if "observed" in row else []
    return [_number(row["median"], places), *intervals, *seen]


def _name(row: dict[Any, Any], width: int) -> str:
    """Return what a row is about, as a statement would write it; a long item is cut first."""
    group = f", {row['group']}" if "group" in row else ""
    if "score" in row:
        return str(row["score"])
    if "quantity" in row:
        return _QUANTITIES[row["quantity"]]
    if "item" not in row:
        return _cut(f"{row['latent_class']}{group}", width)
    rest = f"={row['category']}"
    rest += f" | {row['latent_class']}{group}" if "latent_class" in row else ""
    return _cut(f"{_cut(str(row['item']), max(_SHORTEST, width - len(rest)))}{rest}", width)


def _cut(text: str, width: int) -> str:
    return text if len(text) <= width else f"{text[: width - 3]}..."


def _number(value: float, places: int) -> str:
    return f"{value:,.{places}f}"
