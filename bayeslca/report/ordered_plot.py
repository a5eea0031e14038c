"""Ordered items as stacked bars: the answers in their order, a bar for each class."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca.exceptions import ModelError, near_names
from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes, percent_axis
from bayeslca.report.palette import INK, ink_on, plain, shade
from bayeslca.report.wording import called, level, percent_value

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.item import Item


def plot_ordered_item(
    posterior: Posterior,
    item: str,
    *,
    interval: float = 0.95,
    group: str | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Plot an ordered item as stacked bars: the answers in their order, a bar for each class.

    The thin line at each border between answers is the interval of the probability of all the
    answers up to that border.

    Parameters
    ----------
    posterior : Posterior
    item : str
        Name of the item.
    interval : float
        Level of the equal-tailed intervals at the borders.
    group : str, optional
        The group whose response probabilities are shown, where they differ by group.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    (chosen,) = chosen_items(posterior, [item])
    names = posterior.model.class_names
    ax = ax if ax is not None else new_axes(7.0, 1.6 + 0.42 * len(names))
    draws = _item_draws(posterior, chosen, group)
    count = chosen.n_categories
    colours = [shade(position, count) for position in range(count)]
    for k in range(len(names)):
        share = draws[:, k].mean(axis=0)
        left = np.concatenate([[0.0], np.cumsum(share)])
        for position in range(count):
            ax.barh(
                k, share[position], left=left[position], height=0.62, color=colours[position],
                edgecolor=INK, linewidth=0.6,
                label=plain(chosen.categories[position], LABEL_WIDTH, 1) if k == 0 else None,
            )  # fmt: skip
            if share[position] >= 0.06:
                ax.text(
                    left[position] + share[position] / 2, k, percent_value(share[position]),
                    ha="center", va="center", fontsize=8, color=ink_on(colours[position]),
                )  # fmt: skip
        _border_intervals(ax, draws[:, k], k, interval)
    ax.set_yticks(range(len(names)), [plain(called(name), LABEL_WIDTH) for name in names])
    ax.set_ylim(len(names) - 0.5, -0.5)
    percent_axis(ax, f"Share of the class (borders: {level(interval)} interval)")
    legend_above(ax, count)
    return ax


def chosen_items(posterior: Posterior, names: Sequence[str] | None) -> list[Item]:
    """Return the items of these names; all where none are named."""
    items = list(posterior.model.items)
    if names is None:
        return items
    by_name = {item.name: item for item in items}
    for name in names:
        if name not in by_name:
            msg = f"the model has no item {name!r}{near_names(name, by_name)}; name one it has."
            raise ModelError(msg)
    return [by_name[name] for name in names]


def _item_draws(posterior: Posterior, item: Item, group: str | None) -> Any:
    """Return the draws of one item's probabilities, shape (draw, class, category)."""
    names = [other.name for other in posterior.model.items]
    start = sum(other.n_categories for other in posterior.model.items[: names.index(item.name)])
    draws = posterior.response_probability_draws
    at = 0
    if group is not None and draws.shape[2] > 1 and posterior.model.groups is not None:
        at = posterior.model.groups.levels.index(group)
    part = draws[:, :, at, :, start : start + item.n_categories]
    return part.reshape(-1, *part.shape[2:])


def _border_intervals(ax: Axes, draws: Any, k: int, interval: float) -> None:
    """Draw the interval of each border, staggered so that neighbours do not run together."""
    upto = np.cumsum(draws, axis=1)[:, :-1]
    tail = (1 - interval) / 2
    lower, upper = np.quantile(upto, [tail, 1 - tail], axis=0)
    for border in range(upto.shape[1]):
        place = k + (0.39 if border % 2 else -0.39)
        ax.plot([lower[border], upper[border]], [place, place], color=INK, linewidth=1.1)
        middle = float(upto[:, border].mean())
        ax.plot([middle, middle], [place - 0.05, place + 0.05], color=INK, linewidth=1.1)
