"""Several modes: each weighed by its own evidence, since no chain says how much each holds.

Chains that stay in different modes tell what each mode looks like, not how probable it is. A
bridge for the chains of one mode finds the mass of that mode; the evidence is their sum. Valid
for modes that lie apart, and for those that a chain was kept in.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Ints
from bayeslca.assess.convergence.modes import largest_r_hat
from bayeslca.assess.evidence.model_evidence import Estimate, model_estimates

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

SMALL = 0.01
"""Modes that hold less than this need no estimate that guards theirs."""
MOST_R_HAT = 1.05
"""R-hat of the log likelihood above which chains disagree."""


@dataclass(frozen=True, slots=True)
class ModeEvidence:
    """One mode and what it weighs.

    Attributes
    ----------
    chains : tuple of int
        The chains that began in it; empty where the draws of modes were mixed since.
    estimates : tuple of Estimate
        Of the log evidence of this mode alone.
    share : float
        Its probability among the modes.
    mcse : float
        Monte Carlo standard error of the share.
    """

    chains: tuple[int, ...]
    estimates: tuple[Estimate, ...]
    share: float
    mcse: float


def number_of_modes(posterior: Posterior) -> int:
    """Return the number of modes that the draws are of, as far as is known."""
    starts = posterior.draws.starts
    if starts is not None and starts.shares:
        return len(starts.shares)
    return len(chains_of_modes(posterior))


def chains_of_modes(posterior: Posterior) -> tuple[tuple[int, ...], ...]:
    """Return the chains of each mode within reach, the best mode first; one set if there is one."""
    starts, n_chains = posterior.draws.starts, posterior.draws.n_chains
    everything = (tuple(range(n_chains)),)
    if starts is None or starts.shares or starts.n_modes < 2 or starts.kept.size != n_chains:
        return everything
    mode = starts.mode[starts.kept]
    return tuple(tuple(np.flatnonzero(mode == m).tolist()) for m in sorted(set(mode.tolist())))


def evidence_of_modes(
    posterior: Posterior,
    rng: np.random.Generator,
    *,
    size: int = 0,
    chains: tuple[tuple[int, ...], ...] | None = None,
) -> tuple[ModeEvidence, ...]:
    """Return the evidence of each mode that chains were kept in.

    Parameters
    ----------
    posterior : Posterior
    rng : numpy.random.Generator
    size : int
        See `bayeslca.assess.evidence.model_evidence.model_estimates`.
    chains : tuple of tuple of int, optional
        The chains of each mode; by default as the short runs before them were sorted.
    """
    starts = posterior.draws.starts
    if starts is not None and starts.shares:
        return _of_mixed(posterior, rng, starts.shares, starts.share_errors, size=size)
    chains = chains_of_modes(posterior) if chains is None else chains
    estimates = []
    for some in chains:
        part = only_chains(posterior, some)
        r_hat = largest_r_hat(part.draws.log_likelihood[:, :, None])
        found = model_estimates(part, rng, size=size)
        if r_hat > MOST_R_HAT:
            why_not = f"the chains disagree (R-hat of the log likelihood {r_hat:.2f})"
            found = tuple(replace(one, why_not=why_not) for one in found)
        estimates.append(found)
    logs = np.array([several[0].value for several in estimates])
    errors = np.array([several[0].mcse for several in estimates])
    weights = np.exp(logs - logs.max())
    share = weights / weights.sum()
    slope = np.diag(share) - np.outer(share, share)
    with np.errstate(invalid="ignore"):
        spread = np.sqrt((slope**2) @ errors**2)
    return tuple(
        ModeEvidence(some, found, float(weight), float(error))
        for some, found, weight, error in zip(chains, estimates, share, spread, strict=True)
    )


def _of_mixed(
    posterior: Posterior,
    rng: np.random.Generator,
    shares: tuple[float, ...],
    errors: tuple[float, ...],
    *,
    size: int,
) -> tuple[ModeEvidence, ...]:
    """Return the evidence of modes whose draws were mixed: of the largest, and by shares of it."""
    largest = int(np.argmax(shares))
    found = model_estimates(only_mode(posterior, largest), rng, size=size)
    out = []
    for mode, (share, error) in enumerate(zip(shares, errors, strict=True)):
        if mode == largest:
            out.append(ModeEvidence((), found, share, error))
            continue
        # The log of share / largest share; errors of both shares are one error, seen twice.
        apart = error / max(share, 1e-300) + errors[largest] / shares[largest]
        of_mode = tuple(
            replace(
                one,
                value=one.value + float(np.log(max(share, 1e-300) / shares[largest])),
                mcse=float(np.hypot(one.mcse, apart)),
            )
            for one in found
        )
        out.append(ModeEvidence((), of_mode, share, error))
    return tuple(out)


def only_mode(posterior: Posterior, mode: int) -> Posterior:
    """Return the posterior with the draws of one mode, as many of every chain."""
    draws = posterior.draws
    of_mode = [np.flatnonzero(row == mode) for row in draws.statistics["mode"]]
    at = np.arange(draws.n_chains)[:, None], np.stack(of_mode)
    return _with_draws(posterior, at)


def summed(modes: tuple[ModeEvidence, ...]) -> tuple[Estimate, ...]:
    """Return the log of the modes' summed evidences, by each kind of estimate."""
    if len(modes) == 1:
        return modes[0].estimates
    out: list[Estimate] = []
    for several in zip(*(mode.estimates for mode in modes), strict=True):
        logs = np.array([one.value for one in several])
        highest = float(logs.max())
        weights = np.exp(logs - highest)
        share = weights / weights.sum()
        error = float(np.sqrt(np.sum((share * [one.mcse for one in several]) ** 2)))
        reasons = dict.fromkeys(
            one.why_not
            for one, mode in zip(several, modes, strict=True)
            if one.why_not and (not out or mode.share > SMALL)
        )
        value = highest + float(np.log(weights.sum()))
        out.append(Estimate(several[0].kind, value, error, "; ".join(reasons)))
    return tuple(out)


def only_chains(posterior: Posterior, chains: tuple[int, ...]) -> Posterior:
    """Return the posterior with some of its chains."""
    if len(chains) == posterior.draws.n_chains:
        return posterior
    every = np.arange(posterior.draws.n_draws)
    return _with_draws(posterior, (np.array(chains)[:, None], every[None, :]))


def _with_draws(posterior: Posterior, at: tuple[Ints, Ints]) -> Posterior:
    """Return the posterior with the draws ``[chain, draw]`` at some places."""
    draws = posterior.draws
    some = replace(
        draws,
        elements=draws.elements[at],
        prevalence=draws.prevalence[at],
        log_likelihood=draws.log_likelihood[at],
        log_prior=draws.log_prior[at],
        concentration=None if draws.concentration is None else draws.concentration[at],
        statistics={name: values[at] for name, values in draws.statistics.items()},
        starts=None,
    )
    relabelled = posterior.relabelled
    return replace(
        posterior,
        relabelled=replace(relabelled, draws=some, permutations=relabelled.permutations[at]),
    )
