"""The share of draws in which a hypothesis holds, of the posterior and of the prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Bools
from bayeslca.assess.hypothesis.bridge import ess
from bayeslca.exceptions import StatementError
from bayeslca.model.evaluate import ParameterDraws
from bayeslca.model.prior_draws import draw_prior, permuted
from bayeslca.model.statements.resolved import ResolvedRelations
from bayeslca.posterior.quantities import group_share, posterior_parameters

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

BATCHES = 20
FREE_BATCH, BOUNDED_BATCH = 10_000, 1_000
"""Prior draws of a batch; bounded ones are dear. Batches are independent of each other."""
TRIED = 200
"""Prior draws on which it is tried whether a statement depends on arbitrary labels."""


@dataclass(frozen=True, slots=True)
class Share:
    """A share of draws.

    Attributes
    ----------
    value : float
    mcse : float
        From the effective sample size of the indicator, or from independent batches.
    n : float
        Effective number of draws.
    """

    value: float
    mcse: float
    n: float

    @property
    def relative_error(self) -> float:
        """The error by the share; infinite where none holds."""
        return self.mcse / self.value if self.value > 0 else np.inf

    @property
    def n_holding(self) -> float:
        """Effective number of draws in which it holds."""
        return self.value * self.n

    @property
    def n_failing(self) -> float:
        """Effective number of draws in which it does not hold."""
        return (1.0 - self.value) * self.n

    @property
    def holds_always(self) -> bool:
        """True when it holds in every draw."""
        return self.value == 1.0

    def at_most(self) -> Share:
        """Return the upper end of a one-sided 95 % interval (about 3 / n where none holds)."""
        from scipy.stats import beta

        at = float(beta.ppf(0.95, self.n_holding + 1.0, max(self.n_failing, 1e-9)))
        return Share(at, 0.0, self.n)

    def at_least(self) -> Share:
        """Return the lower end of a one-sided 95 % interval."""
        from scipy.stats import beta

        at = float(beta.ppf(0.05, max(self.n_holding, 1e-9), self.n_failing + 1.0))
        return Share(at, 0.0, self.n)


def counted_shares(
    posterior: Posterior, resolved: ResolvedRelations, seed: int
) -> tuple[Share, Share]:
    """Return the share of posterior draws and of prior draws in which relations hold."""
    holds = posterior_parameters(posterior).holds(resolved)
    after = _of_chains(holds.reshape(posterior.draws.n_chains, posterior.draws.n_draws))
    rng = np.random.default_rng(seed)
    size = BOUNDED_BATCH if posterior.table.is_bounded else FREE_BATCH
    batches = np.array(
        [
            draw_prior(posterior.model, size, rng, group_share(posterior)).holds(resolved).mean()
            for _ in range(BATCHES)
        ]
    )
    value = float(batches.mean())
    mcse = float(batches.std(ddof=1) / np.sqrt(BATCHES))
    if size == FREE_BATCH:  # independent draws: binomial, and steadier than 20 batches
        mcse = float(np.sqrt(value * (1.0 - value) / (BATCHES * size)))
    return after, Share(value, mcse, float(BATCHES * size))


def _of_chains(holds: Bools) -> Share:
    value = float(holds.mean())
    n = ess(holds.astype(np.float64))
    n = min(n, float(holds.size))  # an indicator of anticorrelated draws promises too much
    return Share(value, float(np.sqrt(value * (1.0 - value) / n)), n)


def refuse_arbitrary_labels(posterior: Posterior, resolved: ResolvedRelations) -> None:
    """Refuse a statement that exchangeable classes make true or false by their labels alone."""
    group = posterior.model.symmetry.named_group
    if group.is_identity:
        return
    draws = draw_prior(posterior.model, TRIED, np.random.default_rng(0), group_share(posterior))
    as_drawn = _sorted_differences(draws, resolved)
    for permutation in group.proposals:
        every = np.broadcast_to(permutation, (TRIED, *permutation.shape))
        elements, prevalence = permuted(draws.table, draws.elements, draws.prevalence, every)
        moved = ParameterDraws(draws.table, elements, prevalence, draws.group_share)
        if not np.allclose(_sorted_differences(moved, resolved), as_drawn, atol=1e-12):
            msg = "nothing tells the classes that this compares from each other, in every group"
            raise StatementError(
                msg,
                statement=resolved.text,
                position=resolved.relations[0].terms[0].position,
                remedy="Give the classes names, and statements or naming rules that tell them.",
            )


def _sorted_differences(draws: ParameterDraws, resolved: ResolvedRelations) -> np.ndarray:
    """Return left minus right of every link, instances in rising order, shape (S, all)."""
    return np.concatenate(
        [np.sort(difference, axis=1) for _, difference in draws.differences(resolved)], axis=1
    )
