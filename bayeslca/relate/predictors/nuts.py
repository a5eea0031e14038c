"""The joint way by NUTS: the same posterior as a PyMC model, for extension and as a check."""

from __future__ import annotations

import time
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._compat import as_tree
from bayeslca._typing import Floats, Seed
from bayeslca.model.blocks import log_block_densities
from bayeslca.model.logistic_prevalence import LogisticPrevalence
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.pymc.blocks import Names
from bayeslca.model.pymc.model import Parts, build_from_table
from bayeslca.relate.same_classes import same_classes
from bayeslca.responses.units import Units
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.logistic_step import NAME
from bayeslca.sampling.nuts import TUNE, quiet_pymc
from bayeslca.sampling.run import seed_sequence
from bayeslca.sampling.threads import default_threads

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.relate.predictors.ways import Regression, WayDraws

EDGE = 1e-6


def predictors_to_pymc(posterior: Posterior, relation: Regression) -> Any:
    """Return the joint model of answers and class given covariates as a ``pm.Model``.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model; its table and priors are the model's.
    relation : Regression
        See `bayeslca.relate.predictors.ways.regression`.

    Returns
    -------
    pm.Model
        With ``coefficients`` (latent_class, covariate) and ``prevalence`` (group, latent_class),
        where a group is a distinct line of covariates.
    """
    table = posterior.table
    n_rows = len(relation.rows)
    group = np.zeros(n_rows, dtype=np.int64)
    units = relation.cases.units
    group[units.prevalence_row] = relation.cases.group_of_unit
    source = LogisticPrevalence(
        relation.rows,
        relation.prior_sd,
        table.n_classes,
        tuple(column.name for column in relation.design.columns),
    )
    names = replace(Names.of(posterior.model), group=tuple(map(str, range(1, n_rows + 1))))
    return build_from_table(
        replace(table, response_group=table.response_group[group]),
        source,
        Units(
            pattern=relation.cases.pattern,
            group=units.prevalence_row.astype(np.int32),
            count=units.count,
            unit_of_row=relation.cases.unit_of_case,
        ),
        names,
    )


def jointly_by_nuts(
    posterior: Posterior,
    relation: Regression,
    *,
    seed: Seed,
    chains: int = 4,
    draws: int = 1000,
    tune: int = TUNE,
    target_accept: float = 0.9,
    threads: int | None = None,
) -> WayDraws:
    """Sample the joint posterior by PyMC's NUTS, from draws of the measurement posterior.

    Parameters
    ----------
    posterior, relation : see `predictors_to_pymc`
    seed, chains, draws, tune, target_accept, threads
    """
    import pymc as pm

    from bayeslca.relate.predictors.ways import WayDraws

    begin = time.perf_counter()
    pm_model = predictors_to_pymc(posterior, relation)
    parts = Parts.of(pm_model)
    names = [variable.name for variable in pm_model.free_RVs]
    flat = posterior.draws.flat_elements
    at = np.linspace(0, len(flat) - 1, chains).astype(int)
    starts = [_start(parts, elements, relation) for elements in flat[at]]
    seeds = [int(s) for s in seed_sequence(seed).generate_state(chains)]
    with quiet_pymc():
        tree = as_tree(
            pm.sample(
                draws,
                tune=tune,
                chains=chains,
                cores=min(threads or default_threads(), chains),
                random_seed=seeds,
                initvals=starts,
                init="adapt_diag",
                target_accept=target_accept,
                nuts_sampler="pymc",
                var_names=names,
                model=pm_model,
                progressbar=False,
                quiet=True,
                compute_convergence_checks=False,
            )
        )
    values = {name: np.asarray(tree.posterior[name].values) for name in names}
    drawn = _as_joint(posterior, relation, parts, values, (chains, draws))
    drawn = replace(
        drawn,
        statistics={"diverging": np.asarray(tree.sample_stats["diverging"].values, dtype=float)},
        sweeps=tune + draws,
        warmup=tune,
        seconds=time.perf_counter() - begin,
    )
    named = same_classes(posterior, drawn)
    return WayDraws(named.parameter(NAME), named)


def _start(parts: Parts, elements: Floats, relation: Regression) -> dict[str, Floats]:
    block = parts.table.element_block
    inside = np.maximum(elements, EDGE)
    inside = inside / np.bincount(block, weights=inside, minlength=parts.table.n_blocks)[block]
    values = {variable.name: variable.value(inside) for variable in parts.variables}
    shape = (parts.table.n_classes, relation.prior_sd.size)
    return values | {NAME: np.zeros(shape)}


def _as_joint(
    posterior: Posterior,
    relation: Regression,
    parts: Parts,
    values: dict[str, Floats],
    shape: tuple[int, int],
) -> JointDraws:
    elements = parts.elements(values, shape)
    coefficients = values[NAME]
    source = parts.source
    assert isinstance(source, LogisticPrevalence)
    log_likelihood = np.empty(shape)
    prevalence = np.empty((*shape, posterior.table.n_prevalence_rows, source.n_classes))
    for c in range(shape[0]):
        rows = source.prevalence(coefficients[c])
        by_unit = log_unit_likelihood(posterior.table, relation.cases.units, elements[c], rows)
        log_likelihood[c] = by_unit @ relation.cases.units.count
        prevalence[c] = np.einsum("gn,dnk->dgk", relation.task.share_of_row, rows)
    scaled = coefficients / relation.prior_sd
    norm = np.log(relation.prior_sd).sum() + 0.5 * relation.prior_sd.size * np.log(2.0 * np.pi)
    prior = -0.5 * np.sum(scaled**2, axis=(2, 3)) - source.n_classes * norm
    return JointDraws(
        elements=elements,
        prevalence=prevalence,
        log_likelihood=log_likelihood,
        log_prior=prior + log_block_densities(posterior.table, elements).sum(axis=-1),
        parameters={NAME: coefficients},
    )
