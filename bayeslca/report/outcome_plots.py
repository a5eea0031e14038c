"""Figures of what follows from class: class means by every way, and the outcome's distribution."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.relate.outcomes.words import MEAN_WORDS, WAY_WORDS
from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes, percent_axis, quiet
from bayeslca.report.figures import WIDTH
from bayeslca.report.palette import FAINT, INK, class_colour, class_marker, plain
from bayeslca.report.wording import level

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes

SPREAD = 0.16
"""Distance between the ways of one class, in rows."""


def means_size(found: ClassOutcomes) -> tuple[float, float]:
    """Return width and height of the figure of means."""
    rows = len(found.class_names) * len(found.ways)
    return WIDTH, 1.1 + 0.19 * rows + 0.1 * len(found.class_names)


def plot_outcome_means(
    found: ClassOutcomes, interval: float = 0.95, ax: Axes | None = None
) -> Axes:
    """Plot the mean of each class with its interval, one mark for each way.

    Parameters
    ----------
    found : ClassOutcomes
    interval : float
    ax : Axes, optional
        A new figure when left out.
    """
    ax = ax or new_axes(*means_size(found))
    frame = found.means(interval)
    n = len(found.ways)
    for w, way in enumerate(found.ways):
        mine = frame[frame["way"] == way]
        middle = mine["median"].to_numpy(dtype=np.float64)
        lower = mine["lower"].to_numpy(dtype=np.float64)
        upper = mine["upper"].to_numpy(dtype=np.float64)
        at = np.arange(len(middle)) + SPREAD * (w - (n - 1) / 2)
        colour = class_colour(w)
        ends = np.isfinite(lower) & np.isfinite(upper)
        ax.hlines(at[ends], lower[ends], upper[ends], color=colour, linewidth=1.6)
        ax.plot(
            middle,
            at,
            linestyle="none",
            marker=class_marker(w),
            color=colour,
            markersize=5.5,
            label=WAY_WORDS[way],
        )
    ax.set_yticks(
        range(len(found.class_names)), [plain(name, LABEL_WIDTH) for name in found.class_names]
    )
    ax.set_ylim(len(found.class_names) - 0.45, -0.55)
    label = f"{MEAN_WORDS[found.outcome.kind]}: {found.outcome.text}"
    if found.outcome.kind == "binary":
        percent_axis(ax, plain(label, 60))
    else:
        quiet(ax)
        ax.set_xlabel(plain(label, 60))
        if found.outcome.kind == "count":
            ax.set_xlim(left=0)
    legend_above(ax, n)
    return ax


def plot_outcome_distribution(
    found: ClassOutcomes, way: str = "cut", ax: Axes | None = None
) -> Axes:
    """Plot how many cases have which values, as observed and in replicates.

    Parameters
    ----------
    found : ClassOutcomes
    way : str
        One that has draws.
    ax : Axes, optional
    """
    frame = found.distribution[found.distribution["way"] == way]
    ax = ax or new_axes(WIDTH, 2.8)
    observed, expected, lower, upper = (
        frame[name].to_numpy(dtype=np.float64)
        for name in ("observed", "expected", "lower", "upper")
    )
    at = np.arange(len(frame))
    shown = level(found.distribution.attrs["interval"])
    ax.vlines(at, lower, upper, color=FAINT, linewidth=9, label=f"replicates ({shown})")
    ax.plot(at, expected, "_", color=INK, markersize=9, label="expected")
    ax.plot(at, observed, "o", color=class_colour(0), markersize=6, label="observed")
    ax.set_xticks(at, [plain(text, 14) for text in frame["values"]], fontsize=8)
    if len(frame) > 6:
        ax.tick_params(axis="x", rotation=35)
        for tick in ax.get_xticklabels():
            tick.set_horizontalalignment("right")
    ax.set_ylim(0, 1.1 * float(max(upper.max(), observed.max())))
    ticks = ax.get_yticks()[:-1]
    ax.set_yticks(ticks, [f"{100 * tick:.0f} %" for tick in ticks])
    ax.set_ylabel("share of cases")
    ax.set_xlabel(plain(found.outcome.text, 60))
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    legend_above(ax, 3)
    return ax
