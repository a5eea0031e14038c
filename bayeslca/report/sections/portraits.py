"""A class in one or two sentences: the answers that its cases usually and seldom give."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import Any, NamedTuple

from bayeslca.report.facts import Facts
from bayeslca.report.palette import PRIOR_MARK
from bayeslca.report.wording import listed, listed_up_to, percent
from bayeslca.responses.item import Item

USUAL, SELDOM = 0.8, 0.2
FEW_ITEMS = 10
"""Up to so many items, a portrait names them all."""
MOST_NAMED = 4
PRIOR_LEGEND = (
    f"{PRIOR_MARK} rests mostly on the prior: the answers have moved it little, or the prior "
    "weighs more than the cases."
)


def portrait(facts: Facts, latent_class: str) -> str:
    """Describe a class by its usual and its seldom answers, with their probabilities.

    With many items only the clearest are named: the table has them all. Where response
    probabilities differ by group, the portrait is of the first group and says so.
    """
    items = facts.posterior.model.items
    most = len(items) if len(items) <= FEW_ITEMS else MOST_NAMED
    named = [_named(facts, latent_class, item) for item in items]
    parts = [
        *_by_answer(f"usually ({percent(USUAL)} or more)", named, most, lambda p: p >= USUAL),
        *_by_answer(f"seldom ({percent(SELDOM)} or less)", named, most, lambda p: p <= SELDOM),
    ]
    between = [one.text for one in named if one.answer and SELDOM < one.probability < USUAL]
    if between and len(items) <= FEW_ITEMS:
        parts.append(f"in between: {listed(between)}.")
    several = [one.text for one in named if not one.answer]
    if several:
        parts.append(f"{listed_up_to(several, most)}.")
    where = f"in {facts.response_groups[0]}: " if facts.response_groups else ""
    return (where[:1].upper() + where[1:]) + " ".join(part[0].upper() + part[1:] for part in parts)


class _Named(NamedTuple):
    """An item as a portrait names it; ``answer`` is empty for items with many answers."""

    answer: str
    probability: float
    text: str


def _named(facts: Facts, latent_class: str, item: Item) -> _Named:
    cells = class_cells(facts, latent_class)
    group = facts.response_groups[0] if facts.response_groups else ""

    def mark(answer: str) -> str:
        marked = (group, latent_class, item.name, answer) in facts.marked_answers
        return PRIOR_MARK if marked else ""

    if item.n_categories > 2:
        best = max(item.categories, key=lambda name: cells[(item.name, name)]["median"])
        share = float(cells[(item.name, best)]["median"])
        stop = "" if item.text.endswith("?") else ":"
        said = f"{item.text}{stop} most often “{best}” ({percent(share)}{mark(best)})"
        return _Named("", share, said)
    yes = item.yes or item.categories[-1]
    share = float(cells[(item.name, yes)]["median"])
    return _Named(yes, share, f"{item.text} ({percent(share)}{mark(yes)})")


def _by_answer(
    how: str, named: Sequence[_Named], most: int, holds: Callable[[float], bool]
) -> Iterator[str]:
    """Yield a sentence for each answer that so many give, the clearest items first."""
    chosen = [one for one in named if one.answer and holds(one.probability)]
    chosen.sort(key=lambda one: -abs(one.probability - 0.5))
    for answer in dict.fromkeys(one.answer for one in chosen):
        texts = [one.text for one in chosen if one.answer == answer]
        yield f"{how} “{answer}”: {listed_up_to(texts, most)}."


def class_cells(facts: Facts, latent_class: str) -> Mapping[tuple[str, str], Mapping[str, Any]]:
    """Return a class's response probabilities by (item, category); of the first group if many."""
    frame = facts.probabilities
    if "group" in frame:
        frame = frame[frame["group"] == frame["group"].iloc[0]]
    frame = frame[frame["latent_class"] == latent_class]
    return {
        (str(row["item"]), str(row["category"])): {str(k): v for k, v in row.items()}
        for row in frame.to_dict("records")
    }
