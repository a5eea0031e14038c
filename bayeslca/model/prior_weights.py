"""What the priors weigh: each in pseudo-cases, against the cases expected where it applies."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.joint_names import conditional_block, conditional_vectors
from bayeslca.model.places import Place, ResponseVector
from bayeslca.model.position_names import block_names
from bayeslca.model.priors import DEFAULT
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.syntax import Event, Name, Probability
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    from bayeslca.model.answered_together import ItemSet
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

STATED_TOGETHER = "answered_together"
"""Origin of a prior of joint answers that was given with their set."""
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
    together : bool
        True for the default prior of the joint answers of a set, taken as one.
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
    together: bool = False

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

    The joint answers of items that are answered together count as one block for each class.

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
    in_sets = _blocks_of_sets(model)
    out = []
    for b, name in enumerate(block_names(model)):
        if b in in_sets:
            continue
        start, end = int(table.block_start[b]), int(table.block_start[b + 1])
        concentration = tuple(table.element_prior[start:end].tolist())
        at = places[b]
        expected = None if answers is None else _expected_of(model, answers, at)
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
    return (*out, *_of_sets(model, answers))


def _blocks_of_sets(model: LatentClassModel) -> frozenset[int]:
    """Return the blocks that the default prior of a set's joint answers makes."""
    reasons = model.response_assumptions.tied.reasons
    forms = model.response_assumptions.tied.forms
    found = {conditional_block(model, vector) for vector in conditional_vectors(model)}
    for one in model.item_sets:
        for g in range(model.n_response_groups if one.first in model.free_items else 1):
            for k in one.classes:
                if model.response_prior_origin(g, one.first, k) == DEFAULT:
                    place = Place(ResponseVector(g, one.first, k), 0)
                    found |= {int(model.table.element_block[e]) for e in forms[place].elements}
    return frozenset(b for b in found if b is not None and not reasons[b])


def _places_of_set(
    model: LatentClassModel, one: ItemSet, group: int | None, latent_class: int
) -> tuple[tuple[int, int, int], ...]:
    groups = range(model.n_response_groups) if group is None else (group,)
    return tuple((g, j, latent_class) for g in groups for j in one.items)


def _of_sets(model: LatentClassModel, answers: Floats | None) -> Iterator[PriorWeight]:
    for one in model.item_sets:
        names = tuple(model.items[j].name for j in one.items)
        events = tuple(Event(Name(name)) for name in names)
        free = one.first in model.free_items
        for g, k in product(range(model.n_response_groups if free else 1), sorted(one.classes)):
            given = [Event(Name(model.class_names[k]))]
            if model.groups is not None and free:
                level = Name(model.groups.levels[g])
                given.append(Event(Name(model.groups.name), "=", (level,)))
            expected = None
            if answers is not None:
                of_group = answers[g] if free else answers.sum(axis=0)
                expected = float(of_group[list(one.items), k].mean())
            yield PriorWeight(
                block=to_text(Probability(events, tuple(given))),
                items=names,
                classes=(model.class_names[k],),
                concentration=one.priors[k],
                origin=STATED_TOGETHER if k in one.stated else DEFAULT,
                weight=one.weight(k),
                expected=expected,
                together=True,
                places=_places_of_set(model, one, g if free else None, k),
            )


def _expected_of(model: LatentClassModel, answers: Floats, at: list[tuple[int, int, int]]) -> float:
    """Return the answers that bear on a block: a case counts once for a set that it answered."""
    most: dict[tuple[int, int, int], float] = {}
    for g, j, k in at:
        sets = (one.first for one in model.item_sets if j in one.items and k in one.classes)
        place = (g, next(sets, j), k)
        most[place] = max(most.get(place, 0.0), float(answers[g, j, k]))
    return sum(most.values())


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
