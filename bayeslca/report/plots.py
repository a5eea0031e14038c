"""Plots of what was learnt: each takes and returns matplotlib Axes.

Global settings of matplotlib are read, never changed. Colour is never the only sign: classes
have markers, answers have positions and numbers, chains have rows or line styles.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca.report.palette import (
    BAND,
    FAINT,
    INK,
    class_colour,
    class_marker,
    ink_on,
    plain,
    shade,
)
from bayeslca.report.placement import placement
from bayeslca.report.sampling_plots import plot_ranks, plot_traces
from bayeslca.report.wording import called, level, percent_value

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from bayeslca.assess.compare import Comparison
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.item import Item

__all__ = [
    "plot_class_counts",
    "plot_membership",
    "plot_ordered_item",
    "plot_prevalence",
    "plot_profile",
    "plot_ranks",
    "plot_traces",
]

LABEL_WIDTH = 30


def profile_rows(items: Sequence[Item]) -> list[tuple[Item, str]]:
    """Return the rows of a profile: one answer of an item each.

    An item with two answers has one row, the answer that counts as yes (the last one where
    nothing was declared); an item with more answers has a row for each.
    """
    rows: list[tuple[Item, str]] = []
    for item in items:
        shown = item.categories if item.n_categories > 2 else (item.yes or item.categories[-1],)
        rows.extend((item, category) for category in shown)
    return rows


def plot_profile(
    posterior: Posterior,
    *,
    items: Sequence[str] | None = None,
    interval: float = 0.95,
    group: str | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Plot what each class looks like: the probability of each answer, with its interval.

    Parameters
    ----------
    posterior : Posterior
    items : sequence of str, optional
        Names of the items to show, in this order; all when not given.
    interval : float
        Level of the equal-tailed intervals.
    group : str, optional
        The group whose response probabilities are shown, where they differ by group.
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    chosen = _chosen_items(posterior, items)
    rows = profile_rows(chosen)
    ax = ax if ax is not None else _new_axes(7.0, profile_height(posterior, chosen))
    table = _keyed(_one_group(posterior.response_probabilities(interval=interval), group))
    names = posterior.model.class_names
    offsets = _dodge(len(names))
    for at in range(0, len(rows), 2):
        ax.axhspan(at - 0.5, at + 0.5, color=BAND, zorder=0, linewidth=0)
    for k, name in enumerate(names):
        cells = [table[(name, item.name, category)] for item, category in rows]
        places = np.arange(len(rows)) + offsets[k]
        _points(ax, cells, places, k, label=plain(called(name), LABEL_WIDTH, 1))
    ax.set_yticks(range(len(rows)), [_row_label(item, category) for item, category in rows])
    ax.set_ylim(len(rows) - 0.5, -0.5)
    _percent_axis(ax, f"Probability of the answer given the class, with {level(interval)} interval")
    _legend_above(ax, len(names))
    return ax


def profile_height(posterior: Posterior, items: Sequence[Item]) -> float:
    """Return the height in inches at which a profile of these items can be read."""
    n_rows = len(profile_rows(items))
    return 1.4 + n_rows * row_height(posterior.model.n_classes)


def row_height(n_classes: int) -> float:
    """Return the height in inches that one row of a profile takes."""
    return max(0.42, 0.16 + 0.115 * n_classes)


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
    (chosen,) = _chosen_items(posterior, [item])
    names = posterior.model.class_names
    ax = ax if ax is not None else _new_axes(7.0, 1.6 + 0.42 * len(names))
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
    _percent_axis(ax, f"Share of the class; borders with {level(interval)} interval")
    _legend_above(ax, count)
    return ax


def plot_prevalence(
    posterior: Posterior, *, interval: float = 0.95, ax: Axes | None = None
) -> Axes:
    """Plot how common each class is, with its interval; a row for each group where there are any.

    Parameters
    ----------
    posterior : Posterior
    interval : float
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    frame = posterior.prevalence(interval=interval)
    names = posterior.model.class_names
    groups = list(dict.fromkeys(frame["group"])) if "group" in frame else [None]
    height = 1.1 + 0.36 * len(names) * len(groups)
    ax = ax if ax is not None else _new_axes(7.0, height)
    labels: list[str] = []
    for k, name in enumerate(names):
        mine = frame[frame["latent_class"] == name]
        for group in groups:
            part = mine if group is None else mine[mine["group"] == group]
            _points(ax, part.to_dict("records"), np.array([len(labels)]), k)
            labels.append(called(name) if group is None else f"{called(name)}, {group}")
    ax.set_yticks(range(len(labels)), [plain(text, LABEL_WIDTH) for text in labels])
    ax.set_ylim(len(labels) - 0.5, -0.5)
    _percent_axis(ax, f"Share of the cases, with {level(interval)} interval")
    return ax


