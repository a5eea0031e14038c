"""The posterior as an xarray DataTree in ArviZ's schema.

Groups: ``posterior`` (prevalence, response_probability; of pooled units also mean_prevalence,
unit_concentration and spread), ``sample_stats`` (lp, log_likelihood and
what else the sampler noticed), ``unit_log_likelihood`` (one column per distinct answers, with
``count``), ``log_prior`` (one entry per block, and the prevalences), ``observed_data`` and
``block_draws`` (the elements of the compiled table). ``log_likelihood``, in which a column is a
case, is added by ``to_arviz`` only: nobody's leave-one-out shall count a pattern as a case.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import BayesLCAError
from bayeslca.model.pooled_prevalence import PooledPrevalence, spread_of
from bayeslca.model.position_names import block_names, element_names
from bayeslca.model.prior_density import log_block_priors

if TYPE_CHECKING:
    from xarray import Dataset, DataTree

    from bayeslca.posterior.posterior import Posterior

MOST_NUMBERS = 500_000_000
"""Largest case-level log likelihood (4 GB)."""
CHAIN = ("chain", "draw")


def posterior_tree(posterior: Posterior) -> DataTree:
    """Return the posterior as a DataTree; see this module's description."""
    from xarray import DataTree

    groups = {
        "posterior": _posterior_group(posterior),
        "sample_stats": _sample_stats(posterior),
        "unit_log_likelihood": _unit_log_likelihood(posterior),
        "log_prior": _log_prior(posterior),
        "observed_data": _observed_data(posterior),
        "block_draws": _block_draws(posterior),
    }
    tree: DataTree = DataTree.from_dict({f"/{name}": data for name, data in groups.items()})
    attributes = tree_attributes(posterior)
    tree.attrs.update(attributes)
    for name in groups:
        tree[name].attrs.update({key: attributes[key] for key in _EVERYWHERE})
    return tree


_EVERYWHERE = ("created_at", "inference_library", "inference_library_version")
"""Attributes that ArviZ's schema wants in every group."""


def tree_attributes(posterior: Posterior) -> dict[str, str | int | float]:
    """Return what the tree says of itself: versions, seed, data, model, sampling."""
    draws = posterior.draws
    return {
        "created_at": posterior.created_at,
        "inference_library": "bayeslca",
        "inference_library_version": posterior.versions.get("bayeslca", ""),
        "versions": json.dumps(posterior.versions),
        "model": json.dumps(posterior.model.to_dict()),
        "data_hash": posterior.responses.data_hash,
        "sampler": draws.sampler,
        "seed": "none" if draws.seed is None else str(draws.seed),
        "sweeps": draws.sweeps,
        "warmup": draws.warmup,
        "thin": draws.thin,
        "sampling_time": draws.seconds,
        "limit_reached": int(draws.limit_reached),
        "names_settled": posterior.relabelled.names_settled,
    }


def with_case_log_likelihood(posterior: Posterior) -> DataTree:
    """Return the tree with the group ``log_likelihood``: (chain, draw, case).

    Rows without an answer are no case of it; a row that stands for several cases has as many
    columns.

    Raises
    ------
    BayesLCAError
        When it would not fit into memory.
    """
    from xarray import Dataset, DataTree

    responses, units = posterior.responses, posterior.units
    rows = np.repeat(np.arange(responses.n_rows), responses.counts)
    rows = rows[units.unit_of_row[rows] >= 0]
    by_unit = posterior.log_likelihood_draws
    size = by_unit.shape[0] * by_unit.shape[1] * rows.size
    if size > MOST_NUMBERS:
        msg = (
            f"the log likelihood of {rows.size} cases in {by_unit.shape[0] * by_unit.shape[1]} "
            f"draws takes {8 * size / 1e9:.0f} GB. Use posterior.log_likelihood_draws, which has "
            "one column per response pattern, with the counts in posterior.units.count."
        )
        raise BayesLCAError(msg)
    names = np.asarray(responses.row_names, dtype=str)[rows]
    cases = np.arange(rows.size) if responses.is_table_of_patterns else names
    data = Dataset(
        {"responses": ((*CHAIN, "case"), by_unit[:, :, units.unit_of_row[rows]])},
        coords={**_chain_coordinates(posterior), "case": cases},
        attrs=dict(posterior.tree["posterior"].attrs),
    )
    tree = posterior.tree.copy()
    tree["log_likelihood"] = DataTree(data)
    return tree


