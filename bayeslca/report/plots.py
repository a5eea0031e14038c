"""Plots of what was learnt: each takes and returns matplotlib Axes.

Global settings of matplotlib are read, never changed. Colour is never the only sign: classes
have markers, answers have positions and numbers, chains have rows or line styles.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca.assess.comparison.words import OWN
from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes, percent_axis, quiet
from bayeslca.report.ordered_plot import chosen_items, plot_ordered_item
from bayeslca.report.palette import (
    BAND,
    INK,
    PRIOR_MARK,
    class_colour,
    class_marker,
    plain,
)
from bayeslca.report.placement import placement
from bayeslca.report.sampling_plots import plot_ranks, plot_traces
from bayeslca.report.unit_plots import plot_units
from bayeslca.report.wording import called, decimal, level

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from bayeslca.assess.comparison.compare import Comparison
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
    "plot_units",
]


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

    A dagger stands beside what rests mostly on the prior.

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
    chosen = chosen_items(posterior, items)
    rows = profile_rows(chosen)
    ax = ax if ax is not None else new_axes(7.0, profile_height(posterior, chosen))
    frame = posterior.response_probabilities(interval=interval)
    table = _keyed(_one_group(frame.assign(marked=posterior.prior_marks.answers), group))
    names = posterior.model.class_names
    offsets = dodge(len(names))
    for at in range(0, len(rows), 2):
        ax.axhspan(at - 0.5, at + 0.5, color=BAND, zorder=0, linewidth=0)
    for k, name in enumerate(names):
        cells = [table[(name, item.name, category)] for item, category in rows]
        places = np.arange(len(rows)) + offsets[k]
        _points(ax, cells, places, k, label=plain(called(name), LABEL_WIDTH, 1))
    ax.set_yticks(range(len(rows)), [row_label(item, category) for item, category in rows])
    ax.set_ylim(len(rows) - 0.5, -0.5)
    percent_axis(ax, f"Probability given the class ({level(interval)} interval)")
    legend_above(ax, len(names))
    return ax


def profile_height(posterior: Posterior, items: Sequence[Item]) -> float:
    """Return the height in inches at which a profile of these items can be read."""
    n_rows = len(profile_rows(items))
    return 1.4 + n_rows * row_height(posterior.model.n_classes)


def row_height(n_classes: int) -> float:
    """Return the height in inches that one row of a profile takes."""
    return max(0.42, 0.16 + 0.115 * n_classes)


def plot_prevalence(
    posterior: Posterior, *, interval: float = 0.95, ax: Axes | None = None
) -> Axes:
    """Plot how common each class is, with its interval; a row for each group where there are any.

    Of pooled units the rows are a unit that was not observed and all cases together; each unit is
    shown by `bayeslca.report.unit_plots.plot_units`.

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
    frame = frame.assign(marked=posterior.prior_marks.prevalence)
    frame = without_pooled_units(posterior, frame)
    names = posterior.model.class_names
    groups = list(dict.fromkeys(frame["group"])) if "group" in frame else [None]
    height = 1.1 + 0.36 * len(names) * len(groups)
    ax = ax if ax is not None else new_axes(7.0, height)
    labels: list[str] = []
    for k, name in enumerate(names):
        mine = frame[frame["latent_class"] == name]
        for group in groups:
            part = mine if group is None else mine[mine["group"] == group]
            _points(ax, part.to_dict("records"), np.array([len(labels)]), k)
            labels.append(called(name) if group is None else f"{called(name)}, {group}")
    ax.set_yticks(range(len(labels)), [plain(text, LABEL_WIDTH) for text in labels])
    ax.set_ylim(len(labels) - 0.5, -0.5)
    percent_axis(ax, f"Share of the cases ({level(interval)} interval)")
    return ax