def plot_class_counts(
    comparison: Comparison, *, study_row: int | str | None = None, ax: Axes | None = None
) -> Axes:
    """Plot how far each model predicts behind the best, with two standard errors.

    Parameters
    ----------
    comparison : Comparison
    study_row : int or str, optional
        The row of the study's own model, drawn with a square.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    table = comparison.table
    ax = ax if ax is not None else _new_axes(7.0, 1.3 + 0.34 * len(table))
    for at, (name, row) in enumerate(table.iterrows()):
        tied = bool(row["tied"])
        ax.errorbar(
            row["elpd_diff"], at, xerr=2 * row["elpd_diff_se"],
            fmt="s" if name == study_row else "o", markersize=7, color=INK,
            markerfacecolor=class_colour(0) if tied else "white", capsize=3,
        )  # fmt: skip
        if not bool(row["trustworthy"]):
            ax.annotate(
                "not to be trusted", (row["elpd_diff"], at), xytext=(0, 7),
                textcoords="offset points", fontsize=8, ha="center",
            )  # fmt: skip
    ax.axvline(0, color=INK, linewidth=0.8, linestyle=":")
    ax.set_yticks(range(len(table)), [plain(row_name(name), LABEL_WIDTH) for name in table.index])
    ax.set_ylim(len(table) - 0.5, -0.5)
    ax.set_xlabel("Difference in predictive accuracy from the best (elpd), ± 2 standard errors")
    _quiet(ax)
    return ax


def row_name(name: object) -> str:
    """Return how a model of a comparison is called: ``3 classes``, ``1 class``, or its name."""
    text = str(name)
    if text.isdigit():
        return f"{text} class" if text == "1" else f"{text} classes"
    return "this study's model" if text == "this study" else text


def plot_membership(posterior: Posterior, *, ax: Axes | None = None) -> Axes:
    """Plot how surely cases are placed: a dot for each case, by its most probable class.

    A dot's place is the probability of the case's most probable class; cases are not named.

    Parameters
    ----------
    posterior : Posterior
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    names = posterior.model.class_names
    ax = ax if ax is not None else _new_axes(7.0, 1.2 + 0.7 * len(names))
    placed = placement(posterior)
    highest, modal, count = placed.highest, placed.modal, placed.count
    edges = np.linspace(1 / max(len(names), 2), 1.0, 26)
    for k in range(len(names)):
        mine = modal == k
        base = len(names) - 1 - k
        heights, _ = np.histogram(highest[mine], bins=edges, weights=count[mine])
        scale = 0.8 / max(float(heights.max(initial=0.0)), 1.0)
        ax.bar(
            edges[:-1], heights * scale, width=np.diff(edges), bottom=base, align="edge",
            color=class_colour(k), edgecolor="white", linewidth=0.8,
        )  # fmt: skip
        ax.axhline(base, color=INK, linewidth=0.8)
        total = int(count[mine].sum())
        ax.annotate(
            f"{total:,} cases" if total != 1 else "1 case", (edges[0], base + 0.55),
            xytext=(4, 0), textcoords="offset points", fontsize=8.5, va="center", color=INK,
        )  # fmt: skip
    ax.set_yticks(
        np.arange(len(names)) + 0.3, [plain(called(name), LABEL_WIDTH) for name in reversed(names)]
    )
    ax.set_ylim(-0.05, len(names))
    _percent_axis(ax, "Probability of the case's most probable class")
    ax.set_xlim(edges[0], 1.0)
    return ax


