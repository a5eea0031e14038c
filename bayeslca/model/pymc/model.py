"""A latent class model as an ordinary PyMC model that users can extend.

Random variables: ``prevalence`` and the blocks of response probabilities (Beta where binary,
Dirichlet where not). ``response_probability`` is what follows from them for every answer, and
``responses`` is the observed variable, with the class summed out.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.pooled_prevalence import PooledPrevalence, spread_of
from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource
from bayeslca.model.pymc.blocks import (
    BlockVariable,
    Names,
    block_variables,
    element_tensor,
    row_tensor,
)
from bayeslca.model.pymc.likelihood import SIGNATURE, Answers, make_log_density, make_random
from bayeslca.model.support import impossible_units
from bayeslca.model.table import Table, UnitTable
from bayeslca.responses.units import MISSING, Units

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

ATTRIBUTE = "bayeslca_parts"
"""Attribute of the ``pm.Model`` that holds its `Parts`."""


@dataclass(frozen=True, eq=False)
class Parts:
    """What stands behind a PyMC model: for samplers that read arrays, such as the Gibbs step.

    Attributes
    ----------
    table : Table
    units : UnitTable
    source : PrevalenceSource
    variables : tuple of BlockVariable
    by_group : bool
        Whether ``prevalence`` has an axis for groups.
    """

    table: Table
    units: UnitTable
    source: PrevalenceSource
    variables: tuple[BlockVariable, ...]
    by_group: bool

    @classmethod
    def of(cls, pm_model: Any) -> Parts:
        """Return the parts of a PyMC model, with the counts that its data hold now.

        Raises
        ------
        ModelError
            When the model was not made by ``to_pymc``.
        """
        parts: Parts | None = getattr(pm_model, ATTRIBUTE, None)
        if parts is None:
            msg = (
                "this PyMC model was not made by to_pymc (or is a changed copy of one that was). "
                "Make it with LatentClassModel.to_pymc, adding to a model of yours with into=."
            )
            raise ModelError(msg)
        if "count" not in pm_model.named_vars:
            return parts
        count = np.asarray(pm_model["count"].get_value(), dtype=np.int64)
        return replace(parts, units=replace(parts.units, count=count))

    def values(
        self, elements: Floats, prevalence: Floats, concentration: Floats | None = None
    ) -> dict[str, Floats]:
        """Return the value of each random variable.

        For elements (E,), prevalence (rows, K) and, of pooled units, concentration (K,).
        """
        out = {variable.name: variable.value(elements) for variable in self.variables}
        if self.table.n_classes > 1:
            out["prevalence"] = prevalence if self.by_group else prevalence[0]
        if concentration is not None:
            out["mean_prevalence"] = concentration / concentration.sum()
            out["spread"] = np.clip(spread_of(concentration), 1e-3, 1.0 - 1e-3)
        return out

    def concentration(self, values: Mapping[str, Floats]) -> Floats | None:
        """Return the concentration (..., K) of pooled units; None where they are not pooled."""
        if not isinstance(self.source, PooledPrevalence):
            return None
        total = np.asarray(values["spread"], dtype=np.float64) ** -2 - 1.0
        return np.asarray(total[..., None] * values["mean_prevalence"])

    def elements(self, values: Mapping[str, Floats], leading: tuple[int, ...] = ()) -> Floats:
        """Return elements (*leading, E) from values by variable name."""
        out = np.ones((*leading, self.table.n_elements))
        for variable in self.variables:
            variable.put(np.asarray(values[variable.name]), out)
        return out


def build(
    model: LatentClassModel,
    responses: Responses,
    *,
    by_case: bool = False,
    gibbs: bool = False,
    concentration: Any = None,
    into: Any = None,
) -> Any:
    """Return a latent class model as a ``pm.Model``.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    by_case : bool
        False: ``responses`` has a line for each distinct pattern of answers (dim ``unit``), its
        log density counts all cases that gave it, and its pointwise log likelihood is that of
        the pattern's cases together. True: a line for each case (dim ``case``), so that
        ``pm.compute_log_likelihood`` is what leave-one-out measures of cases need, and
        predictive draws are whole replicates of the data. Slower.
    gibbs : bool
        True leaves out the transforms to the real line, as ``GibbsStep`` needs.
    concentration : tensor or array, optional
        Dirichlet parameters (K,) or (group, K) of the prevalences in place of the model's own;
        may depend on variables of your own, made in the model given as ``into``.
    into : pm.Model, optional
        Add to this model instead of a new one.

    Returns
    -------
    pm.Model

    Notes
    -----
    A posterior predictive draw of ``responses`` is one new case per line, whatever its count,
    with the line's missing answers left out (code -1). By unit, weigh them by the data
    ``count``, or use ``by_case=True``.
    """
    units = model.units(responses)
    if by_case:
        units = as_cases(units, responses.counts)
    return build_from_table(
        model.table,
        model.prevalence_source,
        units,
        Names.of(model),
        by_case=by_case,
        gibbs=gibbs,
        concentration=concentration,
        into=into,
    )


def as_cases(units: Units, counts: Ints) -> Units:
    """Return units that are single cases, in the order of the responses' rows."""
    rows = np.repeat(np.arange(units.unit_of_row.size), counts)
    unit = units.unit_of_row[rows]
    unit = unit[unit >= 0]
    return Units(
        pattern=units.pattern[unit],
        group=units.group[unit],
        count=np.ones(unit.size, dtype=np.int64),
        unit_of_row=np.arange(unit.size),
    )


