"""Prior beside posterior, for the quantities that rest most on their priors."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes, quiet
from bayeslca.report.palette import INK, PRIOR_MARK, class_colour, plain

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity

ROW = 0.62
"""Height of a row in inches."""


def plot_prior_and_posterior(found: PriorSensitivity, *, ax: Axes | None = None) -> Axes:
    """Plot the prior's density beside the posterior's, a row for each quantity.

    The grey area with a dashed edge is the prior, the blue one with a solid edge the posterior;
    both have the same area in a row. The number on the right is their overlap.

    Parameters
    ----------
    found : PriorSensitivity
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    names = drawn(found)
    ax = ax if ax is not None else new_axes(7.0, 1.2 + ROW * len(names))
    table = found.table.drop_duplicates("quantity").set_index("quantity")
    for at, name in enumerate(names):
        mine = found.densities[found.densities["quantity"] == name]
        value = mine["value"].to_numpy()
        prior, posterior = mine["prior"].to_numpy(), mine["posterior"].to_numpy()
        scale = 0.85 / max(float(prior.max()), float(posterior.max()))
        label = ("before the data", "after") if at == 0 else (None, None)
        ax.fill_between(value, at, at - scale * prior, color="#BBBBBB", alpha=0.6, linewidth=0)
        ax.plot(value, at - scale * prior, color=INK, linewidth=0.9, linestyle="--", label=label[0])
        ax.fill_between(
            value, at, at - scale * posterior, color=class_colour(0), alpha=0.45, linewidth=0
        )
        ax.plot(value, at - scale * posterior, color=class_colour(0), linewidth=1.3, label=label[1])
        mark = f" {PRIOR_MARK}" if bool(table.loc[name, "mostly_prior"]) else ""
        share = float(str(table.loc[name, "prior_overlap"]))
        ax.annotate(
            f"{100 * share:.0f} %{mark}", (1.0, at - 0.1), xycoords=("axes fraction", "data"),
            xytext=(4, 0), textcoords="offset points", fontsize=8.5, annotation_clip=False,
        )  # fmt: skip
    ax.set_yticks(np.arange(len(names)), [plain(name, LABEL_WIDTH) for name in names])
    ax.set_ylim(len(names) - 0.9, -1.05)
    values = found.densities["value"]
    ax.set_xlim(float(values.min()), float(values.max()))
    ax.set_xlabel("Value (a probability, or the quantity itself)")
    quiet(ax)
    if names:
        legend_above(ax, 2)
    return ax


def drawn(found: PriorSensitivity) -> list[str]:
    """Return the quantities whose densities are kept, the largest overlap first."""
    return [str(name) for name in dict.fromkeys(found.densities["quantity"])]
