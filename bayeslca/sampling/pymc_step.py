"""The Gibbs sweep as a PyMC step method, next to NUTS for whatever users add to the model.

Imports PyMC: import this module only where it is used.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from pymc.model import modelcontext
from pymc.step_methods.compound import BlockedStep
from pytensor.graph.traversal import ancestors

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.pymc.model import Parts
from bayeslca.sampling.gibbs import sweep
from bayeslca.sampling.layout import arrange, workspace

DISTRIBUTIONS = ("beta", "dirichlet")


class GibbsStep(BlockedStep):  # type: ignore[misc]
    """One Gibbs sweep of the latent classes, the response probabilities and the prevalences.

    Classes are drawn given everything else and then forgotten, so that the model keeps its
    likelihood with the class summed out and other steps (NUTS) can update what users added.
    Priors are read at every step: parameters of the Dirichlets and Betas may be variables.

    Parameters
    ----------
    vars : sequence of value variables, optional
        Left out: all that the step draws.
    model : pm.Model, optional
        Made by ``LatentClassModel.to_pymc(responses, gibbs=True)``; the one in whose context
        this is called when left out.
    rng : numpy.random.Generator, optional
        PyMC gives each chain one of its own.
    blocked : bool
        Always True: the variables are drawn together.

    Raises
    ------
    ModelError
        When the model was not made so, or something else in it depends on these variables.
    SamplingError
        When there is no exact step for the prevalences.

    Notes
    -----
    The permutation move of ``sampler="gibbs"`` is left out: what users add may tell classes
    apart in ways this step does not know.

    Examples
    --------
    >>> with model.to_pymc(responses, gibbs=True):  # doctest: +SKIP
    ...     trace = pm.sample(step=[GibbsStep()])
    """

    name = "latent_class_gibbs"
    stats_dtypes_shapes: dict[str, Any] = {}  # noqa: RUF012

    def __init__(
        self,
        vars: Sequence[Any] | None = None,
        *,
        model: Any = None,
        rng: Any = None,
        blocked: bool = True,
    ) -> None:
        model = modelcontext(model)
        parts = Parts.of(model)
        if not isinstance(parts.source, DirichletPrevalence):
            msg = (
                f"prevalences come from {type(parts.source).__name__}, for which the Gibbs sweep "
                "has no exact step. Sample this model with NUTS."
            )
            raise SamplingError(msg)
        names = [variable.name for variable in parts.variables]
        if parts.table.n_classes > 1:
            names.append("prevalence")
        self.vars = [_value_variable(model, name) for name in names]
        if vars is not None and {v.name for v in vars} != set(names):
            msg = (
                f"the Gibbs step draws {', '.join(names)} together; leave out vars, or give all "
                "of them and no others."
            )
            raise ModelError(msg)
        _refuse_dependants(model, names)
        self.rng = np.random.default_rng(rng)
        self._parts = parts
        layout = arrange(parts.table, parts.units, parts.source.n_rows)
        self._layout = layout._replace(element_prior=layout.element_prior.copy())
        self._work = workspace(self._layout)
        self._concentration = np.ones((parts.source.n_rows, parts.table.n_classes))
        self._priors = _Priors(model, names)
        if self._priors.are_constant:
            self._set_priors(self._priors.values({}))

    def step(self, point: dict[str, Any]) -> tuple[dict[str, Any], list[dict[str, Any]]]:
        """Draw all variables of this step given the others."""
        parts = self._parts
        if not self._priors.are_constant:
            self._set_priors(self._priors.values(point))
        elements = parts.elements(point)
        prevalence = np.ones_like(self._concentration)
        if parts.table.n_classes > 1:
            prevalence[:] = point["prevalence"]
        log_likelihood = sweep(
            self._layout, self._work, self._concentration, elements, prevalence, self.rng
        )
        if math.isnan(log_likelihood):
            msg = "some answers have probability 0 in every class; check the fixed probabilities."
            raise SamplingError(msg)
        return {**point, **parts.values(elements, prevalence)}, [{}]

    def _set_priors(self, values: dict[str, tuple[Floats, ...]]) -> None:
        """Write the priors' parameters where the sweep reads them."""
        for variable in self._parts.variables:
            parameters = values[variable.name]
            for at, a in enumerate(parameters) if variable.is_binary else ():
                self._layout.element_prior[variable.elements[..., at]] = a
            if not variable.is_binary:
                self._layout.element_prior[variable.elements] = parameters[0]
        if "prevalence" in values:
            self._concentration[:] = values["prevalence"][0]


class _Priors:
    """Parameters of the priors, as functions of the point where they are variables."""

    def __init__(self, model: Any, names: Sequence[str]) -> None:
        self.names = tuple(names)
        expressions = []
        self._sizes = []
        for name in names:
            parameters = _parameters(model, name)
            self._sizes.append(len(parameters))
            expressions += parameters
        free = {rv for rv in model.free_RVs if rv in set(ancestors(expressions))}
        self.are_constant = not free
        self._inputs = [model.rvs_to_values[rv] for rv in model.free_RVs if rv in free]
        replaced = model.replace_rvs_by_values(expressions)
        self._function = model.compile_fn(replaced, inputs=self._inputs, point_fn=False)

    def values(self, point: dict[str, Any]) -> dict[str, tuple[Floats, ...]]:
        """Return the parameters of each variable's prior at a point."""
        found = iter(self._function(*(point[v.name] for v in self._inputs)))
        return {
            name: tuple(np.asarray(next(found)) for _ in range(size))
            for name, size in zip(self.names, self._sizes, strict=True)
        }


def _value_variable(model: Any, name: str) -> Any:
    variable = model.named_vars.get(name)
    if variable not in model.free_RVs:
        msg = f"'{name}' is not a free random variable of this model, so it cannot be drawn."
        raise ModelError(msg)
    if model.rvs_to_transforms[variable] is not None:
        msg = (
            f"'{name}' is transformed to the real line, which the Gibbs step cannot use. Make the "
            "model with to_pymc(responses, gibbs=True)."
        )
        raise ModelError(msg)
    return model.rvs_to_values[variable]


def _parameters(model: Any, name: str) -> list[Any]:
    node = model[name].owner
    if node.op.name not in DISTRIBUTIONS:
        msg = f"the prior of '{name}' is no Beta or Dirichlet; the Gibbs step needs one."
        raise ModelError(msg)
    return list(node.op.dist_params(node))


def _refuse_dependants(model: Any, names: Sequence[str]) -> None:
    """Refuse a model in which more than the responses depends on what the step draws."""
    mine = {model[name] for name in names}
    others = [
        variable
        for variable in [*model.basic_RVs, *model.potentials]
        if variable not in mine and variable.name != "responses"
    ]
    for variable in others:
        found = sorted(m.name for m in mine & set(ancestors([variable])))
        if found:
            msg = (
                f"'{variable.name}' depends on {', '.join(found)}, which the Gibbs step draws "
                "given the responses and priors alone. Sample this model with NUTS (to_pymc "
                "without gibbs=True)."
            )
            raise ModelError(msg)
