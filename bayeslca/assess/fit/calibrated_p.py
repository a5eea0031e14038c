"""Calibrated p-values: a posterior predictive p ranked among those of simulated studies."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import TYPE_CHECKING, Literal, TypeAlias

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.fit.predictive_tables import checks_table
from bayeslca.assess.fit.replicates import replicates
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.simulate import Parameters, draw_answers, draw_classes, draw_parameters
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

Show: TypeAlias = Callable[[int, int], None]

CHAINS, DRAWS, ESS, R_HAT = 2, 500, 400, 1.02
"""How a simulated study is sampled: its p-value need not be known as closely."""


def calibrated(
    posterior: Posterior,
    overall: pd.DataFrame,
    n: int,
    source: Literal["posterior", "prior"],
    n_replicates: int,
    seed: int,
    progress: bool | Show = True,
) -> pd.DataFrame:
    """Return the table of checks with calibrated p-values.

    Parameters
    ----------
    posterior : Posterior
    overall : DataFrame
        The table of checks of the data.
    n : int
        Number of simulated studies.
    source : {"posterior", "prior"}
        Where their parameters come from.
    n_replicates, seed : int
    progress : bool or callable

    Returns
    -------
    DataFrame
        With ``p_calibrated``, the share of simulated studies whose p is as small or smaller, the
        data's own among them, and its Monte Carlo error ``p_calibrated_mcse``.
    """
    rng = np.random.default_rng(np.random.SeedSequence([seed, n]))
    found = np.empty((n, len(overall)))
    with _shown(progress) as show:
        for study in range(n):
            show(study, n)
            found[study] = _simulated_p(posterior, source, n_replicates, rng)
        show(n, n)
    p = (1 + (found <= overall["p"].to_numpy()).sum(axis=0)) / (n + 1)
    out = overall.assign(p_calibrated=p, p_calibrated_mcse=np.sqrt(p * (1 - p) / n))
    out.attrs.update(overall.attrs)
    return out


def _simulated_p(
    posterior: Posterior, source: str, n_replicates: int, rng: np.random.Generator
) -> Floats:
    model, draws = posterior.model, posterior.draws
    if source == "prior":
        parameters = draw_parameters(model.table, model.prevalence_source, rng)
    else:
        at = (rng.integers(draws.n_chains), rng.integers(draws.n_draws))
        parameters = Parameters(draws.elements[at], draws.prevalence[at])
    responses = simulated_responses(model, posterior.responses, parameters, rng)
    again = model.sample(
        responses, seed=int(rng.integers(1 << 31)), sampler="auto", chains=CHAINS, draws=DRAWS,
        ess=ESS, r_hat=R_HAT, progress=False,
    )  # fmt: skip
    table = checks_table(replicates(again, n_replicates, int(rng.integers(1 << 31))), 0.95)
    return table["p"].to_numpy(dtype=np.float64)


def simulated_responses(
    model: LatentClassModel,
    responses: Responses,
    parameters: Parameters,
    rng: np.random.Generator,
) -> Responses:
    """Draw new answers for the same cases: groups and which items were answered are kept.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    parameters : Parameters
    rng : numpy Generator
    """
    row = np.repeat(np.arange(responses.n_rows), responses.counts)
    declared = responses.group_codes[row].astype(np.int64)
    group = declared if model.groups is not None else np.zeros_like(declared)
    latent_class = draw_classes(parameters.prevalence, group, rng)
    codes = draw_answers(model.table, parameters.elements, latent_class, group, rng)
    answered = responses.codes[row] != MISSING
    return replace(
        responses,
        codes=np.where(answered, codes, MISSING).astype(np.int16),
        counts=np.ones(row.size, dtype=np.int64),
        group_codes=declared.astype(np.int32),
        case_ids=None,
        is_table_of_patterns=False,
        findings=(),
    )


@contextmanager
def _shown(progress: bool | Show) -> Iterator[Show]:
    """Give what shows progress: the caller's own, a bar on a terminal, or nothing."""
    if callable(progress):
        yield progress
        return
    if not progress or not sys.stderr.isatty():
        yield lambda _done, _total: None
        return
    from rich.console import Console
    from rich.progress import Progress

    with Progress(console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("Simulated studies")
        yield lambda done, total: bar.update(task, completed=done, total=total)
