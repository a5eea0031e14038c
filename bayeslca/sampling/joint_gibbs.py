"""Gibbs sampling of joint models: prevalences from covariates or units, outcomes of class.

A sweep draws classes and response probabilities with the kernel of the measurement model, then
the steps' parameters (`bayeslca.sampling.steps`). `sample_joint` draws from the one posterior of
everything; `sample_held` holds response probabilities at given draws and samples the rest anew at
each of them (the cut, Plummer 2015). Both give a `JointDraws`, not relabelled.

References
----------
Plummer, M. (2015). Cuts in Bayesian graphical models. Statistics and Computing 25, 37-43.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.exceptions import SamplingError
from bayeslca.sampling.joint_chain import JointChain, JointKept, JointTask
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.progress import Meter, Show, shown
from bayeslca.sampling.run import seed_sequence
from bayeslca.sampling.stopping import StoppingRule, judge
from bayeslca.sampling.threads import default_threads, on_threads

JointWatch: TypeAlias = Callable[[JointDraws], Mapping[str, Floats]]
"""More quantities (chain, draw) for the stopping rule, computed at the end of each round."""

WARMUP = 500
FIRST_THIN = 4
MAX_SWEEPS = 100_000
INNER_SWEEPS = 50
"""Sweeps of the inner chain of a cut at each draw of the response probabilities."""


def sample_joint(
    task: JointTask,
    starts: Floats,
    *,
    seed: Seed = None,
    draws: int = 1000,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    warmup: int = WARMUP,
    max_sweeps: int = MAX_SWEEPS,
    threads: int | None = None,
    progress: bool | Show = False,
    watch: JointWatch | None = None,
) -> JointDraws:
    """Draw from the joint posterior.

    Parameters
    ----------
    task : JointTask
        See `bayeslca.sampling.joint_chain.joint_task`.
    starts : ndarray, shape (chain, E)
        Where the chains begin: elements drawn from the measurement model's posterior.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    draws : int
        Kept draws per chain; when the rule needs a longer run, every other one is dropped and
        the chains go on thinned twice as much.
    ess, r_hat : float
        The rule for the log likelihood, the sorted mean prevalences and all watched quantities.
    warmup, max_sweeps : int
    threads : int, optional
    progress : bool or callable
    watch : callable, optional
        More quantities for the rule, such as relabelled coefficients.

    Returns
    -------
    JointDraws

    Raises
    ------
    SamplingError
        When the rule cannot be met by so few kept draws, or answers are impossible.
    """
    begin = time.perf_counter()
    if ess > starts.shape[0] * draws:
        msg = (
            f"ess={ess:g} asks for more effective draws than {starts.shape[0]} chains of {draws} "
            f"kept draws hold. Keep more or lower ess."
        )
        raise SamplingError(msg)
    chains = _chains(task, starts, seed_sequence(seed))
    stop = threading.Event()
    rule = StoppingRule(ess, r_hat)
    with shown(progress) as show:
        meter = Meter(show, rule, most=max_sweeps * len(chains))

        def on_all(work: Callable[[JointChain], JointKept], sweeps: int) -> list[JointKept]:
            meter.plan(sweeps * len(chains))
            return on_threads(
                work, chains, threads=threads or default_threads(), stop=stop, look=meter.look
            )

        def first(chain: JointChain) -> JointKept:
            if warmup:
                chain.run(1, warmup, stop, meter.add)
            return chain.run(draws, thin, stop, meter.add)

        def more(chain: JointChain) -> JointKept:
            return chain.run(draws - draws // 2, thin, stop, meter.add)

        thin = max(1, min(FIRST_THIN, (max_sweeps - warmup) // draws))
        kept = on_all(first, warmup + draws * thin)
        while True:
            so_far = _stacked(kept, _Run(seed, warmup + draws * thin, warmup, thin))
            convergence = judge(watched(so_far) | dict(watch(so_far) if watch else {}))
            meter.judged(convergence)
            is_met = convergence.meets(rule)
            if is_met or warmup + draws * 2 * thin > max_sweeps:
                break
            thin *= 2
            newer = on_all(more, warmup + draws * thin)
            kept = [_thinned(*pair) for pair in zip(kept, newer, strict=True)]
    run = _Run(seed, warmup + draws * thin, warmup, thin, time.perf_counter() - begin, not is_met)
    return _stacked(kept, run)


def sample_held(
    task: JointTask,
    held: Floats,
    *,
    sweeps: int = INNER_SWEEPS,
    warmup: int = WARMUP,
    seed: Seed = None,
    threads: int | None = None,
    progress: bool | Show = False,
) -> JointDraws:
    """Draw classes and the steps' parameters given held response probabilities.

    At each draw that is held, an inner chain goes on from where that of the draw before ended and
    its last state is kept: the inner chain must be long enough to forget where it came from.

    Parameters
    ----------
    task : JointTask
    held : ndarray, shape (chain, draw, E)
        Draws from the measurement model's posterior.
    sweeps : int
        Length of the inner chain.
    warmup : int
        Sweeps at the first draw, before its inner chain.
    seed, threads, progress : see `sample_joint`

    Returns
    -------
    JointDraws
        ``log_likelihood`` of answers (and outcomes) at the draws; ``log_prior`` of the steps'
        parameters alone.
    """
    begin = time.perf_counter()
    chains = _chains(task, held[:, 0], seed_sequence(seed))
    stop = threading.Event()
    n_draws = held.shape[1]
    with shown(progress) as show:
        meter = Meter(show, StoppingRule(0.0, np.inf))
        meter.plan((warmup + n_draws * sweeps) * len(chains))

        def work(one: tuple[JointChain, Floats]) -> JointKept:
            chain, elements = one
            if warmup:
                chain.run(1, warmup, stop, meter.add, held=elements[:1])
            return chain.run(n_draws, sweeps, stop, meter.add, held=elements)

        kept = on_threads(
            work,
            list(zip(chains, held, strict=True)),
            threads=threads or default_threads(),
            stop=stop,
            look=meter.look,
        )
    done = warmup + n_draws * sweeps
    return _stacked(kept, _Run(seed, done, warmup, sweeps, time.perf_counter() - begin))


def watched(draws: JointDraws) -> dict[str, Floats]:
    """Return the quantities that do not depend on labels, for the stopping rule."""
    quantities = {"log likelihood": draws.log_likelihood}
    ranked = np.sort(draws.prevalence, axis=-1)[..., ::-1]
    for g in range(ranked.shape[2]):
        for k in range(ranked.shape[3]):
            quantities[f"mean prevalence of rank {k + 1} in group {g + 1}"] = ranked[:, :, g, k]
    return quantities


def _chains(task: JointTask, starts: Floats, sequence: np.random.SeedSequence) -> list[JointChain]:
    return [
        JointChain(task, elements, np.random.default_rng(child))
        for elements, child in zip(starts, sequence.spawn(len(starts)), strict=True)
    ]


@dataclass(frozen=True, eq=False)
class _Run:
    """How draws were come by."""

    seed: Seed
    sweeps: int
    warmup: int
    thin: int
    seconds: float = 0.0
    limit_reached: bool = False


def _stacked(kept: Sequence[JointKept], run: _Run) -> JointDraws:
    """Stack the draws of chains: a leading chain axis on every array."""
    arrays = {name: np.stack([one.arrays()[name] for one in kept]) for name in kept[0].arrays()}
    swaps = arrays.pop("swaps")
    parameters = {
        name: np.stack([one.parameters[name] for one in kept]) for name in kept[0].parameters
    }
    return JointDraws(
        **arrays,
        parameters=parameters,
        statistics={"accepted_swaps": swaps},
        seed=int(run.seed) if isinstance(run.seed, int | np.integer) else None,
        sweeps=run.sweeps,
        warmup=run.warmup,
        thin=run.thin,
        seconds=run.seconds,
        limit_reached=run.limit_reached,
    )


def _thinned(older: JointKept, newer: JointKept) -> JointKept:
    """Drop every other draw of the older ones and append the newer, thinned twice as much."""
    n_half = older.log_likelihood[1::2].size
    arrays = {
        name: np.concatenate([values[1::2], newer.arrays()[name]])
        for name, values in older.arrays().items()
    }
    pairs = older.swaps[: 2 * n_half].reshape(-1, 2).sum(axis=1)
    arrays["swaps"] = np.concatenate([pairs, newer.swaps])
    parameters = {
        name: np.concatenate([values[1::2], newer.parameters[name]])
        for name, values in older.parameters.items()
    }
    return JointKept(**arrays, parameters=parameters)
