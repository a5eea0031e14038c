"""What the priors weigh: each in pseudo-cases, against the cases expected where it applies."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.position_names import block_names
from bayeslca.model.priors import DEFAULT
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

HEAVY = 0.2
"""A prior that weighs more than this share of the expected cases is pointed out."""


@dataclass(frozen=True)
class PriorWeight:
    """The weight of one block's prior.

    Attributes
    ----------
    block : str
        The block's name, ``P(fees=no, yes | managed)``.
    items, classes : tuple of str
        Where the block stands.
    concentration : tuple of float
        Its Dirichlet parameters.
    origin : str
        The statement that set them, or ``"default"``.
    weight : float
        Their sum: as many cases as the prior counts for.
    expected : float or None
        Answers expected to bear on the block; None without responses.
    shared : bool
        True where a statement made the block: it stands in several places, or in a part of one.
    places : tuple of (int, int, int)
        Response group, item and class of each place where the block stands.
    """

    block: str
    items: tuple[str, ...]
    classes: tuple[str, ...]
    concentration: tuple[float, ...]
    origin: str
    weight: float
    expected: float | None
    shared: bool = False
    places: tuple[tuple[int, int, int], ...] = ()

    @property
    def ratio(self) -> float | None:
        """Weight by the expected answers; None without responses."""
        if self.expected is None:
            return None
        return self.weight / self.expected if self.expected else float("inf")

    @property
    def share(self) -> float | None:
        """Part of the result that the prior makes: weight over weight plus expected answers."""
        if self.expected is None:
            return None
        return self.weight / (self.weight + self.expected)

    @property
    def heavy(self) -> bool:
        """True when the prior weighs more than a fifth of the expected answers."""
        return self.ratio is not None and self.ratio > HEAVY


def prior_weights(
    model: LatentClassModel,
    responses: Responses | None = None,
    class_shares: Floats | None = None,
) -> tuple[PriorWeight, ...]:
    """Weigh the prior of every block of response probabilities.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses, optional
        The data to weigh against.
    class_shares : ndarray, shape (U, K), optional
        P(class | answers) of each unit of the responses, once the model is fitted; before, cases
        are expected in the classes by the mean of the prevalences' prior.
    """
    table = model.table
    answers = None if responses is None else _expected_answers(model, responses, class_shares)
    places = _places(model)
    out = []
    for b, name in enumerate(block_names(model)):
        start, end = int(table.block_start[b]), int(table.block_start[b + 1])
        concentration = tuple(table.element_prior[start:end].tolist())
        at = places[b]
        expected = None if answers is None else float(sum(answers[place] for place in at))
        out.append(
            PriorWeight(
                block=name,
                items=tuple(dict.fromkeys(model.items[j].name for _, j, _ in at)),
                classes=tuple(dict.fromkeys(model.class_names[k] for _, _, k in at)),
                concentration=concentration,
                origin=_origin(model, at),
                shared=bool(model.response_assumptions.tied.reasons[b]),
                weight=sum(concentration),
                expected=expected,
                places=tuple(at),
            )
        )
    return tuple(out)


def _origin(model: LatentClassModel, at: list[tuple[int, int, int]]) -> str:
    """Return the statement that gave a block its prior: the first of the places it stands in."""
    origins = [model.response_prior_origin(*place) for place in at]
    return next((origin for origin in origins if origin != DEFAULT), DEFAULT)


def _places(model: LatentClassModel) -> list[list[tuple[int, int, int]]]:
    """Return the (response group, item, class) places of each block."""
    table = model.table
    block = table.element_block
    places: list[dict[tuple[int, int, int], None]] = [{} for _ in range(table.n_blocks)]
    for g in range(table.n_response_groups):
        for j in range(table.n_items):
            for column in range(table.item_start[j], table.item_start[j + 1]):
                row = int(table.response_row[g, column])
                for k in range(table.n_classes):
                    for _, elements in table.cells(row, k):
                        for e in elements:
                            places[int(block[e])][g, j, k] = None
    return [list(at) for at in places]


def _expected_answers(
    model: LatentClassModel, responses: Responses, class_shares: Floats | None
) -> Floats:
    """Return the answers (response groups, J, K) expected of the cases of each class."""
    table, units = model.table, model.units(responses)
    if class_shares is None:
        a = model.prevalence_source.concentration
        class_shares = (a / a.sum(axis=1, keepdims=True))[units.group]
    out = np.zeros((table.n_response_groups, table.n_items, table.n_classes))
    answered = (units.pattern != MISSING) * units.count[:, None]  # (U, J)
    for g in range(table.n_prevalence_rows):
        mine = units.group == g
        out[table.response_group[g]] += answered[mine].T @ class_shares[mine]
    return out
