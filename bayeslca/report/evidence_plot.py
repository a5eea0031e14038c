"""How probable each number of classes is, given the answers: a bar each, with its error."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.report.axes import new_axes, percent_axis
from bayeslca.report.palette import INK, class_colour
from bayeslca.report.plots import row_name
from bayeslca.report.wording import percent

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.assess.class_count.class_counts import ClassCounts


def plot_count_probabilities(counts: ClassCounts, *, ax: Axes | None = None) -> Axes:
    """Plot P(number of classes | answers) with two Monte Carlo errors.

    Parameters
    ----------
    counts : ClassCounts
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    table = counts.table
    ax = ax if ax is not None else new_axes(7.0, 1.2 + 0.34 * len(table))
    places = np.arange(len(table))
    chance, error = table["probability"].to_numpy(), table["probability_mcse"].to_numpy()
    known = np.isfinite(chance)
    ax.barh(places[known], chance[known], color=class_colour(0), edgecolor=INK, height=0.6)
    ax.errorbar(
        chance[known], places[known], xerr=2 * error[known], fmt="none", color=INK, capsize=3
    )
    for at in places:
        text = percent(float(chance[at])) if known[at] else "evidence not reliable"
        reach = float(chance[at] + 2 * error[at]) if known[at] else 0.0
        ax.annotate(text, (reach, at), xytext=(6, -3.5), textcoords="offset points", fontsize=8.5)
    ax.set_yticks(places, [row_name(name) for name in table.index])
    ax.set_ylim(len(table) - 0.5, -0.5)
    percent_axis(ax, "Probability given the answers (± 2 simulation errors)")
    ax.set_xlim(0, 1.12)
    return ax