def _chain_coordinates(posterior: Posterior) -> dict[str, Ints]:
    draws = posterior.draws
    return {"chain": np.arange(draws.n_chains), "draw": np.arange(draws.n_draws)}


def _posterior_group(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    model = posterior.model
    prevalence, response = posterior.prevalence_draws, posterior.response_probability_draws
    coords: dict[str, Any] = {
        **_chain_coordinates(posterior),
        "latent_class": list(model.class_names),
        "response": [f"{i.name}={category}" for i in model.items for category in i.categories],
    }
    prevalence_dims: tuple[str, ...] = (*CHAIN, "group", "latent_class")
    response_dims: tuple[str, ...] = (*CHAIN, "response_group", "latent_class", "response")
    if model.groups is None:
        prevalence, prevalence_dims = prevalence[:, :, 0], (*CHAIN, "latent_class")
    else:
        coords["group"] = list(model.groups.levels)
    if response.shape[2] == 1:
        response, response_dims = response[:, :, 0], (*CHAIN, "latent_class", "response")
    else:
        coords["response_group"] = np.arange(response.shape[2])
    data: dict[str, Any] = {
        "prevalence": (prevalence_dims, prevalence),
        "response_probability": (response_dims, response),
    }
    concentration = posterior.draws.concentration
    if concentration is not None:
        total = concentration.sum(axis=-1)
        data["mean_prevalence"] = ((*CHAIN, "latent_class"), concentration / total[..., None])
        data["unit_concentration"] = (CHAIN, total)
        data["spread"] = (CHAIN, spread_of(concentration))
    return Dataset(data, coords=coords)


def _sample_stats(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    draws = posterior.draws
    columns: Mapping[str, Floats] = {
        "lp": draws.log_likelihood + draws.log_prior,
        "log_likelihood": draws.log_likelihood,
        "log_prior": draws.log_prior,
        **draws.statistics,
    }
    return Dataset(
        {name: (CHAIN, values) for name, values in columns.items()},
        coords=_chain_coordinates(posterior),
    )


def _unit_coordinates(posterior: Posterior) -> dict[str, Any]:
    return {"unit": np.arange(posterior.units.n_units)}


def _unit_log_likelihood(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    return Dataset(
        {
            "responses": ((*CHAIN, "unit"), posterior.log_likelihood_draws),
            "count": ("unit", posterior.units.count),
        },
        coords={**_chain_coordinates(posterior), **_unit_coordinates(posterior)},
    )


def _log_prior(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    # Relabelling stays within what leaves the priors unchanged, so the relabelled draws have the
    # density they were sampled with. Bounds divide it by a constant, which has no entry here.
    draws = posterior.draws
    blocks = log_block_priors(posterior.table, draws.elements)
    source = posterior.model.prevalence_source
    data: dict[str, Any] = {}
    if isinstance(source, PooledPrevalence):
        # Only the top level: that of the units' prevalences is no prior to be scaled (Kallioinen
        # et al. 2024).
        assert draws.concentration is not None
        of_mean, of_spread = source.log_top(draws.concentration)
        data |= {"mean_prevalence": (CHAIN, of_mean), "spread": (CHAIN, of_spread)}
    else:
        data["prevalence"] = (CHAIN, source.log_density(draws.prevalence))
    coords: dict[str, Any] = _chain_coordinates(posterior)
    if blocks.shape[2]:
        data["response_probability"] = ((*CHAIN, "block"), blocks)
        coords["block"] = list(block_names(posterior.model))
    return Dataset(data, coords=coords)


def _observed_data(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    units = posterior.units
    return Dataset(
        {
            "responses": (("unit", "item"), units.pattern),
            "group": ("unit", units.group),
            "count": ("unit", units.count),
        },
        coords={
            **_unit_coordinates(posterior),
            "item": [item.name for item in posterior.model.items],
        },
    )


def _block_draws(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    return Dataset(
        {"elements": ((*CHAIN, "element"), posterior.draws.elements)},
        coords={
            **_chain_coordinates(posterior),
            "element": list(element_names(posterior.model)),
        },
    )
