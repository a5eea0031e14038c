"""A plot of pooled units: each alone and pooled, beside the mean of all."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.posterior.partial_pooling import MEAN
from bayeslca.report.axes import new_axes, quiet
from bayeslca.report.palette import BAND, INK, class_colour, class_marker, plain
from bayeslca.report.wording import called, level

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from bayeslca.posterior.posterior import Posterior

SIDE_BY_SIDE = 3
"""Classes that stand side by side in one figure."""
LABEL = 18
ROW = 0.23


def unit_order(frame: pd.DataFrame, latent_class: str) -> list[str]:
    """Return the units in order of a class's pooled median, the highest first."""
    mine = frame[frame["latent_class"] == latent_class]
    return list(mine.sort_values("median", ascending=False, kind="stable")["group"])


def units_height(n_units: int) -> float:
    """Return the height in inches at which so many units can be read."""
    return 1.35 + ROW * n_units


def plot_units(
    posterior: Posterior,
    latent_class: str,
    *,
    interval: float = 0.95,
    units: Sequence[str] | None = None,
    labels: bool = True,
    ax: Axes | None = None,
) -> Axes:
    """Plot the share of one class in each pooled unit, pooled and alone.

    Parameters
    ----------
    posterior : Posterior
        Of pooled units.
    latent_class : str
    interval : float
    units : sequence of str, optional
        The units to show, in this order; all, the highest median first, when left out.
    labels : bool
        Whether the units are named.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    frame = posterior.partial_pooling(interval=interval)
    shown = list(units) if units is not None else unit_order(frame, latent_class)
    rows = frame[frame["latent_class"] == latent_class].set_index("group").loc[shown]
    k = posterior.model.class_names.index(latent_class)
    ax = ax if ax is not None else new_axes(5.0, units_height(len(shown)))
    at = np.arange(len(shown))
    for band in range(0, len(shown), 2):
        ax.axhspan(band - 0.5, band + 0.5, color=BAND, zorder=0, linewidth=0)
    between = posterior.between_units(interval=interval)
    here = (between["quantity"] == MEAN) & (between["latent_class"] == latent_class)
    mean = float(between.loc[here, "median"].iloc[0])
    ax.axvline(mean, color=INK, linewidth=0.8, linestyle=":", zorder=1)
    spread = np.stack([rows["median"] - rows["lower"], rows["upper"] - rows["median"]])
    ax.errorbar(
        rows["median"], at, xerr=np.clip(spread, 0, None), fmt=class_marker(k), markersize=5,
        color=class_colour(k), markeredgecolor=INK, markeredgewidth=0.5, elinewidth=1.4,
        clip_on=False, zorder=3,
    )  # fmt: skip
    ax.plot(
        rows["alone"], at, linestyle="none", marker="|", markersize=8, markeredgewidth=1.3,
        color=INK, clip_on=False, zorder=4,
    )  # fmt: skip
    names = [f"{plain(name, LABEL, 1)} ({n})" for name, n in zip(shown, rows["cases"], strict=True)]
    ax.set_yticks(at, names if labels else [""] * len(shown))
    ax.set_ylim(len(shown) - 0.5, -0.5)
    ax.set_xlim(0, 1)
    ax.set_xticks([0.0, 0.5, 1.0], ["0", "50", "100 %"])
    ax.set_title(plain(called(latent_class), LABEL, 1), fontsize=9.5)
    quiet(ax)
    return ax


def draw_units(
    drawing: Figure, posterior: Posterior, classes: Sequence[str], units: Sequence[str],
    interval: float,
) -> None:  # fmt: skip
    """Draw some classes side by side, all with the same units in the same order."""
    axes = drawing.subplots(1, len(classes), squeeze=False)[0]
    for at, (ax, name) in enumerate(zip(axes, classes, strict=True)):
        plot_units(posterior, name, interval=interval, units=units, labels=at == 0, ax=ax)
    drawing.supxlabel(f"Share of the unit's cases ({level(interval)} interval)", fontsize=9.5)
