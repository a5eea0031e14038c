"""What was assumed beforehand, block by block, and what it weighs against the answers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.places import ConditionalVector, PrevalenceVector, ResponseVector
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.priors import DEFAULT
from bayeslca.model.probabilities import draw_elements

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.model.prior_weights import PriorWeight
    from bayeslca.posterior.posterior import Posterior

HEAVY_WORDS = "a fifth"
"""From which part of the expected cases a reader is told: `bayeslca.model.prior_weights.HEAVY`."""
PRIOR_DRAWS, PRIOR_SEED = 4000, 20_261_201
"""Of a prior that has no name."""


@dataclass(frozen=True)
class ItemPrior:
    """What the prior of one item in one class weighs.

    Attributes
    ----------
    latent_class, item : str
    parameters : ndarray of float64, shape (category,)
        Its Dirichlet parameters, as stated or by default.
    heaviest : PriorWeight or None
        The block behind it, against the answers that the fit expects; of several (groups, split
        answers) the one whose prior rules most; None where all is known.
    origin : str
        The statement that set the prior, or ``"default"``.
    constraints : tuple of str
        Statements that hold it equal to another, known, bounded or ordered.
    follows : bool
        True where the item is answered together with another whose prior is not the default: its
        own prior then has no name, and ``parameters`` are those of the joint answers' alone.
    """

    latent_class: str
    item: str
    parameters: Floats
    heaviest: PriorWeight | None
    origin: str
    constraints: tuple[str, ...] = ()
    follows: bool = False

    @property
    def weight(self) -> float:
        """The number of cases that the prior counts for; 0 where all is known."""
        return 0.0 if self.heaviest is None else self.heaviest.weight

    @property
    def share(self) -> float:
        """Part of the result that the prior makes: weight over weight plus cases."""
        if self.heaviest is None or self.heaviest.share is None:
            return float("nan")
        return self.heaviest.share

    @property
    def heavy(self) -> bool:
        """True when the prior weighs more than a fifth of the expected cases."""
        return self.heaviest is not None and self.heaviest.heavy


def item_priors(posterior: Posterior) -> tuple[ItemPrior, ...]:
    """Return what the prior of each item in each class weighs against the answers."""
    model = posterior.model
    at: dict[tuple[int, int], list[PriorWeight]] = {}
    for weight in posterior.prior_marks.weights:
        for j, k in dict.fromkeys((j, k) for _, j, k in weight.places):
            at.setdefault((j, k), []).append(weight)
    return tuple(
        ItemPrior(
            name,
            item.name,
            model.priors.response[0][j][k],
            max(at.get((j, k), ()), key=lambda weight: weight.share or 0.0, default=None),
            model.response_prior_origin(0, j, k),
            _constraints(model, j, k),
            follows=_follows(model, j, k),
        )
        for j, item in enumerate(model.items)
        for k, name in enumerate(model.class_names)
    )


def _follows(model: LatentClassModel, item: int, latent_class: int) -> bool:
    """Tell whether an item's prior is a sum of joint answers that is no Dirichlet."""
    for one in model.item_sets:
        if item in one.others and latent_class in one.classes:
            vectors = [place.vector for link in model.links for place in link.places]
            tied = any(
                isinstance(vector, ConditionalVector)
                or (vector.item, vector.latent_class) == (one.first, latent_class)
                for vector in vectors
                if not isinstance(vector, PrevalenceVector)
            )
            return tied or model.response_prior_origin(0, one.first, latent_class) != DEFAULT
    return False


def _constraints(model: LatentClassModel, item: int, latent_class: int) -> tuple[str, ...]:
    """Return the statements that constrain an item's answers in a class, in some group."""
    found = [
        link.text
        for link in model.links
        for place in link.places
        if isinstance(place.vector, ResponseVector)
        and (place.vector.item, place.vector.latent_class) == (item, latent_class)
    ]
    return tuple(dict.fromkeys(found))


def distribution(parameters: Sequence[float] | Floats) -> str:
    """Return how a prior is written: ``Beta(9, 2)`` or ``Dirichlet(1, 1, 1)``.

    A Beta is of the answer that counts as yes, so its parameters come in the order yes, no.
    """
    numbers = ", ".join(f"{float(value):.4g}" for value in parameters)
    return f"{'Beta' if len(parameters) == 2 else 'Dirichlet'}({numbers})"


