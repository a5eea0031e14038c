"""What the priors imply for prevalences and response probabilities, beside what was learnt."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from bayeslca.exceptions import ModelError, near_names
from bayeslca.report.axes import LABEL_WIDTH, legend_above, new_axes, percent_axis
from bayeslca.report.palette import BAND, INK, class_colour, class_marker, plain
from bayeslca.report.plots import dodge, profile_rows, row_height, row_label
from bayeslca.report.wording import called, level

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

    from bayeslca.model.prior_predictive import PriorPredictive
    from bayeslca.posterior.posterior import Posterior


class PriorRow(NamedTuple):
    """A row of the figure: its label, the same as it is, and what picks its cells of a table."""

    label: str
    text: str
    is_prevalence: bool
    keys: Mapping[str, str]


def plot_prior_predictive(
    prior: PriorPredictive,
    posterior: Posterior | None = None,
    *,
    group: str | None = None,
    interval: float = 0.95,
    ax: Axes | None = None,
) -> Axes:
    """Plot what the priors imply for each class, and what was learnt where there is a posterior.

    A pale bar is the prior's 95 % interval, its darker part the 50 % interval. A filled marker
    with a line is the posterior's median with its interval; without a posterior, an open marker
    is the prior's median.

    Parameters
    ----------
    prior : PriorPredictive
        From ``model.prior_predictive``.
    posterior : Posterior, optional
        Of the same model.
    group : str, optional
        The group whose response probabilities are shown, where they differ by group.
    interval : float
        Level of the posterior's intervals.
    ax : matplotlib Axes, optional
        Where to draw; a new figure when not given.

    Returns
    -------
    matplotlib Axes

    Raises
    ------
    ModelError
        When the posterior has other classes or items, or there is no such group.
    """
    names = list(dict.fromkeys(prior.prevalence["latent_class"]))
    if posterior is not None and (
        list(posterior.model.class_names) != names or posterior.model.items != prior.items
    ):
        msg = "prior and posterior are of different models. Give a posterior of the same model."
        raise ModelError(msg)
    rows = prior_rows(prior, group)
    ax = ax if ax is not None else new_axes(7.0, prior_height(prior, group))
    learnt = None
    if posterior is not None:
        learnt = (
            posterior.prevalence(interval=interval),
            posterior.response_probabilities(interval=interval),
        )
    for at in range(0, len(rows), 2):
        ax.axhspan(at - 0.5, at + 0.5, color=BAND, zorder=0, linewidth=0)
    offsets = dodge(len(names))
    for k, name in enumerate(names):
        label = plain(called(name), LABEL_WIDTH, 1)
        before = [_cell(prior.prevalence, prior.response_probabilities, row, name) for row in rows]
        places = np.arange(len(rows)) + offsets[k]
        _bars(ax, before, places, k)
        if learnt is None:
            _medians(ax, before, places, k, label)
        else:
            _learnt(ax, [_cell(*learnt, row, name) for row in rows], places, k, label)
    ax.set_yticks(range(len(rows)), [row.label for row in rows])
    ax.set_ylim(len(rows) - 0.5, -0.5)
    after = "" if posterior is None else f"; line: after, {level(interval)}"
    percent_axis(ax, f"Bar: before the data, 95 and 50 %{after}")
    legend_above(ax, len(names))
    return ax


def prior_rows(prior: PriorPredictive, group: str | None = None) -> list[PriorRow]:
    """Return the rows of the figure: shares of the cases first, then answers."""
    levels = _levels(prior.prevalence)
    one_class = prior.prevalence["latent_class"].nunique() == 1
    rows = [
        PriorRow(plain(text, LABEL_WIDTH), text, True, {"group": name} if name else {})
        for name in ([] if one_class else levels or [""])
        for text in [f"Share of the cases, {name}" if name else "Share of the cases"]
    ]
    answer_groups = _levels(prior.response_probabilities)
    if group is not None and group not in levels:
        msg = f"there is no group {group!r}{near_names(group, levels)}; name one of the model's."
        raise ModelError(msg)
    keys = {"group": group or answer_groups[0]} if answer_groups else {}
    rows += [
        PriorRow(
            row_label(item, category),
            f"{item.text}: {category}",
            False,
            {**keys, "item": item.name, "category": category},
        )
        for item, category in profile_rows(prior.items)
    ]
    return rows


def prior_height(prior: PriorPredictive, group: str | None = None) -> float:
    """Return the height in inches at which the figure can be read."""
    n_classes = prior.prevalence["latent_class"].nunique()
    return 1.4 + len(prior_rows(prior, group)) * row_height(n_classes)


def _levels(frame: pd.DataFrame) -> list[str]:
    return list(dict.fromkeys(frame["group"])) if "group" in frame else []


def _cell(
    prevalence: pd.DataFrame, answers: pd.DataFrame, row: PriorRow, name: str
) -> Mapping[str, Any]:
    frame = prevalence if row.is_prevalence else answers
    chosen = frame["latent_class"] == name
    for key, value in row.keys.items():
        chosen &= frame[key] == value
    (cell,) = frame[chosen].to_dict("records")
    return {str(column): value for column, value in cell.items()}


def _bars(ax: Axes, cells: list[Mapping[str, Any]], places: Any, k: int) -> None:
    for part, strength in (("95", 0.22), ("50", 0.45)):
        lower, upper = ([cell[f"{end}_{part}"] for cell in cells] for end in ("lower", "upper"))
        ax.hlines(
            places, lower, upper, color=class_colour(k), alpha=strength, linewidth=6, zorder=1,
        )  # fmt: skip


def _medians(ax: Axes, cells: list[Mapping[str, Any]], places: Any, k: int, label: str) -> None:
    ax.plot(
        [cell["median"] for cell in cells], places, class_marker(k), markersize=5.5,
        color=class_colour(k), markerfacecolor="white", linestyle="none", label=label,
        clip_on=False, zorder=3,
    )  # fmt: skip


def _learnt(ax: Axes, cells: list[Mapping[str, Any]], places: Any, k: int, label: str) -> None:
    median, lower, upper = (
        np.array([cell[name] for cell in cells]) for name in ("median", "lower", "upper")
    )
    ax.errorbar(
        median, places, xerr=np.clip([median - lower, upper - median], 0, None),
        fmt=class_marker(k), markersize=5, color=class_colour(k), markeredgecolor=INK,
        markeredgewidth=0.5, ecolor=INK, elinewidth=1.0, label=label, clip_on=False, zorder=3,
    )  # fmt: skip
