"""What the figures' axes have in common: scales in per cent, few lines, legends above."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.report.palette import FAINT

if TYPE_CHECKING:
    from matplotlib.axes import Axes

LABEL_WIDTH = 26
"""Characters on a line of a label."""


def percent_axis(ax: Axes, label: str) -> None:
    """Let the horizontal axis run from 0 to 100 % and name it."""
    ax.set_xlim(0, 1)
    ticks = np.linspace(0, 1, 6)
    ax.set_xticks(ticks, [f"{100 * tick:.0f} %" for tick in ticks])
    ax.set_xlabel(label)
    quiet(ax)


def quiet(ax: Axes) -> None:
    """Leave faint vertical lines and the horizontal axis, and nothing else."""
    ax.grid(axis="x", color=FAINT, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.tick_params(axis="y", length=0)
    for side in ("top", "right", "left"):
        ax.spines[side].set_visible(False)


def legend_above(ax: Axes, entries: int) -> None:
    """Put the legend above the axes, in rows that are read from left to right."""
    handles, labels = ax.get_legend_handles_labels()
    longest = max((len(label) for label in labels), default=1)
    columns = max(1, min(entries, 58 // (longest + 5)))
    by_column = [at for first in range(columns) for at in range(first, entries, columns)]
    ax.legend(
        [handles[at] for at in by_column], [labels[at] for at in by_column], loc="lower left",
        bbox_to_anchor=(0, 1.0), ncols=columns, frameon=False, fontsize=9, borderaxespad=0.2,
        handletextpad=0.4, columnspacing=1.4,
    )  # fmt: skip


def new_axes(width: float, height: float) -> Axes:
    """Return the Axes of a new figure, for a user who gave none."""
    import matplotlib.pyplot as plt

    return plt.subplots(figsize=(width, height), layout="constrained")[1]
