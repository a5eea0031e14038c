"""The evidence (log marginal likelihood), with an error, or a refusal in words.

Of the cases in their order, given group sizes; labels are not divided out: the prior is
normalised over labelled parameters. Whether a figure is to be trusted is part of the result.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from itertools import pairwise
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.assess.convergence.modes import largest_r_hat
from bayeslca.assess.evidence.empty_class_ladder import Step, can_be_joined, ladder_step, rung_of
from bayeslca.assess.evidence.join import Joined, join
from bayeslca.assess.evidence.mode_evidence import (
    MOST_R_HAT,
    ModeEvidence,
    evidence_of_modes,
    number_of_modes,
    summed,
)
from bayeslca.assess.evidence.model_evidence import SIZES, Estimate
from bayeslca.exceptions import ModelError
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_ERROR = 0.5
"""A log evidence with a larger Monte Carlo error is not given as reliable."""
WANTED_ERROR = 0.15
"""Bridges take larger proposals until the joined error is below this."""
WORTH_IT = 0.8
"""A still larger proposal is tried where the last one took the error down to this share of it."""
PHASES = ((0.0, 0.5), (0.6, 0.8), (0.8, 1.0))
"""Where the rounds of weighing begin and end in the whole; the ladder lies after the first."""
Tell: TypeAlias = Callable[[float], None]
GUARD_ERRORS = 4.0
"""Standard errors by which a guarding estimate may differ."""


@dataclass(frozen=True, slots=True, repr=False)
class Evidence:
    """The log evidence of a model.

    Attributes
    ----------
    log_evidence : float
        nan when no estimate could be made.
    mcse : float
        Its Monte Carlo standard error.
    reliable : bool
    reason : str
        Why it is not reliable, in words; empty when it is.
    estimates : tuple of Estimate
        Everything that was tried: those used, those that guard them, those left out.
    chi_square, degrees : float, int
        Disagreement of the joined estimates (of all class counts together).
    modes : tuple of ModeEvidence
        Where chains stay in several modes: what each of them weighs. Empty for one mode.
    """

    log_evidence: float
    mcse: float
    reliable: bool
    reason: str = ""
    estimates: tuple[Estimate, ...] = ()
    chi_square: float = 0.0
    degrees: int = 0
    modes: tuple[ModeEvidence, ...] = ()

    def __repr__(self) -> str:
        if not self.reliable:
            return f"The evidence is not reliable: {self.reason}."
        kinds = " and ".join(dict.fromkeys(one.kind for one in self.estimates if one.is_usable))
        error = "exact" if self.mcse == 0.0 else f"± {self.mcse:.3f}"
        text = f"Log evidence {self.log_evidence:.3f} ({error}; by {kinds})."
        if self.modes:
            shares = ", ".join(f"{100 * one.share:.1f} %" for one in self.modes)
            text += f" {len(self.modes)} modes hold {shares} of the posterior."
        return text


def log_evidence(posterior: Posterior, *, seed: Seed = None) -> Evidence:
    """Return the log evidence of one model.

    Parameters
    ----------
    posterior : Posterior
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
        Of the estimate; by default it follows from the posterior's own seed.
    """
    rng = _generator(posterior, seed)
    return _evidences({posterior.model.n_classes: posterior}, [], rng)[0][posterior.model.n_classes]


def log_evidence_of_counts(
    posteriors: Mapping[int, Posterior], *, seed: Seed = None, tell: Tell | None = None
) -> tuple[dict[int, Evidence], Joined]:
    """Return the log evidence of models with different numbers of classes, joined.

    Parameters
    ----------
    posteriors : mapping from int to Posterior
        Of the same answers, under the same priors.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    tell : callable, optional
        Told how much, 0 to 1, is done.

    Returns
    -------
    dict from int to Evidence
    Joined
        Their values with the covariance of their errors.
    """
    rng = _generator(next(iter(posteriors.values())), seed)
    neighbours = [(a, b) for a, b in pairwise(sorted(posteriors)) if b == a + 1]
    return _evidences(dict(sorted(posteriors.items())), neighbours, rng, tell)


def _evidences(
    posteriors: Mapping[int, Posterior],
    neighbours: Sequence[tuple[int, int]],
    rng: np.random.Generator,
    tell: Tell | None = None,
) -> tuple[dict[int, Evidence], Joined]:
    streams = dict(zip(posteriors, rng.spawn(len(posteriors)), strict=True))
    modes: dict[int, tuple[ModeEvidence, ...]] = {}
    refused: dict[int, str] = {}

    def weigh(k: int, size: int = 0) -> None:
        try:
            modes[k] = evidence_of_modes(posteriors[k], streams[k], size=size)
        except ModelError as error:
            refused[k] = str(error)

    _on_threads(weigh, list(posteriors), tell, PHASES[0])
    estimates = {k: summed(modes[k]) if k in modes else () for k in posteriors}
    steps = _steps(posteriors, neighbours, rng)
    joined = _joined(estimates, steps)
    vague = _too_vague(estimates, joined)
    for size in range(1, len(SIZES)):
        before = {k: estimates[k][0].mcse for k in vague}
        _on_threads(partial(weigh, size=size), vague, tell, PHASES[size])
        estimates |= {k: summed(modes[k]) for k in vague}
        joined = _joined(estimates, steps)
        helped = {k for k in vague if estimates[k][0].mcse < WORTH_IT * before[k]}
        vague = [k for k in _too_vague(estimates, joined) if k in helped]
    if tell is not None:
        tell(1.0)
    found = {
        k: _judged(k, posterior, estimates[k], steps, joined, refused.get(k, ""))
        for k, posterior in posteriors.items()
    }
    for k, several in modes.items():
        if len(several) > 1:
            found[k] = replace(found[k], modes=several)
    return found, joined


def _on_threads(
    work: Callable[[int], None],
    counts: Sequence[int],
    tell: Tell | None,
    phase: tuple[float, float],
) -> None:
    """Do the work for every count: most of it lets other threads run."""
    stop, done = threading.Event(), []  # appending is atomic

    def counted(k: int) -> None:
        work(k)
        done.append(k)

    def look() -> None:
        if tell is not None:
            first, last = phase
            tell(first + (last - first) * sum(done) / max(sum(counts), 1))

    on_threads(counted, counts, threads=default_threads(), stop=stop, look=look)
    look()


def _steps(
    posteriors: Mapping[int, Posterior],
    neighbours: Sequence[tuple[int, int]],
    rng: np.random.Generator,
) -> dict[int, Step]:
    """Return the ladder's steps between neighbouring counts, by the lower one."""
    if not neighbours:
        return {}
    rungs = {
        k: rung_of(posterior) if number_of_modes(posterior) == 1 else None
        for k, posterior in posteriors.items()
    }
    steps = {}
    for (a, b), stream in zip(neighbours, rng.spawn(len(neighbours)), strict=True):
        lower, upper = rungs[a], rungs[b]
        if lower is not None and upper is not None and can_be_joined(lower, upper):
            steps[a] = ladder_step(lower, upper, stream)
    return steps


