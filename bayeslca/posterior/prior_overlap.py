"""How much of each posterior lies where its prior already lay, and what rests mostly on a prior.

The overlap is the area under the lower of the two densities: 1 where the answers have changed
nothing, near 0 where they have settled the matter. It does not depend on the scale, so that it is
found on the scale on which the prior is flat (the prior's own distribution function). With one
class and no bounds both densities are Beta, and the overlap is exact; else the posterior's density
is smoothed on a grid.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.model.prior_draws import draw_prior
from bayeslca.model.prior_weights import PriorWeight, prior_weights
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.posterior.quantities import PRIOR_SEED, group_share
from bayeslca.posterior.tables import overall_prevalence

if TYPE_CHECKING:
    from bayeslca.model.evaluate import ParameterDraws
    from bayeslca.posterior.posterior import Posterior

MOSTLY = 0.75
"""Overlap from which a result rests mostly on its prior: a uniform prior and 2 or 3 answers."""
RULING = 0.5
"""Share of the prior in prior and answers together, from which it is the same."""
PRIOR_DRAWS = 10_000
FEWEST_PRIOR_DRAWS, PRIOR_NUMBERS = 2_000, 20_000_000
GRID = 512
STILL = 1e-12


@dataclass(frozen=True, eq=False)
class PriorMarks:
    """What rests mostly on the prior, row by row of the posterior's own tables.

    Attributes
    ----------
    prevalence_overlap, prevalence_share : ndarray, shape (rows of ``prevalence()``,)
        Share of the prior: its weight over weight plus cases; nan for "overall" with groups.
    answer_overlap, answer_share : ndarray, shape (rows of ``response_probabilities()``,)
    weights : tuple of PriorWeight
        Of each block, against the answers that the fit expects in its classes.
    """

    prevalence_overlap: Floats
    prevalence_share: Floats
    answer_overlap: Floats
    answer_share: Floats
    weights: tuple[PriorWeight, ...]

    @property
    def prevalence(self) -> Bools:
        """Which prevalences rest mostly on the prior."""
        return mostly_prior(self.prevalence_overlap, self.prevalence_share)

    @property
    def answers(self) -> Bools:
        """Which response probabilities rest mostly on the prior."""
        return mostly_prior(self.answer_overlap, self.answer_share)


def mostly_prior(overlap: Floats, share: Floats) -> Bools:
    """Tell what rests mostly on the prior; what is known (nan) does not."""
    with np.errstate(invalid="ignore"):
        return np.asarray((overlap >= MOSTLY) | (share >= RULING))


def prior_marks(posterior: Posterior) -> PriorMarks:
    """Weigh the prior of every prevalence and response probability against the answers."""
    before = prior_draws(posterior)
    prevalence = before.prevalence.reshape(before.prevalence.shape[0], -1)
    if posterior.model.groups is not None:
        # A unit that was not observed has the prior of any other.
        new = [before.prevalence[:, 0]] if posterior.model.pooled else []
        overall = overall_prevalence(before.prevalence, posterior.group_cases)
        prevalence = np.concatenate([prevalence, *new, overall], axis=-1)
    of_prevalence = posterior._prevalence_quantities
    weights = prior_weights(posterior.model, posterior.responses, mean_membership(posterior))
    return PriorMarks(
        prevalence_overlap=overlaps(
            prevalence,
            of_prevalence.draws,
            of_prevalence.monte_carlo()["ess_bulk"],
        ),
        prevalence_share=_prevalence_share(posterior, prevalence.shape[1]),
        answer_overlap=_answer_overlap(posterior, before),
        answer_share=_answer_share(posterior, weights),
        weights=weights,
    )


def prior_draws(posterior: Posterior) -> ParameterDraws:
    """Draw parameters from the prior, the same every time."""
    model = posterior.model
    size = max(1, model.table.n_elements + model.n_classes * int(model.table.item_start[-1]))
    n = int(np.clip(PRIOR_NUMBERS // size, FEWEST_PRIOR_DRAWS, PRIOR_DRAWS))
    return draw_prior(model, n, np.random.default_rng(PRIOR_SEED), group_share(posterior))


def mean_membership(posterior: Posterior) -> Floats:
    """Return P(class | answers) (U, K) of each unit, averaged over the draws."""
    draws, table = posterior.draws, posterior.table
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    total = np.zeros((posterior.unit_table.n_units, table.n_classes))
    for _, joint in log_joint(table, posterior.unit_table, elements, prevalence):
        total += class_shares(joint).sum(axis=2).T
    return np.asarray(total / len(elements))


def overlaps(before: Floats, after: Floats, effective: Floats) -> Floats:
    """Return the overlap of each of several quantities.

    Parameters
    ----------
    before : ndarray, shape (n, quantity)
        Draws of the prior.
    after : ndarray, shape (chain, draw, quantity)
        Draws of the posterior.
    effective : ndarray, shape (quantity,)
        Effective number of the posterior's draws; sets how smooth its density is taken to be.
    """
    flat = after.reshape(-1, after.shape[-1])
    return np.array(
        [overlap(before[:, q], flat[:, q], float(effective[q])) for q in range(flat.shape[1])]
    )


def overlap(before: Floats, after: Floats, effective: float) -> float:
    """Return the overlap of a prior and a posterior, both given by draws; nan for a constant.

    Parameters
    ----------
    before, after : ndarray, shape (n,), shape (S,)
    effective : float
        Effective number of draws of the posterior.
    """
    from scipy.ndimage import gaussian_filter1d

    if not np.all(np.isfinite(before)) or not np.all(np.isfinite(after)):
        return float("nan")
    if np.ptp(before) < STILL or np.ptp(after) < STILL:
        return float("nan")
    order = np.sort(before)
    low = np.searchsorted(order, after, side="left")
    high = np.searchsorted(order, after, side="right")
    place = (low + high) / (2.0 * order.size)  # in the prior's distribution function
    share, _ = np.histogram(place, bins=GRID, range=(0.0, 1.0))
    first, third = np.quantile(place, [0.25, 0.75])
    spread = min(float(place.std()), float(third - first) / 1.34) or float(place.std())
    n = effective if np.isfinite(effective) and effective > 1 else after.size
    width = 0.9 * spread * min(n, after.size) ** -0.2  # Silverman (1986), equation 3.31
    smooth = gaussian_filter1d(share / after.size, max(width * GRID, 0.3), mode="reflect")
    return float(np.minimum(smooth, 1.0 / GRID).sum())


def density(draws: Floats, at: Floats) -> Floats:
    """Return the smoothed density of draws at the points of an even grid that holds them all."""
    from scipy.ndimage import gaussian_filter1d

    step = float(at[1] - at[0])
    edges = np.append(at - step / 2.0, at[-1] + step / 2.0)
    share, _ = np.histogram(draws, bins=edges)
    first, third = np.quantile(draws, [0.25, 0.75])
    spread = min(float(draws.std()), float(third - first) / 1.34) or float(draws.std())
    width = 0.9 * spread * min(draws.size, 2000) ** -0.2
    smooth = gaussian_filter1d(share / (draws.size * step), max(width / step, 0.5), mode="reflect")
    return np.asarray(smooth)


def beta_overlap(before: tuple[float, float], after: tuple[float, float]) -> float:
    """Return the overlap of two Beta densities."""
    from scipy.stats import beta

    grid = np.linspace(0.0, 1.0, 4001)
    points = np.unique(np.concatenate([beta.ppf(grid, *before), beta.ppf(grid, *after)]))
    inside = np.diff(beta.cdf(points, *before)), np.diff(beta.cdf(points, *after))
    return float(np.minimum(*inside).sum())


def _answer_overlap(posterior: Posterior, before: ParameterDraws) -> Floats:
    quantities = posterior._response_probability_quantities
    table = posterior.table
    exact = posterior.model.n_classes == 1 and not table.is_bounded and table.is_direct
    if exact and not posterior.model.links:
        return _exact_answer_overlap(posterior)
    # By response group, as the posterior's table: that of its first group of cases.
    first = [int(np.argmax(table.response_group == g)) for g in range(table.n_response_groups)]
    values = before.response_probability[:, first]
    return overlaps(
        values.reshape(len(values), -1), quantities.draws, quantities.monte_carlo()["ess_bulk"]
    )


def _exact_answer_overlap(posterior: Posterior) -> Floats:
    """Return the overlap of each answer with one class: a Beta before, a Beta after."""
    table, units = posterior.table, posterior.units
    group = table.response_group[units.group]
    out = []
    for g in range(table.n_response_groups):
        for j in range(table.n_items):
            columns = range(int(table.item_start[j]), int(table.item_start[j + 1]))
            rows = [int(table.response_row[g, c]) for c in columns]
            elements = table.direct_element[rows, 0]
            a = table.element_prior[elements]
            same = table.response_row[:, columns[0]] == rows[0]  # groups that share the item
            mine = same[group]
            code = units.pattern[:, j]
            n = np.array([units.count[mine & (code == c)].sum() for c in range(len(rows))])
            for at in range(len(rows)):
                prior = float(a[at]), float(a.sum() - a[at])
                more = float(n[at]), float(n.sum() - n[at])
                out.append(beta_overlap(prior, (prior[0] + more[0], prior[1] + more[1])))
    return np.array(out)


def _answer_share(posterior: Posterior, weights: tuple[PriorWeight, ...]) -> Floats:
    """Return the prior's share (rows of the table): the largest of the blocks of each answer."""
    table = posterior.table
    out = np.full((table.n_response_groups, table.n_classes, int(table.item_start[-1])), np.nan)
    for weight in weights:
        share = np.nan if weight.share is None else weight.share
        for g, j, k in weight.places:
            columns = slice(table.item_start[j], table.item_start[j + 1])
            elements = [
                _has_elements(posterior, g, c, k) for c in range(columns.start, columns.stop)
            ]
            free = np.array(elements)
            out[g, k, columns] = np.where(free, np.fmax(out[g, k, columns], share), np.nan)
    return out.reshape(-1)


def _has_elements(posterior: Posterior, group: int, column: int, latent_class: int) -> bool:
    """Tell whether an answer is not wholly known."""
    table = posterior.table
    cells = table.cells(int(table.response_row[group, column]), latent_class)
    return any(elements for _, elements in cells)


def _prevalence_share(posterior: Posterior, n_rows: int) -> Floats:
    concentration = posterior.model.prevalence_source.concentration
    out = np.full(n_rows, np.nan)
    if posterior.model.n_classes == 1 or posterior.model.pooled:
        return out
    weight = concentration.sum(axis=1)
    share = weight / (weight + posterior.group_cases)
    out[: concentration.size] = np.repeat(share, concentration.shape[1])
    return out
