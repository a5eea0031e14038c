"""Plots of what predicts class: the probability of each class along a covariate."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes
from bayeslca.report.palette import FAINT, class_colour, class_marker, line_style, plain
from bayeslca.report.wording import called, level

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.relate.predictors.class_predictors import ClassPredictors, Way

__all__ = ["plot_class_probabilities"]


def plot_class_probabilities(
    found: ClassPredictors,
    along: str,
    *,
    interval: float = 0.95,
    way: Way | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Plot the probability of each class along a covariate, with its interval.

    Parameters
    ----------
    found : ClassPredictors
    along : str
        A covariate: lines and bands for numbers, points for categories.
    interval : float
    way : str, optional
        The main way when left out.
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    ax = ax if ax is not None else new_axes(5.6, 3.4)
    table = found.class_probabilities(along, interval, way)
    values = list(dict.fromkeys(table["value"]))
    is_line = not found.design.levels_of(along)
    n_classes = len(found.class_names)
    for k, name in enumerate(found.class_names):
        mine = table[table["latent_class"] == name]
        label = plain(called(name), LABEL_WIDTH, 1)
        low, middle, high = (mine[c].to_numpy(float) for c in ("lower", "median", "upper"))
        if is_line:
            x = mine["value"].to_numpy(dtype=np.float64)
            ax.fill_between(x, low, high, color=class_colour(k), alpha=0.15, linewidth=0)
            ax.plot(x, middle, color=class_colour(k), linestyle=line_style(k), label=label)
            every = max(1, x.size // 5)
            ax.plot(
                x[::every], middle[::every], class_marker(k), color=class_colour(k), markersize=5
            )
            continue
        x = np.arange(len(values)) + 0.16 * (k - (n_classes - 1) / 2)
        ax.errorbar(
            x,
            middle,
            yerr=np.abs([middle - low, high - middle]),
            fmt=class_marker(k),
            color=class_colour(k),
            label=label,
            markersize=6,
            elinewidth=1.4,
        )
    if is_line:
        seen = found.design.frame[along].to_numpy(dtype=np.float64)
        ax.plot(seen, np.zeros(seen.size), "|", color="#555555", markersize=7, clip_on=False)
        ax.set_xlim(min(values), max(values))
    else:
        shown = [plain(f"{v:g}" if isinstance(v, float) else str(v), 14) for v in values]
        ax.set_xticks(range(len(values)), shown)
        ax.set_xlim(-0.5, len(values) - 0.5)
    ticks = np.linspace(0, 1, 6)
    ax.set_yticks(ticks, [f"{100 * tick:.0f} %" for tick in ticks])
    ax.set_ylim(0, 1)
    ax.set_ylabel(f"Probability of class ({level(interval)} interval)")
    ax.set_xlabel(plain(along))
    ax.grid(axis="y", color=FAINT, linewidth=0.6)
    ax.set_axisbelow(True)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    legend_above(ax, n_classes)
    return ax
