"""Cases that stand out: how improbable their answers are, and how much they move a prevalence."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.left_out.influence_words import INFLUENTIAL, SURPRISING, influential, records
from bayeslca.report.axes import new_axes
from bayeslca.report.palette import FAINT, INK, class_colour
from bayeslca.report.wording import decimal

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.assess.left_out.influence import Influence

NAMED = 5
"""Patterns that are named by their row: those that stand out, or else the furthest out."""
LARGEST = 14.0
"""Points across of the marker of the commonest pattern."""


def plot_influence(found: Influence, *, ax: Axes | None = None) -> Axes:
    """Plot each distinct pattern: its log predictive density against what leaving one case does.

    Squares and orange: cases that stand out. The larger a marker, the more cases. Some are named
    by their rows.

    Parameters
    ----------
    found : Influence
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    ax = ax if ax is not None else new_axes(5.6, 3.4)
    rows = records(found.table)
    x = found.table["log_density"].to_numpy(dtype=np.float64)
    y = np.abs(found.table["largest"].to_numpy(dtype=np.float64))
    count = found.table["count"].to_numpy(dtype=np.float64)
    size = (5.0 + (LARGEST - 5.0) * np.sqrt(count / count.max())) ** 2
    out = np.array([influential(row) or row["p_replicate"] < SURPRISING for row in rows])
    ax.axhline(INFLUENTIAL, color=INK, linewidth=0.8, linestyle="--")
    for mask, marker, colour, label in (
        (~out, "o", class_colour(0), "Patterns"),
        (out, "s", class_colour(1), "Patterns that stand out"),
    ):
        if mask.any():
            ax.scatter(
                x[mask], y[mask], s=size[mask], marker=marker, facecolor=colour, alpha=0.75,
                edgecolor=INK, linewidth=0.7, label=label,
            )  # fmt: skip
    for at in _named(x, y, out):
        first, *more = str(rows[at]["rows"]).split(", ")
        text = f"row {first}" + (", ..." if more else "")
        ax.annotate(text, (x[at], y[at]), xytext=(7, 4), textcoords="offset points", fontsize=8)
    ax.set_xlabel("Log probability of the answers, given all other cases")
    ax.set_ylabel("Change of a prevalence\nin posterior sd")
    top = max(float(y.max()), INFLUENTIAL) * 1.18
    ax.set_ylim(-0.04 * top, top)
    ax.margins(x=0.09)
    ax.annotate(
        f"{decimal(INFLUENTIAL)} sd", (1.0, INFLUENTIAL), xycoords=("axes fraction", "data"),
        xytext=(-2, 3), textcoords="offset points", ha="right", fontsize=8,
    )  # fmt: skip
    ax.grid(color=FAINT, linewidth=0.6)
    ax.set_axisbelow(True)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    return ax


def _named(x: np.ndarray, y: np.ndarray, out: np.ndarray) -> list[int]:
    """Choose what to name: what stands out, the least probable, the most influential."""
    order = [*np.flatnonzero(out).tolist(), int(np.argmin(x)), int(np.argmax(y))]
    return list(dict.fromkeys(order))[:NAMED]
