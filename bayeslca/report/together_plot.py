"""Who is together with whom: a heat map of cases, in the order of their sets."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.together.co_membership import set_name
from bayeslca.report.axes import new_axes
from bayeslca.report.palette import INK, shade

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.assess.together.co_membership import CoMembership

MOST_SHOWN = 240
"""Cases along a side; of more, as many are shown, evenly spaced."""
MOST_NAMED = 12


def plot_co_membership(together: CoMembership, *, ax: Axes | None = None) -> Axes:
    """Plot how probably two cases are in one class: a square of cases, ordered by set.

    The darker, the more probable; lines part the sets. Within a set the cases that belong to it
    most surely come first.

    Parameters
    ----------
    together : CoMembership
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    from matplotlib.colors import ListedColormap

    ax = ax if ax is not None else new_axes(4.2, 4.8)
    unit, edges = shown_units(together)
    values: Floats = together.probability[np.ix_(unit, unit)]
    colours = ListedColormap([shade(at, 64) for at in range(64)])
    image = ax.imshow(
        values, cmap=colours, vmin=0.0, vmax=1.0, extent=(0, unit.size, unit.size, 0),
        interpolation="nearest",
    )  # fmt: skip
    for edge in edges[1:-1]:
        ax.axhline(edge, color=INK, linewidth=0.9)
        ax.axvline(edge, color=INK, linewidth=0.9)
    middles = 0.5 * (edges[1:] + edges[:-1])
    named = middles[:MOST_NAMED]
    names = [set_name(at) for at in range(named.size)]
    ax.set_xticks(named, names)
    ax.set_yticks(named, names)
    ax.xaxis.tick_top()
    ax.tick_params(length=0)
    for side in ax.spines.values():
        side.set_color(INK)
    bar = ax.figure.colorbar(image, ax=ax, location="bottom", shrink=0.8, pad=0.03, aspect=30)
    bar.set_ticks([0.0, 0.25, 0.5, 0.75, 1.0], labels=["0 %", "25 %", "50 %", "75 %", "100 %"])
    bar.set_label("Probability of being in one class")
    bar.outline.set_visible(False)
    return ax


def shown_units(together: CoMembership) -> tuple[Ints, Floats]:
    """Return the unit of each case that is shown (n,), in order, and where sets begin and end."""
    labels, count = together.partition.labels, together.units.count
    within = np.nan_to_num(together.patterns["within"].to_numpy(dtype=np.float64), nan=1.0)
    order = np.lexsort((-within, labels))
    unit = np.repeat(order, count[order])
    if unit.size > MOST_SHOWN:
        unit = unit[np.linspace(0, unit.size - 1, MOST_SHOWN).astype(np.int64)]
    sizes = np.bincount(labels[unit], minlength=together.partition.n_sets)
    return unit, np.concatenate([[0.0], np.cumsum(sizes[sizes > 0])])