def _joined(estimates: Mapping[int, tuple[Estimate, ...]], steps: Mapping[int, Step]) -> Joined:
    return join(
        {k: several[:1] for k, several in estimates.items()},
        {k: _as_estimate(step) for k, step in steps.items()},
    )


def _too_vague(estimates: Mapping[int, tuple[Estimate, ...]], joined: Joined) -> list[int]:
    """Return the counts whose joined error is too large."""
    errors = dict(zip(joined.counts, np.sqrt(np.diag(joined.covariance)), strict=True))
    return [k for k, one in estimates.items() if one and errors.get(k, np.inf) > WANTED_ERROR]


def _as_estimate(step: Step) -> Estimate:
    one = step.ladder
    why_not = "" if one.is_usable else "few draws of either model look like the other"
    if one.mcse > MOST_ERROR:
        why_not = "its error is large"
    return Estimate("ladder", one.value, one.mcse, why_not)


def _judged(
    k: int,
    posterior: Posterior,
    estimates: tuple[Estimate, ...],
    steps: Mapping[int, Step],
    joined: Joined,
    refused: str,
) -> Evidence:
    """Say what was found of one count, and whether it is to be trusted."""
    tried = [*estimates, *(_as_estimate(steps[at]) for at in (k - 1, k) if at in steps)]
    value, mcse = np.nan, np.inf
    if k in joined.counts:
        at = joined.counts.index(k)
        value, mcse = float(joined.value[at]), float(np.sqrt(joined.covariance[at, at]))
    if estimates and estimates[0].kind == "exact":
        return Evidence(estimates[0].value, 0.0, True, estimates=tuple(tried))
    reason = _why_not(k, posterior, estimates, steps, joined, value, mcse, refused)
    return Evidence(
        value, mcse, not reason, reason, tuple(tried), joined.chi_square, joined.degrees
    )


