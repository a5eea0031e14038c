"""What other priors would have given: by importance weights, and by fitting again.

Weights cost next to nothing: the draws are kept and weighed by the ratio of the other prior to
the model's own. What normalises a prior (also the probability of its bounds) is the same for
every draw and cancels in weights that sum to 1. They fail where the other posterior lies
elsewhere, which their Pareto k shows; then only a refit tells.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.hypothesis.bridge import ess
from bayeslca.assess.hypothesis.hypotheses import HypothesisTest, joined_relations
from bayeslca.assess.priors.followed import Followed, after_the_data
from bayeslca.assess.priors.power_scaling import RELIABLE_K, smoothed_weights
from bayeslca.exceptions import BayesLCAError
from bayeslca.model.alternative_priors import UnderOtherPriors, log_prior_ratio
from bayeslca.model.prior_draws import draw_prior
from bayeslca.posterior.prior_overlap import mean_membership
from bayeslca.posterior.quantities import group_share

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

Method = Literal["weights", "refit"]
PRIOR_DRAWS = 10_000
FEWEST_SWEEPS = 20_000
"""A refit may take twice the sweeps of the original, and at least so many."""
FEWEST_HOLDING = 20
"""With fewer prior draws in which a hypothesis holds, weights give it no Bayes factor."""
SAME_PLACES = 0.9
"""With a smaller share of cases in the same class as before, a refit found other classes."""


@dataclass(frozen=True, eq=False)
class Moved:
    """Quantities under another prior.

    Attributes
    ----------
    prior : str
        Name of the other prior.
    method : {"weights", "refit"}
    mean, sd, mcse : ndarray, shape (quantity,)
        ``mcse`` is the Monte Carlo error of the mean.
    reliable : bool
        False where weights have a Pareto k above 0.7, or a refit is not to be trusted.
    pareto_k : float
        Of the weights; nan for a refit.
    same_places : float
        Share of the cases whose most probable class is the same as before; nan for weights.
    note : str
        Why it is not reliable, or what else to know; empty when nothing.
    """

    prior: str
    method: Method
    mean: Floats
    sd: Floats
    mcse: Floats
    reliable: bool
    pareto_k: float = math.nan
    same_places: float = math.nan
    note: str = ""


@dataclass(frozen=True)
class Weighed:
    """A hypothesis under another prior.

    Attributes
    ----------
    prior, claim : str
    method : {"weights", "refit"}
    posterior_probability, prior_probability : float
    log_bayes_factor, log_bayes_factor_mcse : float
        Against the model; nan where it cannot be given, and ``note`` says why.
    grade : str
        In words; empty without a Bayes factor against the opposite.
    note : str
    """

    prior: str
    claim: str
    method: Method
    posterior_probability: float = math.nan
    prior_probability: float = math.nan
    log_bayes_factor: float = math.nan
    log_bayes_factor_mcse: float = math.nan
    grade: str = ""
    note: str = ""


def by_weights(
    posterior: Posterior, name: str, other: UnderOtherPriors, quantities: Sequence[Followed]
) -> tuple[Moved, Floats]:
    """Weigh the posterior's draws by another prior.

    Returns
    -------
    Moved
    ndarray, shape (S,)
        The weights, which sum to 1.
    """
    draws = posterior.draws
    ratio = log_prior_ratio(
        posterior.model, other, draws.elements, draws.prevalence, draws.concentration
    )
    weight, k = smoothed_weights(ratio.reshape(-1))
    rows = [_weighted(one.values, weight, draws.n_chains) for one in quantities]
    mean, sd, mcse = (np.array(column) for column in zip(*rows, strict=True))
    reliable = k <= RELIABLE_K
    note = (
        "" if reliable else f"the weights are not reliable (Pareto k {k:.2f}, above {RELIABLE_K})"
    )
    return Moved(name, "weights", mean, sd, mcse, reliable, k, note=note), weight


def _weighted(values: Floats, weight: Floats, chains: int) -> tuple[float, float, float]:
    if not np.all(np.isfinite(values)):
        return math.nan, math.nan, math.nan
    mean = float(weight @ values)
    variance = float(weight @ (values - mean) ** 2)
    if np.ptp(values) == 0.0:
        return mean, 0.0, 0.0
    # Draws of a chain hang together: as many count as the effective sample size of what is summed.
    terms = (weight * weight.size * (values - mean)).reshape(chains, -1)
    effective = max(1.0, min(float(ess(terms)), float(values.size)))
    return mean, math.sqrt(variance), float(terms.std(ddof=1)) / math.sqrt(effective)


def refit_under(
    posterior: Posterior, name: str, other: UnderOtherPriors, seed: int
) -> tuple[Posterior, float]:
    """Fit the model under another prior, its classes called as those of the original fit.

    Returns
    -------
    Posterior
    float
        Share of the cases whose most probable class is the same as in the original fit.
    """
    from bayeslca.posterior.fit import fit
    from bayeslca.sampling.align import align
    from bayeslca.sampling.run import MAX_SWEEPS

    draws = posterior.draws
    chains, kept = max(2, draws.n_chains), draws.n_draws
    again = fit(
        other,
        posterior.responses,
        seed=seed,
        chains=chains,
        draws=kept,
        ess=min(1000.0, chains * kept / 2.0),
        max_sweeps=min(MAX_SWEEPS, max(FEWEST_SWEEPS, 2 * draws.sweeps)),
        progress=False,
    )
    before = mean_membership(posterior)
    named = replace(again, relabelled=align(other, again.unit_table, again.relabelled, before))
    same = before.argmax(axis=1) == mean_membership(named).argmax(axis=1)
    count = posterior.unit_table.count
    return named, float(count[same].sum() / count.sum())


def by_refit(
    refit: Posterior,
    name: str,
    same_places: float,
    quantities: Mapping[str, str],
    hypotheses: Mapping[str, Sequence[str]],
) -> Moved:
    """Return the quantities of a refit."""
    draws = refit.draws
    found = after_the_data(refit, quantities, hypotheses)
    mean, sd, mcse = [], [], []
    for one in found:
        finite = bool(np.all(np.isfinite(one.values)))
        chains = one.values.reshape(draws.n_chains, -1)
        mean.append(float(chains.mean()) if finite else math.nan)
        sd.append(float(chains.std(ddof=1)) if finite else math.nan)
        moving = finite and np.ptp(chains) > 0.0
        effective = min(float(ess(chains)), float(chains.size)) if moving else math.inf
        mcse.append(sd[-1] / math.sqrt(effective))
    diagnostics = refit.diagnostics()
    notes = [] if diagnostics.trustworthy else ["its sampling is not to be trusted"]
    if same_places < SAME_PLACES:
        notes.append(
            f"only {100 * same_places:.0f} % of the cases have the same most probable class as "
            "before, so its classes may be other ones"
        )
    if not refit.model.exploratory and not refit.model.symmetry.named_group.is_identity:
        notes.append(
            "under it nothing stated tells all classes apart; they are named after those of the "
            "original fit that hold the same cases"
        )
    return Moved(
        name, "refit", np.array(mean), np.array(sd), np.array(mcse),
        diagnostics.trustworthy and same_places >= SAME_PLACES, math.nan, same_places,
        "; ".join(notes),
    )  # fmt: skip


def weighed_by_weights(
    posterior: Posterior,
    moved: Moved,
    weight: Floats,
    other: UnderOtherPriors,
    hypotheses: Mapping[str, Sequence[str]],
) -> list[Weighed]:
    """Weigh hypotheses under another prior by the draws' weights, and by draws of that prior."""
    if not hypotheses:
        return []
    told = other.exploratory or other.symmetry.named_group.is_identity
    rng = np.random.default_rng(0)
    before = draw_prior(other, PRIOR_DRAWS, rng, group_share(posterior)) if told else None
    from bayeslca.posterior.quantities import posterior_parameters

    after, out = posterior_parameters(posterior), []
    for claim, statements in hypotheses.items():
        joined = joined_relations(posterior, list(statements))
        if any("=" in relation.signs for relation in joined.relations):
            why = "an equality is weighed by refits only"
            out.append(_unknown(moved, claim, why))
            continue
        holds = after.holds(joined).astype(np.float64)
        value, _, mcse = _weighted(holds, weight, posterior.draws.n_chains)
        if before is None:
            why = "under this prior nothing stated tells the classes apart"
            out.append(Weighed(moved.prior, claim, "weights", value, note=why))
            continue
        kept = before.holds(joined)
        prior, n = float(kept.mean()), int(kept.sum())
        if n < FEWEST_HOLDING or value <= 0.0:
            why = "too few draws hold for a Bayes factor"
            out.append(Weighed(moved.prior, claim, "weights", value, prior, note=why))
            continue
        error = math.hypot(mcse / value, math.sqrt((1.0 - prior) / n))
        factor = math.log(value) - math.log(prior)
        note = moved.note
        out.append(Weighed(moved.prior, claim, "weights", value, prior, factor, error, note=note))
    return out


def weighed_by_refit(
    refit: Posterior, name: str, hypotheses: Mapping[str, Sequence[str]], seed: int
) -> list[Weighed]:
    """Test hypotheses on a refit, as on any posterior."""
    out = []
    for claim, statements in hypotheses.items():
        try:
            test = refit.test(*statements, seed=seed)
        except BayesLCAError as error:
            reason = str(error).splitlines()[0].rstrip(".")
            out.append(Weighed(name, claim, "refit", note=reason))
            continue
        out.append(_of_test(test, name, claim))
    return out


def _of_test(test: HypothesisTest, name: str, claim: str) -> Weighed:
    return Weighed(
        name,
        claim,
        "refit",
        test.posterior_probability,
        test.prior_probability,
        test.log_bayes_factor,
        test.log_bayes_factor_mcse,
        test.grade,
    )


def _unknown(moved: Moved, claim: str, why: str) -> Weighed:
    return Weighed(moved.prior, claim, moved.method, note=why)
