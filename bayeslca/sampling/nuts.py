"""NUTS through PyMC, for what is not conjugate and as a second engine for what is.

NUTS has no move between labellings, so its chains start in the best one of each mode that the
Gibbs sampler's short runs found; what mass other labellings have it cannot tell.
"""

from __future__ import annotations

import logging
import math
import sys
import time
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bayeslca._compat import as_tree
from bayeslca._typing import Floats, Seed
from bayeslca.exceptions import SamplingError
from bayeslca.findings import Finding
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.pymc.model import Parts, build
from bayeslca.model.symmetry import Symmetry
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.nuts_starts import starting_values
from bayeslca.sampling.run import seed_sequence
from bayeslca.sampling.starting_points import StartingPoints
from bayeslca.sampling.stopping import StoppingRule, judge, label_free, watched_units
from bayeslca.sampling.threads import default_threads

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

NutsBackend = Literal["auto", "pymc", "nutpie"]

TUNE = 1000
MAX_ITERATIONS = 20_000


def draw_with_nuts(
    model: LatentClassModel,
    responses: Responses,
    *,
    seed: Seed = None,
    chains: int = 4,
    draws: int = 1000,
    tune: int = TUNE,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int = MAX_ITERATIONS,
    threads: int | None = None,
    target_accept: float = 0.9,
    nuts_backend: NutsBackend = "auto",
    progress: bool = True,
) -> Draws:
    """Draw from the posterior of a model by NUTS.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
        Draws repeat for a seed with the same versions of PyMC and nutpie only.
    chains, draws : int
        Number of chains, and of kept draws per chain.
    tune : int
        Iterations of warm-up per chain.
    ess, r_hat : float
        The stopping rule of `bayeslca.sampling.run.draw_posterior`. Where the first run does not
        meet it, a second, longer run takes its place.
    max_sweeps : int
        Iterations per chain at most.
    threads : int, optional
    target_accept : float
        High by default: steps are small and divergences rare.
    nuts_backend : {"auto", "pymc", "nutpie"}
        "auto" takes nutpie where it is installed, unless chains start in several modes: nutpie
        starts all chains in one.
    progress : bool
        True shows the sampler's bar on a terminal.

    Returns
    -------
    Draws
        Not relabelled. ``statistics["diverging"]`` is 1 at divergences.

    Raises
    ------
    SamplingError
        When nutpie is asked for and not installed.
    KeyboardInterrupt
        On Ctrl-C, when all chains have stopped.
    """
    return sample_pymc_model(
        build(model, responses),
        model.symmetry,
        seed=seed,
        chains=chains,
        draws=draws,
        tune=tune,
        ess=ess,
        r_hat=r_hat,
        max_sweeps=max_sweeps,
        threads=threads,
        target_accept=target_accept,
        nuts_backend=nuts_backend,
        progress=progress,
    )


