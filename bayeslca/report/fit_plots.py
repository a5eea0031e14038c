"""Plots of posterior predictive checks: pairs of items that the model misses, and sum scores."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bayeslca.assess.fit.predictive_words import DOUBTFUL, overall_rows
from bayeslca.report.axes import new_axes
from bayeslca.report.palette import FAINT, INK, class_colour, ink_on, plain
from bayeslca.report.wording import decimal, level

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.assess.fit.predictive_checks import PredictiveChecks

STRONGEST = 4.0
"""Pair residual at which the colour is as strong as it gets."""
MOST_WRITTEN = 14
"""With more items only the residuals that stand out are written into their squares."""

LONGEST = 18
"""Characters of a name."""


def plot_pair_residuals(
    checks: PredictiveChecks, *, group: str | None = None, ax: Axes | None = None
) -> Axes:
    """Plot how far each pair of items misses what the model expects: a square for each pair.

    Red: they go together more than the classes explain; blue: less. The number is the pair
    residual; a frame marks pairs that fewer than 5 % of replicates miss by as much.

    Parameters
    ----------
    checks : PredictiveChecks
    group : str, optional
        One of the groups; all cases together when not given.
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes
    """
    from matplotlib.patches import Rectangle

    frame = checks.pairs
    rows = overall_rows(frame) if group is None else frame[frame["group"] == group]
    names = list(dict.fromkeys([*rows["item_1"], *rows["item_2"]]))
    ax = ax if ax is not None else new_axes(*heat_map_size(len(names)))
    few = len(names) <= MOST_WRITTEN
    for row in rows.to_dict("records"):
        x, y = names.index(row["item_1"]), names.index(row["item_2"])
        value, stands_out = float(row["pair_residual"]), float(row["p"]) < DOUBTFUL
        colour = residual_colour(value)
        ax.add_patch(Rectangle((x - 0.5, y - 0.5), 1, 1, facecolor=colour, edgecolor="white"))
        if stands_out:
            ax.add_patch(
                Rectangle((x - 0.45, y - 0.45), 0.9, 0.9, fill=False, edgecolor=INK, linewidth=1.6)
            )
        if few or stands_out:
            ax.text(
                x, y, signed(value), ha="center", va="center", color=ink_on(colour),
                fontsize=8.5 if few else 6.5,
            )  # fmt: skip
    last = len(names) - 1
    ax.set_xlim(-0.5, last - 0.5)
    ax.set_ylim(last + 0.5, 0.5)
    size = 9 if few else 7
    ax.set_xticks(range(last), [_short(n) for n in names[:-1]], rotation=45, ha="right",
                  rotation_mode="anchor", fontsize=size)  # fmt: skip
    ax.set_yticks(range(1, last + 1), [_short(n) for n in names[1:]], fontsize=size)
    ax.tick_params(length=0)
    for side in ax.spines.values():
        side.set_visible(False)
    return ax


def _short(name: str) -> str:
    """Return a name that fits beside a heat map; a single long word is cut, not dropped."""
    return plain(name if len(name) <= LONGEST else f"{name[: LONGEST - 1]}…")


def heat_map_size(n_items: int) -> tuple[float, float]:
    """Return the width and height in inches of a heat map of pairs of so many items."""
    side = min(5.6, 1.9 + 0.52 * (n_items - 1))
    return max(side, 3.6), max(2.2, min(5.4, 1.1 + 0.45 * (n_items - 1)))


def residual_colour(value: float) -> tuple[float, float, float]:
    """Return the colour of a residual: white at 0, red above, blue below (Okabe and Ito)."""
    strong = (0.835, 0.369, 0.0) if value > 0 else (0.0, 0.447, 0.698)
    share = min(abs(value) / STRONGEST, 1.0)
    red, green, blue = (1.0 - share * (1.0 - part) for part in strong)
    return red, green, blue


def signed(value: float) -> str:
    """Return a residual with its sign: ``+2.3``, ``−0.4``, ``0.0``."""
    text = decimal(value)
    return f"+{text}" if value > 0 and text != "0.0" else text


def plot_sum_scores(
    checks: PredictiveChecks, *, group: str | None = None, ax: Axes | None = None
) -> Axes:
    """Plot how many cases have each sum score, beside what replicates have.

    Parameters
    ----------
    checks : PredictiveChecks
    group : str, optional
        One of the groups; all cases together when not given.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    frame = checks.sum_scores
    rows: Any = overall_rows(frame) if group is None else frame[frame["group"] == group]
    ax = ax if ax is not None else new_axes(7.0, 3.0)
    score = rows["score"].to_numpy()
    ax.vlines(
        score, rows["lower"], rows["upper"], color=FAINT, linewidth=9,
        label=f"replicates ({level(frame.attrs['interval'])})",
    )  # fmt: skip
    ax.plot(score, rows["expected"], "_", color=INK, markersize=9, label="expected")
    ax.plot(score, rows["observed"], "o", color=class_colour(0), markersize=6, label="observed")
    ax.set_xlabel("Sum score")
    ax.set_ylabel("Cases")
    ax.set_ylim(bottom=0)
    if len(score) <= 16:
        ax.set_xticks(score)
    else:
        ax.locator_params(axis="x", integer=True)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    ax.legend(
        loc="lower left", bbox_to_anchor=(0, 1.0), ncols=3, frameon=False, fontsize=9,
        borderaxespad=0.2, handletextpad=0.4, columnspacing=1.4,
    )  # fmt: skip
    return ax
