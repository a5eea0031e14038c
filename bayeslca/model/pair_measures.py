"""What pairs of answers are measured by: scores of answers in an order, and concordance."""

from __future__ import annotations

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.responses.item import Item


def has_order(item: Item) -> bool:
    """Tell whether an item's answers can be counted up: two answers, or declared as ordered."""
    return item.ordered or item.n_categories == 2


def answer_scores(items: tuple[Item, ...]) -> Ints:
    """Return what each answer counts for, shape (A,).

    An item with two answers counts 1 for the one that means yes (the last where nothing was
    declared), an ordered item the place of its answer from 0, any other item nothing.
    """
    out: list[int] = []
    for item in items:
        places = list(range(item.n_categories))[:: direction(item)]
        out += places if has_order(item) else [0] * item.n_categories
    return np.array(out, dtype=np.int64)


def direction(item: Item) -> int:
    """Return -1 where the first of two answers means yes, else 1."""
    return -1 if item.n_categories == 2 and item.yes == item.categories[0] else 1


def concordance(tables: Floats) -> Floats:
    """Return concordant over discordant pairs of tables (..., R, C); the odds ratio of 2 x 2."""
    after = np.zeros_like(tables)  # cases higher on both items
    across = np.zeros_like(tables)  # cases higher on the first, lower on the second
    n_rows, n_columns = tables.shape[-2:]
    for a in range(n_rows):
        for b in range(n_columns):
            after[..., a, b] = tables[..., a + 1 :, b + 1 :].sum(axis=(-2, -1))
            across[..., a, b] = tables[..., a + 1 :, :b].sum(axis=(-2, -1))
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray((tables * after).sum(axis=(-2, -1)) / (tables * across).sum((-2, -1)))