def _why_not(
    k: int,
    posterior: Posterior,
    estimates: tuple[Estimate, ...],
    steps: Mapping[int, Step],
    joined: Joined,
    value: float,
    mcse: float,
    refused: str,
) -> str:
    if refused:
        return refused
    starts, n_modes = posterior.draws.starts, number_of_modes(posterior)
    r_hat = largest_r_hat(posterior.draws.log_likelihood[:, :, None])
    if n_modes == 1 and r_hat > MOST_R_HAT:
        return f"the chains disagree (R-hat of the log likelihood {r_hat:.2f})"
    if starts is not None and starts.n_modes > n_modes:
        return f"{starts.n_modes} modes lie within {starts.reach:.0f} nats, their weights unknown"
    if k not in joined.counts:
        return "; ".join(one.why_not for one in estimates if one.why_not)
    if mcse > MOST_ERROR:
        return f"its Monte Carlo error is {mcse:.2f}"
    if not joined.agrees:
        return (
            f"estimates of different kinds disagree (chi-square {joined.chi_square:.1f} on "
            f"{joined.degrees})"
        )
    return _unguarded(k, estimates, steps, value, mcse)


def _unguarded(
    k: int, estimates: tuple[Estimate, ...], steps: Mapping[int, Step], value: float, mcse: float
) -> str:
    """Say which guard is missing or disagrees; empty when one agrees and none disagrees."""
    guards = sum(one.is_usable for one in estimates[:1])
    guards += sum(at in steps and _as_estimate(steps[at]).is_usable for at in (k - 1, k))
    agreeing = guards >= 2
    for one in estimates[1:]:
        if not one.is_usable:
            continue
        if abs(one.value - value) > GUARD_ERRORS * float(np.hypot(one.mcse, mcse)):
            return f"bridge and {one.kind} differ by {abs(one.value - value):.2f}"
        agreeing = True
    step = steps.get(k - 1)
    if step is not None and step.emptied.is_usable and _as_estimate(step).is_usable:
        gap = abs(step.ladder.value - step.emptied.value)
        if gap > GUARD_ERRORS * float(np.hypot(step.ladder.mcse, step.emptied.mcse)):
            return f"two estimates of the step from {k - 1} classes differ by {gap:.2f}"
        agreeing = True
    return "" if agreeing else "only one estimate could be made, with none to check it by"


def _generator(posterior: Posterior, seed: Seed) -> np.random.Generator:
    if seed is None:
        return np.random.default_rng([20261201, posterior.draws.seed or 0])
    return np.random.default_rng(seed)


def probabilities(
    log_evidences: Floats, covariance: Floats, prior: Floats
) -> tuple[Floats, Floats]:
    """Return posterior probabilities (n,) of models, and the covariance (n, n) of their errors.

    Parameters
    ----------
    log_evidences : ndarray, shape (n,)
    covariance : ndarray, shape (n, n)
        Of their errors.
    prior : ndarray, shape (n,)
        Prior probabilities; those of 0 stay 0.
    """
    with np.errstate(divide="ignore"):
        logs = log_evidences + np.log(prior)
    weights = np.exp(logs - logs.max())
    found = weights / weights.sum()
    slope = np.diag(found) - np.outer(found, found)  # of probabilities by log evidences
    return found, np.asarray(slope @ covariance @ slope.T)