def build_from_table(
    table: Table,
    source: PrevalenceSource,
    units: Units,
    names: Names,
    *,
    log_weight: Floats | None = None,
    by_case: bool = False,
    gibbs: bool = False,
    concentration: Any = None,
    into: Any = None,
) -> Any:
    """Return a compiled model as a ``pm.Model``; see `build`.

    Parameters
    ----------
    log_weight : ndarray, shape (U, K), optional
        Extra log weight of each unit in each class (verified class: 0 and -inf).

    Raises
    ------
    ModelError
        When bounds or orders have no form on the real line, or a unit's answers are impossible.
    """
    import pymc as pm

    if gibbs and (table.is_bounded or not isinstance(source, DirichletPrevalence)):
        msg = (
            "the Gibbs step in PyMC does not draw what is bounded, ordered or pooled. Use "
            "sampler='gibbs' without PyMC, or NUTS (leave out gibbs=True)."
        )
        raise ModelError(msg)
    unit_table = compile_units(table, units, log_weight)
    impossible = impossible_units(table, unit_table)
    if impossible.size:
        msg = (
            f"{int(unit_table.count[impossible].sum())} cases gave answers that no class allows "
            f"(first: codes {units.pattern[impossible[0]].tolist()}). Check these answers, or "
            "loosen the probabilities that are fixed at 0 or 1."
        )
        raise ModelError(msg)
    variables = block_variables(table, names)
    options = {"default_transform": None} if gibbs else {}
    with into or pm.Model() as pm_model:
        coords: dict[str, Any] = {"latent_class": names.latent_class, "response": names.response}
        coords |= {"group": names.group} if names.group else {}
        coords |= {"item": names.item, "case" if by_case else "unit": range(units.n_units)}
        if table.n_response_groups > 1:
            coords["response_group"] = range(table.n_response_groups)
        for variable in variables:
            coords.update(variable.coords)
        for dim, labels in coords.items():
            pm_model.add_coord(dim, list(labels))
        prevalence = _prevalence(source, names, concentration, options)
        values = [variable.add(table, **options) for variable in variables]
        elements = element_tensor(table, list(zip(variables, values, strict=True)))
        rows = row_tensor(table, elements)
        _response_probability(table, rows)
        _likelihood(table, units, unit_table, prevalence, rows, by_case=by_case)
    parts = Parts(table, unit_table, source, variables, bool(names.group))
    setattr(pm_model, ATTRIBUTE, parts)
    return pm_model


def _prevalence(
    source: PrevalenceSource, names: Names, concentration: Any, options: dict[str, Any]
) -> Any:
    """Add the prevalences; return them with an axis for the prevalence rows."""
    import pymc as pm
    import pytensor.tensor as pt

    dims = ("group", "latent_class") if names.group else ("latent_class",)
    if isinstance(source, DirichletPrevalence) and source.n_classes > 1:
        if concentration is None:
            concentration = source.concentration if names.group else source.concentration[0]
        shape = (source.n_rows, source.n_classes)[-len(dims) :]
        a = pt.broadcast_to(concentration, shape)
        prevalence = pm.Dirichlet("prevalence", a=a, dims=dims, **options)
    elif concentration is not None and source.n_classes > 1:
        msg = (
            "concentration= replaces the prior of prevalences that are neither constrained nor "
            "pooled; this model has such a prior already. Leave out concentration=, or that."
        )
        raise ModelError(msg)
    else:
        prevalence = source.to_pymc("prevalence", dims)
    return prevalence if names.group else prevalence[None, :]


def _response_probability(table: Table, rows: Any) -> None:
    import pymc as pm

    by_group = rows[table.response_row]  # (G, A, K)
    if table.n_response_groups == 1:
        pm.Deterministic("response_probability", by_group[0].T, dims=("latent_class", "response"))
        return
    pm.Deterministic(
        "response_probability",
        by_group.transpose(0, 2, 1),
        dims=("response_group", "latent_class", "response"),
    )


def _likelihood(
    table: Table,
    units: Units,
    unit_table: UnitTable,
    prevalence: Any,
    rows: Any,
    *,
    by_case: bool,
) -> None:
    """Add the observed variable ``responses``."""
    import pymc as pm

    line = "case" if by_case else "unit"
    count = 1 if by_case else pm.Data("count", unit_table.count, dims=line)
    one_row = table.n_prevalence_rows == 1
    log_weight = unit_table.log_weight
    answers = Answers(table)
    pm.CustomDist(
        "responses",
        prevalence if one_row else prevalence[unit_table.prevalence_row],
        rows[answers.row],
        table.response_group[unit_table.prevalence_row],
        count,
        log_weight if log_weight.size else np.zeros((1, table.n_classes)),
        (units.pattern != MISSING).astype(np.int64),
        logp=make_log_density(answers),
        random=make_random(answers),
        signature=SIGNATURE,
        dtype="int64",
        class_name="LatentClassResponses",
        observed=units.pattern.astype(np.int64),
        dims=(line, "item"),
    )
