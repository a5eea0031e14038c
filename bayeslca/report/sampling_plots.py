"""Plots of the sampling: traces and ranks of the quantities that tell whether chains agree."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, near_names
from bayeslca.report.palette import FAINT, INK, class_colour, line_style, plain

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from bayeslca.posterior.posterior import Posterior

LOG_LIKELIHOOD = "log likelihood"
N_BINS = 20
MOST_POINTS = 400


def traced_quantities(posterior: Posterior) -> Mapping[str, Floats]:
    """Return the draws of what is plotted, by name, each of shape (chain, draw).

    The log likelihood of the answers (which no naming of classes changes), then the prevalence
    of each class, by group where there are groups.
    """
    quantities = {LOG_LIKELIHOOD: np.asarray(posterior.draws.log_likelihood)}
    names = posterior.model.class_names
    if len(names) == 1:
        return quantities
    prevalence = np.asarray(posterior.prevalence_draws)
    groups = posterior.model.groups
    for g in range(prevalence.shape[2]):
        where = "" if groups is None or prevalence.shape[2] == 1 else f", {groups.levels[g]}"
        for k, name in enumerate(names):
            quantities[f"prevalence of {name}{where}"] = prevalence[:, :, g, k]
    return quantities


def plot_traces(
    posterior: Posterior, quantity: str = LOG_LIKELIHOOD, *, ax: Axes | None = None
) -> Axes:
    """Plot the draws of one quantity in their order, a line for each chain.

    Parameters
    ----------
    posterior : Posterior
    quantity : str
        ``"log likelihood"`` or ``"prevalence of <class>"``.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes
    """
    draws = _draws_of(posterior, quantity)
    ax = ax if ax is not None else _new_axes()
    step = max(1, draws.shape[1] // MOST_POINTS)
    for chain, line in enumerate(draws[:, ::step]):
        ax.plot(
            np.arange(line.size) * step + 1, line, linestyle=line_style(chain), linewidth=0.7,
            color=class_colour(chain), alpha=0.75, label=f"chain {chain + 1}",
        )  # fmt: skip
    ax.set_xlabel("Draw")
    ax.set_title(plain(quantity, 60), loc="left", fontsize=10)
    _bare(ax)
    return ax


def plot_ranks(
    posterior: Posterior, quantity: str = LOG_LIKELIHOOD, *, ax: Axes | None = None
) -> Axes:
    """Plot the ranks of each chain's draws among all draws, a row for each chain.

    Chains that explore the same distribution have level rows: every bar near its dotted line.
    The grey band holds 99 % of the bars of independent draws.

    Parameters
    ----------
    posterior : Posterior
    quantity : str
        ``"log likelihood"`` or ``"prevalence of <class>"``.
    ax : matplotlib Axes, optional

    Returns
    -------
    matplotlib Axes

    References
    ----------
    .. [1] Vehtari, A., Gelman, A., Simpson, D., Carpenter, B. & Bürkner, P.-C. (2021).
       Rank-normalization, folding, and localization: an improved R-hat. Bayesian Analysis 16.
    """
    draws = _draws_of(posterior, quantity)
    ax = ax if ax is not None else _new_axes()
    n_chains, n_draws = draws.shape
    ranks = np.argsort(np.argsort(draws, axis=None, kind="stable"), kind="stable")
    ranks = ranks.reshape(draws.shape)
    expected = n_draws / N_BINS
    half_width = 2.58 * np.sqrt(expected * (1 - 1 / N_BINS)) / (2 * expected)
    edges = np.linspace(0, ranks.size, N_BINS + 1)
    for chain in range(n_chains):
        base = n_chains - 1 - chain
        heights = np.histogram(ranks[chain], bins=edges)[0] / (2 * expected)
        low, high = base + max(0.5 - half_width, 0.0), base + min(0.5 + half_width, 1.0)
        ax.axhspan(low, high, color=FAINT, linewidth=0, alpha=0.6)
        ax.bar(
            edges[:-1], np.minimum(heights, 0.98), width=np.diff(edges) * 0.9, bottom=base,
            align="edge", color=class_colour(chain), alpha=0.8,
        )  # fmt: skip
        ax.axhline(base + 0.5, color=INK, linewidth=0.8, linestyle=":")
    ax.set_yticks(np.arange(n_chains) + 0.5, [f"{n_chains - at}" for at in range(n_chains)])
    ax.set_ylim(0, n_chains)
    ax.set_xlim(0, ranks.size)
    ax.set_ylabel("Chain")
    ax.set_xlabel("Rank among all draws")
    ax.set_title(plain(quantity, 60), loc="left", fontsize=10)
    _bare(ax)
    return ax


def _draws_of(posterior: Posterior, quantity: str) -> Floats:
    quantities = traced_quantities(posterior)
    if quantity not in quantities:
        msg = (
            f"there is no quantity {quantity!r} to plot{near_names(quantity, quantities)}. "
            f"Name one of: {', '.join(quantities)}."
        )
        raise ModelError(msg)
    return quantities[quantity]


def _bare(ax: Axes) -> None:
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)


def _new_axes() -> Axes:
    import matplotlib.pyplot as plt

    return plt.subplots(figsize=(4.5, 2.4), layout="constrained")[1]
