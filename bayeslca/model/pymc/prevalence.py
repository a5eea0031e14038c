"""Constrained prevalences as one PyMC variable, on the real line for NUTS.

Bounded blocks of two are coordinates between their bounds (see `bayeslca.model.pymc.bounds`);
blocks without bounds are broken off a stick, one share after the other.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import gammaln

from bayeslca._typing import Floats
from bayeslca.model.blocks import constrained_elements
from bayeslca.model.bounds_probability import log_bounds_probability
from bayeslca.model.pymc.bounds import EDGE, Coordinates, coordinates, interval
from bayeslca.model.truncated_prior import draw_inside, interior_point

if TYPE_CHECKING:
    from bayeslca.model.constrained_prevalence import ConstrainedPrevalence


def add_constrained_prevalence(
    source: ConstrainedPrevalence, name: str, dims: tuple[str, ...]
) -> Any:
    """Add prevalences to the PyMC model in context, with the density of their elements.

    Raises
    ------
    ModelError
        Where bounds are between more than two prevalences, which have no form on the line.
    """
    import pymc as pm
    import pytensor.tensor as pt

    shape = source.element.shape[-len(dims) :]
    blocks = source.blocks
    if not blocks.element_prior.size:
        return pm.Deterministic(name, pt.constant(source.share.reshape(shape)), dims=dims)
    found = coordinates(blocks, "prevalences of more than two classes")
    starts = blocks.block_start[:-1]
    constant = np.sum(gammaln(np.add.reduceat(blocks.element_prior, starts)))
    constant -= np.sum(gammaln(blocks.element_prior)) + log_bounds_probability(blocks).value

    def density(value: Any, _: Any) -> Any:
        x = pt.stack(_elements(source, value))
        return pt.sum((blocks.element_prior - 1.0) * pt.log(x)) + constant

    def draw(_: Floats, rng: np.random.Generator, size: Any) -> Floats:
        n = int(np.prod(size)) if size else 1
        drawn = source.prevalence(draw_inside(blocks, n, rng))
        return drawn.reshape(*(size or ()), *shape)

    axes = "(g,k)" if len(shape) == 2 else "(k)"
    return pm.CustomDist(
        name,
        source.density_parameter.reshape(shape),
        logp=density,
        random=draw,
        signature=f"{axes}->{axes}",
        dims=dims,
        default_transform=_transform(source, found, len(shape) == 2),
        initval=source.prevalence(interior_point(blocks)).reshape(shape),
    )


def _elements(source: ConstrainedPrevalence, prevalence: Any) -> list[Any]:
    """Return the elements that make prevalences (groups, K) or (K,); symbolic."""
    out = []
    for g, k in source.first_place.tolist():
        one = prevalence[k] if prevalence.ndim == 1 else prevalence[g, k]
        out.append(one / source.share[g, k])
    return out


def _transform(source: ConstrainedPrevalence, found: Coordinates, by_group: bool) -> Any:
    import pytensor.tensor as pt
    from pymc.distributions.transforms import Transform

    bounded = constrained_elements(source.blocks)
    sticks = [
        (first, last)
        for first, last in pairwise(source.blocks.block_start.tolist())
        if not bounded[first:last].any()
    ]
    n_bounded = len(found.lower)

    def from_line(u: Any) -> tuple[list[Any], Any]:
        """Return the elements and the log of the Jacobian's determinant."""
        x: list[Any] = [None] * source.blocks.element_prior.size
        chosen: list[Any] = []
        total: Any = pt.constant(0.0)
        for i in range(n_bounded):
            low, high = interval(found, chosen, i)
            chosen.append(low + (high - low) * pt.sigmoid(u[i]))
            this, other = found.elements[i].tolist()
            x[this], x[other] = chosen[i], 1.0 - chosen[i]
            total += pt.log(high - low) - pt.softplus(u[i]) - pt.softplus(-u[i])
        at = n_bounded
        for first, last in sticks:
            left: Any = pt.constant(1.0)
            for e in range(first, last - 1):
                x[e] = left * pt.sigmoid(u[at])
                total += pt.log(left) - pt.softplus(u[at]) - pt.softplus(-u[at])
                left, at = left - x[e], at + 1
            x[last - 1] = left
        return x, total

    class Constrained(Transform):  # type: ignore[misc]
        """See the module."""

        name = "constrained"

        def forward(self, value: Any, *inputs: Any) -> Any:
            x = _elements(source, pt.as_tensor_variable(value))
            out = []
            chosen = [x[e] for e in found.elements[:, 0].tolist()]
            for i in range(n_bounded):
                low, high = interval(found, chosen, i)
                out.append((chosen[i] - low) / (high - low))
            for first, last in sticks:
                left: Any = pt.constant(1.0)
                for e in range(first, last - 1):
                    out.append(x[e] / left)
                    left = left - x[e]
            share = pt.clip(pt.stack(out), EDGE, 1.0 - EDGE)
            return pt.log(share) - pt.log1p(-share)

        def backward(self, value: Any, *inputs: Any) -> Any:
            x, _ = from_line(value)
            rows = [
                [
                    pt.constant(source.share[g, k]) * (x[e] if e >= 0 else 1.0)
                    for k, e in enumerate(row)
                ]
                for g, row in enumerate(source.element.tolist())
            ]
            every = pt.stack([pt.stack(row) for row in rows])
            return every if by_group else every[0]

        def log_jac_det(self, value: Any, *inputs: Any) -> Any:
            return from_line(value)[1]

    return Constrained()