def without_pooled_units(posterior: Posterior, frame: pd.DataFrame) -> pd.DataFrame:
    """Leave out the rows of single units where units are pooled: they have a place of their own."""
    model = posterior.model
    if not model.pooled or model.groups is None:
        return frame
    return frame[~frame["group"].isin(model.groups.levels)]


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
    ax = ax if ax is not None else new_axes(7.0, 1.3 + 0.34 * len(table))
    furthest = -_far_behind(table)
    for at, (name, row) in enumerate(table.iterrows()):
        if row["elpd_diff"] < furthest:
            ax.plot(furthest, at, "<", markersize=7, color=INK, markerfacecolor="white")
            _beside(ax, f"{decimal(-row['elpd_diff'])} behind", (furthest, at), (8, -3))
            continue
        ax.errorbar(
            row["elpd_diff"], at, xerr=2 * row["elpd_diff_se"],
            fmt="s" if name == study_row else "o", markersize=7, color=INK,
            markerfacecolor=class_colour(0) if bool(row["tied"]) else "white", capsize=3,
        )  # fmt: skip
        if not bool(row["trustworthy"]):
            _beside(ax, "not to be trusted", (row["elpd_diff"], at), (-40, 7))
    ax.set_xlim(left=furthest * 1.05)
    ax.axvline(0, color=INK, linewidth=0.8, linestyle=":")
    ax.set_yticks(range(len(table)), [plain(row_name(name), LABEL_WIDTH) for name in table.index])
    ax.set_ylim(len(table) - 0.5, -0.5)
    ax.set_xlabel("Predictive accuracy less the best (± 2 errors)")
    quiet(ax)
    return ax


def row_name(name: object) -> str:
    """Return how a model of a comparison is called: ``3 classes``, ``1 class``, or its name."""
    text = str(name)
    if text.isdigit():
        return f"{text} class" if text == "1" else f"{text} classes"
    return "the study's own model" if name == OWN else text


def _far_behind(table: pd.DataFrame) -> float:
    """Return how far behind a model may be shown to scale: others get an arrow and a number."""
    reach = table["elpd_diff"].abs() + 2 * table["elpd_diff_se"]
    far = 4 * max(4.0, float(reach[table["tied"].astype(bool)].max()))
    return min(far, float(reach.max()))


def _beside(ax: Axes, text: str, point: tuple[float, float], offset: tuple[int, int]) -> None:
    ax.annotate(text, point, xytext=offset, textcoords="offset points", fontsize=8.5)


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
    ax = ax if ax is not None else new_axes(7.0, 1.2 + 0.7 * len(names))
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
    percent_axis(ax, "Probability of the case's most probable class")
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
    for cell, value, place in zip(cells, median, places, strict=True):
        if cell["marked"]:
            _beside(ax, PRIOR_MARK, (value, place), (4, 2))


def _one_group(frame: pd.DataFrame, group: str | None) -> pd.DataFrame:
    if "group" not in frame:
        return frame
    return frame[frame["group"] == (group if group is not None else frame["group"].iloc[0])]


def _keyed(frame: pd.DataFrame) -> dict[tuple[str, str, str], dict[str, float]]:
    keys = zip(frame["latent_class"], frame["item"], frame["category"], strict=True)
    cells = frame[["median", "lower", "upper", "marked"]].to_dict("records")
    return {
        (str(a), str(b), str(c)): {str(name): float(value) for name, value in cell.items()}
        for (a, b, c), cell in zip(keys, cells, strict=True)
    }


def row_label(item: Item, category: str) -> str:
    """Return how a row of a profile is called: the item, and its answer where that is not yes."""
    if item.n_categories == 2 and item.yes is not None and item.yes.casefold() == "yes":
        return plain(item.text, LABEL_WIDTH)
    return plain(f"{item.text}: {category}", LABEL_WIDTH)


def dodge(count: int) -> Any:
    """Return how far the marks of each class stand from the middle of their row."""
    return (np.arange(count) - (count - 1) / 2) * min(0.2, 0.8 / max(count, 1))
