"""Several modes that chains do not leave: their draws mixed in the proportion of their evidence.

How many chains stay in a mode says nothing about how probable it is. Each mode is weighed by a
bridge of its own (see `bayeslca.assess.evidence.mode_evidence`), and as many of its draws are kept
as its share asks for, so that the draws that are left are draws of the whole posterior. Where a
mode cannot be weighed, the draws stay as they are, and the reason is told.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.convergence.modes import largest_r_hat, modes_of_chains
from bayeslca.assess.evidence.mode_evidence import (
    MOST_R_HAT,
    ModeEvidence,
    evidence_of_modes,
    only_chains,
)
from bayeslca.assess.evidence.model_evidence import SIZES
from bayeslca.exceptions import ModelError
from bayeslca.sampling.draws import Draws

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_SHARE_ERROR = 0.05
"""Monte Carlo error of a share above which modes are not mixed."""
WANTED_SHARE_ERROR = 0.01
"""Larger proposals are tried until the shares' errors are below this."""
LEFT_OUT = 0.001
"""Modes that hold less are left out."""


@dataclass(frozen=True, eq=False)
class _Choice:
    """Which draw of which chain becomes which draw (chain, draw), and the mode it is of."""

    chain: Ints
    draw: Ints
    mode: Ints


def with_modes_mixed(posterior: Posterior, drawn: Draws) -> Draws:
    """Return the draws with their modes in the proportion of their evidence.

    Parameters
    ----------
    posterior : Posterior
        Of these draws.
    drawn : Draws
        As they were sampled, not relabelled.

    Returns
    -------
    Draws
        The same ones where there is one mode. Else some of them, with ``starts.shares`` set and
        the mode of each in ``statistics["mode"]``; or all of them, with ``starts.why_unweighed``.
    """
    starts = drawn.starts
    if starts is None or not may_have_modes(drawn):
        return drawn
    modes = modes_of_chains(posterior)
    if len(modes) == 1:
        return drawn
    rng = np.random.default_rng([20261203, drawn.seed or 0])
    weighed: tuple[ModeEvidence, ...] = ()
    why_not = _not_to_be_weighed(posterior, modes)
    if not why_not:
        try:
            weighed = _weighed(posterior, modes, rng)
            why_not = _why_not(weighed)
        except ModelError as error:
            why_not = str(error)
    if why_not:
        n_modes = max(starts.n_modes, len(modes))
        return replace(drawn, starts=replace(starts, n_modes=n_modes, why_unweighed=why_not))
    shares = np.array([one.share for one in weighed])
    starts = replace(
        starts,
        n_modes=len(modes),
        shares=tuple(shares.tolist()),
        share_errors=tuple(one.mcse for one in weighed),
    )
    choice = _chosen(modes, shares, drawn.n_draws, rng)
    return _taken(replace(drawn, starts=starts), choice)


def may_have_modes(drawn: Draws) -> bool:
    """Whether chains may have stayed in different modes: they did not meet the stopping rule."""
    return drawn.limit_reached and drawn.starts is not None and drawn.n_chains > 1


def _not_to_be_weighed(posterior: Posterior, modes: tuple[tuple[int, ...], ...]) -> str:
    """Say why modes cannot be told apart well enough to be weighed; empty when they can."""
    starts = posterior.draws.starts
    if starts is not None and starts.n_modes > len(modes) and starts.n_modes > starts.kept.size:
        return f"there are more modes than the {starts.kept.size} chains"
    for chains in modes:
        draws = only_chains(posterior, chains).draws
        half = draws.n_draws // 2  # a chain that changes its mode half-way must be noticed too
        prevalence = draws.prevalence.reshape(*draws.elements.shape[:2], -1)
        values = np.concatenate([draws.elements, prevalence], axis=2)
        r_hat = largest_r_hat(np.concatenate([values[:, :half], values[:, half : 2 * half]]))
        if r_hat > MOST_R_HAT:
            return f"chains of one mode disagree (R-hat {r_hat:.2f})"
    return ""


def _weighed(
    posterior: Posterior, modes: tuple[tuple[int, ...], ...], rng: np.random.Generator
) -> tuple[ModeEvidence, ...]:
    """Weigh the modes, with larger proposals while their shares are vague."""
    found = evidence_of_modes(posterior, rng, chains=modes)
    for size in range(1, len(SIZES)):
        if not _why_not(found) and max(one.mcse for one in found) < WANTED_SHARE_ERROR:
            break
        found = evidence_of_modes(posterior, rng, size=size, chains=modes)
    return found


def _why_not(weighed: tuple[ModeEvidence, ...]) -> str:
    """Say why the modes may not be mixed; empty when they may."""
    for number, one in enumerate(weighed, start=1):
        if not one.estimates[0].is_usable:
            return f"the evidence of mode {number} is not reliable ({one.estimates[0].why_not})"
    worst = max(one.mcse for one in weighed)
    if not worst <= MOST_SHARE_ERROR:
        return f"their shares are known to within {100 * worst:.0f} % only"
    return ""


def _chosen(
    modes: tuple[tuple[int, ...], ...], shares: Floats, n_draws: int, rng: np.random.Generator
) -> _Choice:
    """Choose draws, none twice, so that each mode has its share in every chain.

    A mode's chains are laid end to end, thinned evenly, and cut into as many pieces as there are
    chains: chains that disagree about a mode, or drift, still do so after mixing.
    """
    n_chains = sum(len(chains) for chains in modes)
    shares = np.where(shares < LEFT_OUT, 0.0, shares)
    held = np.array([len(chains) * n_draws for chains in modes])
    some = shares > 0
    total = float(np.min(held[some] / (shares[some] / shares.sum())))
    numbers = np.floor(shares / shares.sum() * total / n_chains + 1e-9).astype(np.int64)
    parts = []
    for mode, (chains, number) in enumerate(zip(modes, numbers.tolist(), strict=True)):
        at = np.linspace(0, len(chains) * n_draws - 1, number * n_chains).astype(np.int64)
        chain, draw = np.array(chains)[at // n_draws], at % n_draws
        parts.append(np.stack([chain, draw, np.full(at.size, mode)]).reshape(3, n_chains, number))
    whole = np.concatenate(parts, axis=2)
    for row in range(n_chains):  # modes in random turns, the draws of each in their order
        turns = rng.permutation(whole[2, row])
        order = np.empty(turns.size, dtype=np.int64)
        for mode in range(len(modes)):
            order[turns == mode] = np.flatnonzero(whole[2, row] == mode)
        whole[:, row] = whole[:, row, order]
    return _Choice(*whole)


def _taken(drawn: Draws, choice: _Choice) -> Draws:
    at = choice.chain, choice.draw
    statistics = {name: values[at] for name, values in drawn.statistics.items()}
    return replace(
        drawn,
        elements=drawn.elements[at],
        prevalence=drawn.prevalence[at],
        concentration=None if drawn.concentration is None else drawn.concentration[at],
        log_likelihood=drawn.log_likelihood[at],
        log_prior=drawn.log_prior[at],
        statistics={**statistics, "mode": choice.mode.astype(np.float64)},
    )