def _points(
    ax: Axes, cells: Sequence[Any], places: Any, k: int, *, label: str | None = None
) -> None:
    median = np.array([cell["median"] for cell in cells])
    lower = np.array([cell["lower"] for cell in cells])
    upper = np.array([cell["upper"] for cell in cells])
    ax.errorbar(
        median, places, xerr=np.clip([median - lower, upper - median], 0, None),
        fmt=class_marker(k), markersize=6, color=class_colour(k), markeredgecolor=INK,
        markeredgewidth=0.5, elinewidth=1.6, label=label, clip_on=False, zorder=3,
    )  # fmt: skip


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


def _chosen_items(posterior: Posterior, names: Sequence[str] | None) -> list[Item]:
    items = list(posterior.model.items)
    if names is None:
        return items
    by_name = {item.name: item for item in items}
    for name in names:
        if name not in by_name:
            from bayeslca.exceptions import ModelError, near_names

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


def _one_group(frame: pd.DataFrame, group: str | None) -> pd.DataFrame:
    if "group" not in frame:
        return frame
    return frame[frame["group"] == (group if group is not None else frame["group"].iloc[0])]


def _keyed(frame: pd.DataFrame) -> dict[tuple[str, str, str], dict[str, float]]:
    keys = zip(frame["latent_class"], frame["item"], frame["category"], strict=True)
    cells = frame[["median", "lower", "upper"]].to_dict("records")
    return {
        (str(a), str(b), str(c)): {str(name): float(value) for name, value in cell.items()}
        for (a, b, c), cell in zip(keys, cells, strict=True)
    }


def _row_label(item: Item, category: str) -> str:
    if item.n_categories == 2 and item.yes is not None and item.yes.casefold() == "yes":
        return plain(item.text, LABEL_WIDTH)
    return plain(f"{item.text}: {category}", LABEL_WIDTH)


def _dodge(count: int) -> Any:
    return (np.arange(count) - (count - 1) / 2) * min(0.2, 0.8 / max(count, 1))


def _percent_axis(ax: Axes, label: str) -> None:
    ax.set_xlim(0, 1)
    ticks = np.linspace(0, 1, 6)
    ax.set_xticks(ticks, [f"{100 * tick:.0f} %" for tick in ticks])
    ax.set_xlabel(label)
    _quiet(ax)


def _quiet(ax: Axes) -> None:
    ax.grid(axis="x", color=FAINT, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.tick_params(axis="y", length=0)
    for side in ("top", "right", "left"):
        ax.spines[side].set_visible(False)


def _legend_above(ax: Axes, entries: int) -> None:
    """Put the legend above the axes, in rows that are read from left to right."""
    handles, labels = ax.get_legend_handles_labels()
    longest = max((len(label) for label in labels), default=1)
    columns = max(1, min(entries, 75 // (longest + 5)))
    by_column = [at for first in range(columns) for at in range(first, entries, columns)]
    ax.legend(
        [handles[at] for at in by_column], [labels[at] for at in by_column], loc="lower left",
        bbox_to_anchor=(0, 1.0), ncols=columns, frameon=False, fontsize=9, borderaxespad=0.2,
        handletextpad=0.4, columnspacing=1.4,
    )  # fmt: skip


def _new_axes(width: float, height: float) -> Axes:
    import matplotlib.pyplot as plt

    return plt.subplots(figsize=(width, height), layout="constrained")[1]
