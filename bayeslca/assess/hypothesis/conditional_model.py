"""A model under more statements, with the conditional prior given them.

When a model *states* an equality, a prior stated on one of the equal probabilities is the shared
one's. When an equality is *tested*, nothing may be changed but the equality: the prior under it
is the conditional prior given that it holds (rule 8), whoever stated the priors.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from functools import cached_property

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.priors import DEFAULT, PriorTable


@dataclass(frozen=True, repr=False)
class ConditionalModel(LatentClassModel):
    """A model in which every prior is conditioned on the equalities, as defaults are."""

    @cached_property
    def priors(self) -> PriorTable:
        """The Dirichlet parameters, as if nobody had stated them."""
        found = super().priors
        return replace(
            found,
            prevalence_origin=tuple(DEFAULT for _ in found.prevalence_origin),
            response_origin=tuple(
                tuple(tuple(DEFAULT for _ in of_item) for of_item in of_group)
                for of_group in found.response_origin
            ),
        )


def conditional(base: LatentClassModel, statements: Sequence[str]) -> LatentClassModel:
    """Return the model under more statements.

    Raises
    ------
    ModelError
        When the statements can be no constraint of the model, or contradict it.
    """
    same = {field.name: getattr(base, field.name) for field in fields(LatentClassModel)}
    same |= {"statements": (*base.statements, *statements), "statement_sources": {}}
    return ConditionalModel(**same)