def priors_table(posterior: Posterior) -> pd.DataFrame:
    """Return the prior of each prevalence and of each answer in each class, a row each.

    Columns: group (where there are groups), latent_class, item, category, prior, prior_mean,
    prior_lower, prior_upper (95 %), prior_cases, prior_share, statement, source, constraints. The
    rows of prevalences have neither item nor category. What constraints cut off is not in the
    prior's figures here.
    """
    import pandas as pd

    model = posterior.model
    units = posterior.units
    rows: list[dict[str, object]] = []
    source = model.prevalence_source
    pooled = isinstance(source, PooledPrevalence)
    if isinstance(source, PooledPrevalence):
        rows += _pooled_rows(model, source)
    for g, concentration in enumerate(() if pooled else source.concentration):
        cases = float(units.count[units.group == g].sum())
        share = float(concentration.sum() / (concentration.sum() + cases))
        group = {"group": model.groups.levels[g]} if model.groups else {}
        for k, name in enumerate(model.class_names):
            rows.append(
                {**group, "latent_class": name, "item": "", "category": ""}
                | _summary(concentration, k, distribution(concentration), share)
                | _stated(model, model.priors.prevalence_origin[g])
                | {"constraints": "; ".join(_on_prevalences(model))}
            )
    items = {item.name: item for item in model.items}
    for weight in item_priors(posterior):
        item = items[weight.item]
        group = {"group": ""} if model.groups else {}
        for c, category in enumerate(item.categories):
            order = [c, 1 - c] if item.n_categories == 2 else range(item.n_categories)
            written = distribution([weight.parameters[at] for at in order])
            if weight.follows:
                summary = _drawn_summary(model, weight, c)
            else:
                summary = _summary(weight.parameters, c, written, weight.share)
            rows.append(
                {**group, "latent_class": weight.latent_class, "item": item.name}
                | {"category": category}
                | summary
                | _stated(model, weight.origin)
                | {"constraints": "; ".join(weight.constraints)}
            )
    return pd.DataFrame(rows)


def _pooled_rows(model: LatentClassModel, source: PooledPrevalence) -> list[dict[str, object]]:
    """Return rows of the units' mean; it weighs against the units, not against their cases."""
    assert model.groups is not None  # pooled units are groups
    mean = source.mean_prior
    return [
        {"group": f"mean over each {model.groups.name}", "latent_class": name}
        | {"item": "", "category": ""}
        | _summary(mean, k, distribution(mean), float("nan"))
        | _stated(model, model.priors.prevalence_origin[0])
        | {"constraints": ""}
        for k, name in enumerate(model.class_names)
    ]


def _on_prevalences(model: LatentClassModel) -> tuple[str, ...]:
    return tuple(dict.fromkeys(link.text for link in model.links if link.on_prevalences))


def _stated(model: LatentClassModel, origin: str) -> dict[str, object]:
    if origin == DEFAULT:
        return {"statement": "", "source": ""}
    return {"statement": origin, "source": model.statement_sources.get(origin, "")}


def _drawn_summary(model: LatentClassModel, weight: ItemPrior, category: int) -> dict[str, object]:
    """Return the figures of a prior that has no name, from draws; bounds aside, as elsewhere."""
    table, rng = model.table, np.random.default_rng(PRIOR_SEED)
    j = [item.name for item in model.items].index(weight.item)
    row = table.response_row[0, table.item_start[j] + category]
    k = model.class_names.index(weight.latent_class)
    elements = np.stack([draw_elements(table, rng) for _ in range(PRIOR_DRAWS)])
    drawn = np.zeros(PRIOR_DRAWS)
    for constant, multiplied in table.cells(int(row), k):
        drawn += constant * elements[:, list(multiplied)].prod(axis=1)
    lower, upper = np.quantile(drawn, [0.025, 0.975])
    return {
        "prior": "what the joint answers' prior leaves",
        "prior_mean": float(drawn.mean()),
        "prior_lower": float(lower),
        "prior_upper": float(upper),
        "prior_cases": weight.weight,
        "prior_share": weight.share,
    }


def _summary(parameters: Floats, at: int, written: str, share: float) -> dict[str, object]:
    from scipy.stats import beta

    total = float(parameters.sum())
    mine = float(parameters[at])
    if mine < total:
        lower, upper = np.asarray(beta.ppf([0.025, 0.975], mine, total - mine))
    else:  # a single class holds everyone: there is no distribution to take a quantile of
        lower, upper = 1.0, 1.0
    return {
        "prior": written,
        "prior_mean": mine / total,
        "prior_lower": float(lower),
        "prior_upper": float(upper),
        "prior_cases": total,
        "prior_share": share,
    }