def sample_pymc_model(
    pm_model: Any,
    labels: Symmetry | None,
    *,
    seed: Seed = None,
    chains: int = 4,
    draws: int = 1000,
    tune: int = TUNE,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int = MAX_ITERATIONS,
    threads: int | None = None,
    target_accept: float = 0.9,
    nuts_backend: NutsBackend = "auto",
    progress: bool = False,
) -> Draws:
    """Draw from a model made by ``to_pymc``; see `draw_with_nuts`.

    Parameters
    ----------
    pm_model : pm.Model
        Without variables other than those of ``to_pymc``.
    labels : Symmetry or None
        For the labelling in which chains start; None takes it as it comes.
    """
    begin = time.perf_counter()
    parts = Parts.of(pm_model)
    threads = threads or default_threads()
    sequence = seed_sequence(seed)
    points, starts = starting_values(
        parts, labels, sequence.spawn(1)[0], chains=chains, threads=threads
    )
    run = _Run(
        pm_model,
        parts,
        starts,
        tune=tune,
        threads=threads,
        target_accept=target_accept,
        backend=_backend(nuts_backend, points),
        show=progress and sys.stderr.isatty(),
    )
    rule = StoppingRule(ess, r_hat)
    kept = run(draws, sequence)
    convergence = judge(_label_free(parts, kept))
    thin = 1
    if not convergence.meets(rule):
        wanted = 1.3 * ess / max(convergence.ess, 1.0) if convergence.ess < ess else 2.0
        thin = min(math.ceil(wanted), (max_sweeps - tune) // draws)
        if thin > 1:
            kept = run(draws * thin, sequence).every(thin)
            convergence = judge(_label_free(parts, kept))
    thin = max(thin, 1)
    return Draws(
        elements=kept.elements,
        prevalence=kept.prevalence,
        log_likelihood=_log_likelihood(parts, kept),
        log_prior=log_prior(
            parts.table, parts.source, kept.elements, kept.prevalence, kept.concentration
        ),
        statistics={"diverging": kept.diverging},
        sampler="nuts",
        seed=int(seed) if isinstance(seed, int | np.integer) else None,
        sweeps=tune + draws * thin,
        warmup=tune,
        thin=thin,
        seconds=time.perf_counter() - begin,
        limit_reached=not convergence.meets(rule),
        concentration=kept.concentration,
        starts=points,
    )


def nuts_findings(labels: Symmetry) -> tuple[Finding, ...]:
    """Return what is to be known of NUTS draws of a model with these symmetries."""
    if labels.table_group.n_members == labels.prior_group.n_members:
        return ()
    return (
        Finding(
            kind="labellings_not_visited",
            level="warning",
            message=(
                "only the priors tell some classes apart, and NUTS does not move between their "
                "labellings: its chains started in the most probable one, and what probability "
                "the others have was not measured."
            ),
            remedy="Use sampler='gibbs', which moves between them.",
        ),
    )


@dataclass(frozen=True, eq=False)
class _Kept:
    """What a run of NUTS gave: elements (chain, draw, E), prevalence (chain, draw, rows, K)."""

    elements: Floats
    prevalence: Floats
    diverging: Floats
    concentration: Floats | None = None

    def every(self, thin: int) -> _Kept:
        """Keep every thin-th draw; a divergence since the draw before is kept with it."""
        chains, draws = self.diverging.shape
        diverging = self.diverging.reshape(chains, draws // thin, thin).max(axis=2)
        last = slice(thin - 1, None, thin)
        a = self.concentration
        return _Kept(
            self.elements[:, last],
            self.prevalence[:, last],
            diverging,
            None if a is None else a[:, last],
        )


class _Run:
    """Runs NUTS; what was compiled is used again by a second run where that is possible."""

    def __init__(
        self,
        pm_model: Any,
        parts: Parts,
        starts: list[dict[str, Floats]],
        *,
        tune: int,
        threads: int,
        target_accept: float,
        backend: Literal["pymc", "nutpie"],
        show: bool,
    ) -> None:
        self.pm_model, self.parts, self.starts = pm_model, parts, starts
        self.tune, self.threads, self.target_accept = tune, threads, target_accept
        self.backend, self.show = backend, show
        self.names = [rv.name for rv in pm_model.free_RVs]
        self._compiled: Any = None

    def __call__(self, draws: int, sequence: np.random.SeedSequence) -> _Kept:
        seeds = [int(s) for s in sequence.spawn(1)[0].generate_state(len(self.starts))]
        with quiet_pymc():
            tree = as_tree(
                self._nutpie(draws, seeds) if self.backend == "nutpie" else self._pymc(draws, seeds)
            )
        if tree.sample_stats.sizes["draw"] < draws:  # both return what they have on Ctrl-C
            raise KeyboardInterrupt
        shape = (len(self.starts), draws)
        values = {name: np.asarray(tree.posterior[name].values) for name in self.names}
        table = self.parts.table
        prevalence = values.get("prevalence", np.ones((*shape, table.n_prevalence_rows, 1)))
        return _Kept(
            elements=self.parts.elements(values, shape),
            prevalence=prevalence.reshape(*shape, table.n_prevalence_rows, table.n_classes),
            diverging=np.asarray(tree.sample_stats["diverging"].values, dtype=np.float64),
            concentration=self.parts.concentration(values),
        )

    def _pymc(self, draws: int, seeds: list[int]) -> Any:
        import pymc as pm

        return pm.sample(
            draws,
            tune=self.tune,
            chains=len(seeds),
            cores=min(self.threads, len(seeds)),
            random_seed=seeds,
            initvals=self.starts,
            init="adapt_diag",
            target_accept=self.target_accept,
            nuts_sampler="pymc",
            var_names=self.names,
            model=self.pm_model,
            progressbar=self.show,
            quiet=not self.show,
            compute_convergence_checks=False,
        )

    def _nutpie(self, draws: int, seeds: list[int]) -> Any:
        import nutpie

        if self._compiled is None:
            self._compiled = nutpie.compile_pymc_model(
                self.pm_model,
                initial_points=self.starts[0],
                jitter_rvs=set(),
                var_names=self.names,
            )
        return nutpie.sample(
            self._compiled,
            draws=draws,
            tune=self.tune,
            chains=len(seeds),
            cores=min(self.threads, len(seeds)),
            seed=seeds[0],
            save_warmup=False,
            progress_bar=self.show,
            target_accept=self.target_accept,
        )


def _backend(wanted: NutsBackend, points: StartingPoints | None) -> Literal["pymc", "nutpie"]:
    from importlib.util import find_spec

    if wanted not in ("auto", "pymc", "nutpie"):
        msg = f"nuts_backend is {wanted!r}; it must be 'auto', 'pymc' or 'nutpie'."
        raise SamplingError(msg)
    if wanted == "pymc":
        return "pymc"
    if find_spec("nutpie") is None:
        if wanted == "nutpie":
            msg = (
                "nuts_backend='nutpie', but nutpie is not installed. Install it "
                "(pip install 'bayeslca[nutpie]') or use nuts_backend='pymc'."
            )
            raise SamplingError(msg)
        return "pymc"
    several = points is not None and len(set(points.mode[points.kept].tolist())) > 1
    return "pymc" if wanted == "auto" and several else "nutpie"


def _log_likelihood(parts: Parts, kept: _Kept) -> Floats:
    by_unit = log_unit_likelihood(parts.table, parts.units, kept.elements, kept.prevalence)
    return np.asarray(by_unit @ parts.units.count)


def _label_free(parts: Parts, kept: _Kept) -> dict[str, Floats]:
    return label_free(
        parts.table,
        watched_units(parts.units),
        kept.elements,
        kept.prevalence,
        _log_likelihood(parts, kept),
        kept.concentration,
    )


@contextmanager
def quiet_pymc() -> Iterator[None]:
    """Keep PyMC's log lines and warnings back: what matters of them is in the draws."""
    loggers = [logging.getLogger(name) for name in ("pymc", "pytensor")]
    levels = [logger.level for logger in loggers]
    try:
        for logger in loggers:
            logger.setLevel(logging.ERROR)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    finally:
        for logger, level in zip(loggers, levels, strict=True):
            logger.setLevel(level)
