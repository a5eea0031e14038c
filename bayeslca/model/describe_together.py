"""Items that are answered together, in words: where they are, and what their prior says."""

from __future__ import annotations

import textwrap
from collections.abc import Collection, Sequence
from itertools import product
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.model.answered_together import ItemSet
from bayeslca.model.pair_measures import direction
from bayeslca.model.prior_weights import PriorWeight
from bayeslca.model.priors import DEFAULT

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel

WIDTH = 80
PRIOR_DRAWS = 40_000
MOST_LISTED = 9
"""Up to so many joint answers are listed beside their numbers."""


def together_in_words(model: LatentClassModel, weights: Sequence[PriorWeight] = ()) -> list[str]:
    """Return the lines that say which items are answered together; none where there are none.

    Parameters
    ----------
    model : LatentClassModel
    weights : sequence of PriorWeight
        With what the sets' priors weigh against the answers.
    """
    if not model.item_sets:
        return []
    out = ["What is answered together within a class"]
    for one in model.item_sets:
        out += textwrap.wrap(
            set_in_words(model, one, weights),
            WIDTH,
            initial_indent="  ",
            subsequent_indent="    ",
        )
    return [*out, ""]


def set_in_words(model: LatentClassModel, one: ItemSet, weights: Sequence[PriorWeight] = ()) -> str:
    """Return what a model assumes of one set."""
    names = [model.items[j].name for j in one.items]
    text = (
        f"{_and(names)} in {_where(model, one.classes)}: one probability for each of their "
        f"{one.n_joint} joint answers{_elsewhere(model, one)}."
    )
    alike: dict[tuple[tuple[float, ...], str], list[int]] = {}
    for k in sorted(one.classes):
        origin = model.response_prior_origin(0, one.first, k)
        alike.setdefault((one.priors[k], origin), []).append(k)
    for (_, origin), classes in alike.items():
        where = f" in {_where(model, classes)}" if len(alike) > 1 else ""
        text += f" Prior{where}: {_prior_in_words(model, one, classes[0], origin)}"
        text += f"; it counts for {_number(one.weight(classes[0]))} cases in the class"
        text += f"{_against(model, names, classes, weights)}."
    return text


def _against(
    model: LatentClassModel,
    names: Sequence[str],
    classes: Sequence[int],
    weights: Sequence[PriorWeight],
) -> str:
    """Return what the answers weigh that the prior stands against."""
    mine = {model.class_names[k] for k in classes}
    expected = [
        weight.expected
        for weight in weights
        if weight.together and weight.items == tuple(names) and mine & {*weight.classes}
        if weight.expected is not None
    ]
    if not expected:
        return ""
    low, high = round(min(expected)), round(max(expected))
    about = f"{low:,}" if low == high else f"{low:,} to {high:,}"
    return f", against about {about} expected"


def _prior_in_words(model: LatentClassModel, one: ItemSet, latent_class: int, origin: str) -> str:
    """Return what the prior of a set's joint answers says in a class, without a full stop."""
    prior = one.priors[latent_class]
    written = ", ".join(_number(a) for a in prior)
    if len(set(prior)) == 1:
        written = f"{_number(prior[0])}, ..., {_number(prior[0])}"
    default = "" if latent_class in one.stated else ", the default"
    if origin != DEFAULT:
        first = model.items[one.first].name
        text = f"{origin}; given the answer to {first}, that part of Dirichlet({written}){default}"
    else:
        margins = [_margin(model, one, j, latent_class) for j in one.items]
        alone = f"each item alone {margins[0]}"
        if len(set(margins)) > 1:
            each = zip(one.items, margins, strict=True)
            alone = "; ".join(f"{model.items[j].name} alone {margin}" for j, margin in each)
        text = f"Dirichlet({written}){default}{_order(model, one, prior)}, which gives {alone}"
    if all(size == 2 for size in one.sizes[:2]) and len(one.sizes) == 2:
        low, high = odds_ratio_before(model, one, latent_class)
        text += (
            f", and an odds ratio between {low:.2g} and {high:.2g} with a probability of one half"
        )
    return text


def _order(model: LatentClassModel, one: ItemSet, prior: Sequence[float]) -> str:
    """Return which joint answer each number belongs to, where they differ."""
    if len(set(prior)) == 1 or one.n_joint > MOST_LISTED:
        return ""
    categories = [model.items[j].categories for j in one.items]
    return f" on {', '.join(' and '.join(answers) for answers in product(*categories))}"


def told_apart_in_words(model: LatentClassModel) -> list[str]:
    """Return how sets of items treat classes differently, a line each."""
    out = []
    for one in model.item_sets:
        names = _and([model.items[j].name for j in one.items])
        if len(one.classes) < model.n_classes:
            out.append(f"{names} are answered together in {_where(model, one.classes)} only")
        elif len(set(one.priors.values())) > 1:
            out.append(f"the priors of the joint answers to {names}")
    return out


def odds_ratio_before(
    model: LatentClassModel, one: ItemSet, latent_class: int
) -> tuple[float, float]:
    """Return the quartiles of the odds ratio of two yes/no items under their prior.

    It does not depend on the first item's own prior: only on the others' given its answers.
    """
    rng = np.random.default_rng(0)
    a = np.asarray([one.given(latent_class, answer) for answer in range(2)])
    logs = np.log(rng.standard_gamma(a + 1.0, size=(PRIOR_DRAWS, 2, 2)))
    logs += np.log1p(-rng.random((PRIOR_DRAWS, 2, 2))) / a  # gammas of small parameters underflow
    signs = [np.asarray([-1, 1] if direction(model.items[j]) < 0 else [1, -1]) for j in one.items]
    log_ratio = np.einsum("nab,a,b->n", logs, *signs)
    low, high = np.exp(np.quantile(log_ratio, [0.25, 0.75]))
    return float(low), float(high)


def _margin(model: LatentClassModel, one: ItemSet, item: int, latent_class: int) -> str:
    spec, a = model.items[item], one.margin(item, latent_class)
    uniform = " (uniform)" if all(abs(value - 1.0) < 1e-9 for value in a) else ""
    if len(set(a)) == 1 or len(a) > 2:
        name = "Beta" if len(a) == 2 else "Dirichlet"
        return f"{name}({', '.join(_number(value) for value in a)}){uniform}"
    yes = spec.categories.index(spec.yes or spec.categories[-1])
    return f"Beta({_number(a[yes])}, {_number(a[1 - yes])}) of {spec.categories[yes]}"


def _where(model: LatentClassModel, classes: Collection[int]) -> str:
    if len(classes) == model.n_classes:
        return "every class"
    chosen = [model.class_names[k] for k in sorted(classes)]
    return f"class {chosen[0]}" if len(chosen) == 1 else f"classes {_and(chosen)}"


def _elsewhere(model: LatentClassModel, one: ItemSet) -> str:
    return "; independent in the others" if len(one.classes) < model.n_classes else ""


def _number(value: float) -> str:
    return f"{round(value, 3):g}"


def _and(names: Sequence[str]) -> str:
    return f"{', '.join(names[:-1])} and {names[-1]}"
