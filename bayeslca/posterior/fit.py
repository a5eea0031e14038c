"""Fitting: compile, draw, relabel, wrap."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Literal

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import SamplingError, near_names
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.table import UnitTable
from bayeslca.posterior.class_state import class_state
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled, relabel
from bayeslca.sampling.run import MAX_SWEEPS, draw_posterior
from bayeslca.sampling.stopping import SOME_UNITS, some_rows

SAMPLERS = ("auto", "gibbs", "nuts")


def fit(
    model: LatentClassModel,
    responses: Responses,
    *,
    seed: int | None = None,
    sampler: Literal["auto", "gibbs", "nuts"] = "auto",
    chains: int = 4,
    draws: int = 1000,
    ess: float = 1000.0,
    r_hat: float = 1.01,
    max_sweeps: int | None = None,
    threads: int | None = None,
    progress: bool | Callable[..., None] = True,
    nuts_backend: Literal["auto", "pymc", "nutpie"] = "auto",
    target_accept: float = 0.9,
) -> Posterior:
    """Sample the posterior of a model given responses.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
        With the model's items, and its groups where it has groups.
    seed : int, optional
        Makes the draws the same every time, whatever the number of threads.
    sampler : {"auto", "gibbs", "nuts"}
        "auto" takes Gibbs, which has an exact step for every part of this version's models.
    chains, draws : int
        Number of chains, and of draws that are kept of each.
    ess, r_hat : float
        Gibbs goes on until label-free and reported quantities reach both. Quantities of classes
        that are empty or not told apart do not hold it.
    max_sweeps : int, optional
        Sweeps (or iterations) per chain at most: 400,000 of Gibbs, 20,000 of NUTS, when not
        given. When they are used up, ``posterior.draws.limit_reached`` says so.
    threads : int, optional
    progress : bool or callable
        True shows a bar on a terminal.
    nuts_backend : {"auto", "pymc", "nutpie"}
        What runs NUTS; "auto" takes nutpie where it is installed.
    target_accept : float
        Acceptance probability that NUTS adapts its steps to.

    Raises
    ------
    ModelError
        When the responses are not the model's, or no class allows an answer that was given.
    SamplingError
        When sampling cannot start, or an option is not known.
    """
    if sampler not in SAMPLERS:
        msg = (
            f"there is no sampler {sampler!r}{near_names(sampler, SAMPLERS)}. "
            f"Take one of {', '.join(SAMPLERS)}."
        )
        raise SamplingError(msg)
    units = compile_units(model.table, model.units(responses))
    seen = _as_the_model_sees(model, responses)
    watch = _Watch(model, units)
    if sampler == "nuts":
        from bayeslca.sampling.nuts import MAX_ITERATIONS, draw_with_nuts

        drawn = draw_with_nuts(
            model,
            seen,
            seed=seed,
            chains=chains,
            draws=draws,
            ess=ess,
            r_hat=r_hat,
            max_sweeps=max_sweeps or MAX_ITERATIONS,
            threads=threads,
            progress=progress is True,
            nuts_backend=nuts_backend,
            target_accept=target_accept,
        )
    else:
        drawn = draw_posterior(
            model,
            seen,
            seed=seed,
            chains=chains,
            draws=draws,
            ess=ess,
            r_hat=r_hat,
            max_sweeps=max_sweeps or MAX_SWEEPS,
            threads=threads,
            progress=progress,
            watch=watch,
        )
    found = Posterior(model, responses, watch.relabelled(drawn))
    if not drawn.limit_reached:
        return found  # the chains agree: there is one mode
    from bayeslca.assess.convergence.mode_mixing import with_modes_mixed

    mixed = with_modes_mixed(found, drawn)
    if mixed is drawn:
        return found
    return Posterior(model, responses, relabel(model, units, mixed))


class _Watch:
    """Relabels the draws of each round for the stopping rule; those of the last are kept."""

    def __init__(self, model: LatentClassModel, units: UnitTable) -> None:
        self.model, self.units = model, units
        self.sampled: Floats | None = None
        self.last: Relabelled | None = None

    def __call__(self, so_far: Draws) -> dict[str, Floats]:
        self.sampled, self.last = so_far.elements, relabel(self.model, self.units, so_far)
        return reported_quantities(self.model, self.units, self.last.draws)

    def relabelled(self, drawn: Draws) -> Relabelled:
        """Return the relabelled draws: those of the last round where these are the same."""
        last, sampled = self.last, self.sampled
        if last is None or sampled is None or not np.array_equal(sampled, drawn.elements):
            return relabel(self.model, self.units, drawn)
        named = replace(
            drawn,
            elements=last.draws.elements,
            prevalence=last.draws.prevalence,
            concentration=last.draws.concentration,
        )
        return replace(last, draws=named)


def reported_quantities(
    model: LatentClassModel, units: UnitTable, named: Draws
) -> dict[str, Floats]:
    """Return the relabelled draws (chain, draw) of reported quantities, for the stopping rule.

    Quantities of classes that are empty or not told apart are left out, as are response
    probabilities of an item's first answer: they are 1 minus the others.
    """
    unsteady = class_state(model.table, units, named).unsteady
    out: dict[str, Floats] = {}
    steady = [k for k in range(model.n_classes) if k not in unsteady]
    n_rows = named.prevalence.shape[2]
    for g in range(n_rows) if named.concentration is None else some_rows(n_rows, SOME_UNITS):
        for k in steady:
            out[f"prevalence of {model.class_names[k]} in group {g + 1}"] = named.prevalence[
                :, :, g, k
            ]
    if named.concentration is not None:
        means = named.concentration / named.concentration.sum(axis=-1, keepdims=True)
        out |= {f"mean prevalence of {model.class_names[k]}": means[:, :, k] for k in steady}
    for element in _elements_of(model, steady):
        out[f"element {element + 1}"] = named.elements[:, :, element]
    return out


def _elements_of(model: LatentClassModel, classes: list[int]) -> list[int]:
    """Return the elements that classes use, without the first of each block."""
    table = model.table
    used = {
        element
        for row in range(table.n_rows)
        for k in classes
        for _, elements in table.cells(row, k)
        for element in elements
    }
    return sorted(used - set(table.block_start[:-1].tolist()))


def _as_the_model_sees(model: LatentClassModel, responses: Responses) -> Responses:
    """Leave out the groups that the model does not have."""
    if model.groups is not None or responses.groups is None:
        return responses
    return replace(responses, groups=None, group_codes=np.zeros(responses.n_rows, dtype=np.int32))
