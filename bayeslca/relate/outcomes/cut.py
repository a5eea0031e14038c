"""The cut: what follows from class when the outcome may not change the classes.

Response probabilities and prevalences are drawn from the measurement model's posterior and held.
Given each draw, classes and the outcome's parameters are sampled together by an inner chain:
classes are never imputed from the answers alone, which would draw all class means together.

References
----------
Plummer, M. (2015). Cuts in Bayesian graphical models. Statistics and Computing 25, 37-43.
"""

from __future__ import annotations

import math
import threading
import time
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.relate.case_units import CaseUnits
from bayeslca.relate.outcomes.draws import OutcomeDraws
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.relate.outcomes.quantities import class_means
from bayeslca.sampling.chain import Stopped
from bayeslca.sampling.run import seed_sequence
from bayeslca.sampling.threads import default_threads, on_threads

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

CUT_DRAWS = 2000
"""Draws of the measurement model that are held, all chains together."""
PILOTS, PILOT_SWEEPS = 4, 500
FORGOTTEN = 5.0
"""The inner chain is so many autocorrelation times long."""
FEWEST_SWEEPS, MOST_SWEEPS = 20, 400


def cut_draws(
    posterior: Posterior,
    outcome: OutcomeModel,
    cases: CaseUnits,
    *,
    draws: int = CUT_DRAWS,
    sweeps: int | None = None,
    seed: Seed = None,
    threads: int | None = None,
) -> OutcomeDraws:
    """Draw an outcome's parameters with the measurement model held.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    outcome : OutcomeModel
        Cases in the order of the responses.
    cases : CaseUnits
        A unit for every case.
    draws : int
        Draws that are held, of all chains together, spread evenly over those that were kept.
    sweeps : int, optional
        Length of the inner chain at each of them; found from pilot runs when left out: five times
        the longest autocorrelation time, from 20 to 400.
    seed, threads : see `bayeslca.sampling.run.draw_posterior`
    """
    begin = time.perf_counter()
    sequence = seed_sequence(seed)
    held = _Held(posterior, cases, draws)
    data = outcome.data(held.case_of_unit)
    if sweeps is None:
        sweeps = inner_length(held, outcome, np.random.default_rng(sequence.spawn(1)[0]))
    stop = threading.Event()

    def work(one: tuple[int, np.random.SeedSequence]) -> tuple[Floats, Floats, Floats]:
        from bayeslca.sampling.outcome_draws import inner_chain

        chain, child = one
        rng = np.random.default_rng(child)
        n = held.elements.shape[1]
        by_class, shared = held.start(outcome, chain, rng)
        kept = np.empty((n, *by_class.shape)), np.empty((n, shared.size))
        share, total = np.empty(held.shape), np.zeros(held.shape)
        untraced = np.zeros(0)
        for part, log_weight in held.log_weights(chain):
            for at, weight in zip(range(n)[part], log_weight, strict=True):
                if stop.is_set():
                    raise Stopped
                inner_chain(data, weight, sweeps, by_class, shared, share, untraced, rng)
                kept[0][at], kept[1][at] = by_class, shared
                total += share
        return (*kept, total / n)

    chains = held.elements.shape[0]
    found = on_threads(
        work,
        list(zip(range(chains), sequence.spawn(chains), strict=True)),
        threads=threads or default_threads(),
        stop=stop,
    )
    share = np.mean([one[2] for one in found], axis=0)
    return OutcomeDraws(
        by_class=np.stack([one[0] for one in found]),
        shared=np.stack([one[1] for one in found]),
        elements=held.elements,
        prevalence=held.prevalence,
        membership=share[cases.unit_of_case],
        sweeps=sweeps,
        seconds=time.perf_counter() - begin,
    )


class _Held:
    """The draws that are held, and what they say of each case."""

    def __init__(self, posterior: Posterior, cases: CaseUnits, draws: int) -> None:
        self.table, self.units = posterior.table, cases.units
        kept = posterior.draws
        per_chain = max(1, min(kept.n_draws, draws // kept.n_chains))
        at = np.linspace(0, kept.n_draws - 1, per_chain).round().astype(np.int64)
        self.elements = kept.elements[:, at]
        self.prevalence = kept.prevalence[:, at]
        self.shape = (cases.units.n_units, self.table.n_classes)
        self.case_of_unit = case_of_unit(cases)

    def log_weights(self, chain: int) -> list[tuple[slice, Floats]]:
        """Return pieces of draws with log P(class, answers), shape (draws, U, K)."""
        pieces = log_joint(self.table, self.units, self.elements[chain], self.prevalence[chain])
        return [(part, np.ascontiguousarray(joint.transpose(2, 1, 0))) for part, joint in pieces]

    def start(
        self, outcome: OutcomeModel, chain: int, rng: np.random.Generator
    ) -> tuple[Floats, Floats]:
        """Return parameters near those of classes drawn from the answers alone."""
        first = (self.elements[chain, :1], self.prevalence[chain, :1])
        _, joint = next(iter(log_joint(self.table, self.units, *first)))
        share = class_shares(joint)[:, :, 0].T
        classes = (rng.random(len(share))[:, None] >= np.cumsum(share, axis=1)[:, :-1]).sum(axis=1)
        by_case = np.empty(len(share), dtype=np.int64)
        by_case[self.case_of_unit] = classes
        return outcome.start(by_case, rng)


def case_of_unit(cases: CaseUnits) -> np.ndarray[tuple[int], np.dtype[np.int64]]:
    """Return the case of each unit, where every case is a unit of its own."""
    out = np.empty(cases.units.n_units, dtype=np.int64)
    out[cases.unit_of_case] = np.arange(cases.unit_of_case.size)
    return out


def inner_length(held: _Held, outcome: OutcomeModel, rng: np.random.Generator) -> int:
    """Return how long an inner chain must be to forget where it came from.

    Five times the longest autocorrelation time of class means and of the log likelihood in pilot
    runs at some of the draws.
    """
    from arviz_stats.base import array_stats

    from bayeslca.sampling.outcome_draws import inner_chain

    data = outcome.data(held.case_of_unit)
    share = np.empty(held.shape)
    longest = 1.0
    n_chains, n_draws = held.elements.shape[:2]
    for pilot in range(min(PILOTS, n_draws * n_chains)):
        chain = pilot % n_chains
        at = slice(pilot * n_draws // (PILOTS + 1), pilot * n_draws // (PILOTS + 1) + 1)
        _, joint = next(
            iter(
                log_joint(
                    held.table, held.units, held.elements[chain, at], held.prevalence[chain, at]
                )
            )
        )
        weight = np.ascontiguousarray(joint[:, :, 0].T)
        by_class, shared = held.start(outcome, chain, rng)
        trace = np.zeros(1)
        states = np.empty((PILOT_SWEEPS, held.shape[1] + 1))
        inner_chain(data, weight, FEWEST_SWEEPS, by_class, shared, share, np.zeros(0), rng)
        for sweep in range(PILOT_SWEEPS):
            inner_chain(data, weight, 1, by_class, shared, share, trace, rng)
            states[sweep, :-1] = class_means(outcome, by_class, shared)
            states[sweep, -1] = trace[0]
        for values in states.T:
            if np.ptp(values) > 0.0:
                ess = float(array_stats.ess(values[None], method="bulk"))
                longest = max(longest, PILOT_SWEEPS / max(ess, 1.0))
    return int(np.clip(math.ceil(FORGOTTEN * longest), FEWEST_SWEEPS, MOST_SWEEPS))
