"""The same model under other priors: half and twice as strong, uniform, Jeffreys.

"Half as strong" and "twice as strong" always mean Beta and Dirichlet parameters times 1/2 and 2.
What is scaled is the prior of each block: of probabilities that the model holds equal, the one
that they share; of pooled units, those of their mean and spread, the top level only. Bounds,
orders and naming rules stay. The alternative is written as statements, so that it is an ordinary
model, and every other part of the package reads it as such.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, near_names
from bayeslca.model.answered_together import AnsweredTogether
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.places import Place, ResponseVector
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.priors import DEFAULT
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.syntax import AllClasses, Dirichlet, Event, Name, Prior, Probability

if TYPE_CHECKING:
    from bayeslca.model.ties import Form

HALF, TWICE, UNIFORM, JEFFREYS = "half as strong", "twice as strong", "uniform", "Jeffreys"
_CHANGES: Mapping[str, Callable[[Floats], Floats]] = MappingProxyType(
    {
        HALF: lambda a: a / 2.0,
        TWICE: lambda a: a * 2.0,
        UNIFORM: np.ones_like,
        JEFFREYS: lambda a: np.full_like(a, 0.5),
    }
)
ALTERNATIVES = tuple(_CHANGES)
"""Names of the priors that a model can be fitted under again."""


class NoAlternative(Exception):
    """Why a model cannot be written under another prior, in words."""


@dataclass(frozen=True, repr=False)
class UnderOtherPriors(LatentClassModel):
    """A model under other priors, which may no longer tell its classes apart.

    Draws of it are named by those of the model that it was made from; see
    ``bayeslca.sampling.align``.
    """

    def _refuse_classes_not_told_apart(self) -> None:
        """Let be what only the priors told apart."""
        _ = self.table, self.prevalence_source


def check_alternatives(names: Sequence[str]) -> tuple[str, ...]:
    """Return the names of alternative priors, each once, or refuse an unknown one."""
    for name in names:
        if name not in ALTERNATIVES:
            msg = (
                f"there is no alternative prior {name!r}{near_names(name, ALTERNATIVES)}. "
                f"Take some of: {', '.join(ALTERNATIVES)}."
            )
            raise ModelError(msg)
    return tuple(dict.fromkeys(names))


def under_other_priors(model: LatentClassModel, name: str) -> UnderOtherPriors:
    """Return the model under another prior.

    Parameters
    ----------
    model : LatentClassModel
    name : str
        One of ``ALTERNATIVES``.

    Raises
    ------
    NoAlternative
        Where single answers of items with more than two are held equal: the scaled priors of
        their blocks are no prior that a statement could give.
    """
    change = _CHANGES[name]
    texts = {prior.text for prior in model.stated.priors}
    kept = [text for text in model.statements if text not in texts]
    stated = [*_prevalence_priors(model, change), *_response_priors(model, change)]
    same = {field.name: getattr(model, field.name) for field in fields(LatentClassModel)}
    if model.pooled and name != JEFFREYS:  # a spread has no Jeffreys prior
        same["spread_prior"] = tuple(change(np.array(model.spread_prior)).tolist())
    same["answered_together"] = tuple(_sets(model, change))
    sources = {t: source for t, source in model.statement_sources.items() if t in kept}
    return UnderOtherPriors(
        **{**same, "statements": (*kept, *stated), "statement_sources": sources}
    )


def distinct_alternatives(
    model: LatentClassModel, names: Sequence[str]
) -> tuple[dict[str, UnderOtherPriors], dict[str, str]]:
    """Return the models under those alternatives that change something, and why others are out.

    Returns
    -------
    dict of str to model
    dict of str to str
        Why an alternative is not among them: it is the model's own prior, another one's, or
        cannot be written.
    """
    found: dict[str, UnderOtherPriors] = {}
    left_out: dict[str, str] = {}
    for name in check_alternatives(names):
        try:
            other = under_other_priors(model, name)
        except NoAlternative as reason:
            left_out[name] = str(reason)
            continue
        if _same_priors(model, other):
            left_out[name] = "it is the study's own prior"
            continue
        twin = next((known for known, one in found.items() if _same_priors(one, other)), None)
        if twin is None:
            found[name] = other
        else:
            left_out[name] = f"it is the same as “{twin}” here"
    return found, left_out


def log_prior_ratio(
    model: LatentClassModel,
    other: LatentClassModel,
    elements: Floats,
    prevalence: Floats,
    concentration: Floats | None = None,
) -> Floats:
    """Return log density under another prior less that under the model's, up to a constant.

    Both priors are cut off at the same bounds; what divides each (the bounds' probability, the
    normalisers) is a constant, and is left out.

    Parameters
    ----------
    model, other : LatentClassModel
        Of the same blocks; ``other`` from `under_other_priors`.
    elements : ndarray, shape (..., E)
    prevalence : ndarray, shape (..., groups, K)
    concentration : ndarray, shape (..., K), optional
        Of pooled units.

    Returns
    -------
    ndarray, shape (...)
    """
    tiny = np.finfo(np.float64).tiny
    change = other.table.element_prior - model.table.element_prior
    out = np.log(np.maximum(elements, tiny)) @ change
    a, b = model.prevalence_source, other.prevalence_source
    if isinstance(a, PooledPrevalence) and isinstance(b, PooledPrevalence):
        assert concentration is not None  # draws of pooled units have it
        of_other, of_model = b.log_top(concentration), a.log_top(concentration)
        return np.asarray(out + sum(of_other) - sum(of_model))
    if isinstance(a, ConstrainedPrevalence) and isinstance(b, ConstrainedPrevalence):
        change = b.blocks.element_prior - a.blocks.element_prior
        return np.asarray(out + np.log(np.maximum(a.elements(prevalence), tiny)) @ change)
    change = b.concentration - a.concentration
    return np.asarray(out + (change * np.log(np.maximum(prevalence, tiny))).sum(axis=(-1, -2)))


def _same_priors(one: LatentClassModel, other: LatentClassModel) -> bool:
    pairs = [(one.table.element_prior, other.table.element_prior)]
    a, b = one.prevalence_source, other.prevalence_source
    if isinstance(a, ConstrainedPrevalence) and isinstance(b, ConstrainedPrevalence):
        pairs.append((a.blocks.element_prior, b.blocks.element_prior))
    elif one.n_classes > 1:
        pairs.append((a.concentration, b.concentration))
    if one.pooled:
        pairs.append((np.array(one.spread_prior), np.array(other.spread_prior)))
    return all(np.allclose(x, y) for x, y in pairs)


def _prevalence_priors(
    model: LatentClassModel, change: Callable[[Floats], Floats]
) -> Iterator[str]:
    """Yield statements that give every group's prevalences their other prior."""
    if model.n_classes == 1:
        return
    source, groups = model.prevalence_source, model.groups
    if isinstance(source, ConstrainedPrevalence):
        every = list(_of_tied_groups(source, change))
    else:
        every = [change(a) for a in source.concentration]
        if all(np.array_equal(a, every[0]) for a in every):
            every, groups = every[:1], None
    for g, a in enumerate(every):
        if np.all(a == 1.0):
            continue
        given = () if groups is None else (_equals(groups.name, groups.levels[g]),)
        if np.all(a == a[0]):
            yield to_text(Prior(Probability((AllClasses(),), given), Dirichlet((float(a[0]),))))
            continue
        events = tuple(Event(Name(name)) for name in model.class_names)
        yield to_text(Prior(Probability(events, given), Dirichlet(tuple(a.tolist()))))


def _of_tied_groups(
    source: ConstrainedPrevalence, change: Callable[[Floats], Floats]
) -> Iterator[Floats]:
    """Yield the other parameters (K,) of each group; of groups held equal, the first has them."""
    block = change(source.blocks.element_prior)
    stated: set[int] = set()
    for elements in source.element.tolist():
        mine = {e for e in elements if e >= 0}
        if mine & stated:
            yield np.ones(source.n_classes)
            continue
        stated |= mine
        times = [elements.count(e) for e in elements]
        yield np.array(
            [
                1.0 if e < 0 else (block[e] + n - 1.0) / n
                for e, n in zip(elements, times, strict=True)
            ]
        )


def _sets(
    model: LatentClassModel, change: Callable[[Floats], Floats]
) -> Iterator[AnsweredTogether]:
    """Yield sets of items that are answered together, the prior of their joint answers changed."""
    for one in model.item_sets:
        names = tuple(model.items[j].name for j in one.items)
        alike: dict[tuple[float, ...], list[int]] = {}
        for k in sorted(one.classes):
            alike.setdefault(
                tuple(change(np.asarray(one.priors[k], dtype=np.float64)).tolist()), []
            ).append(k)
        for prior, classes in alike.items():
            every = len(classes) == model.n_classes
            where = None if every else tuple(model.class_names[k] for k in classes)
            yield AnsweredTogether(names, where, prior[0] if len(set(prior)) == 1 else prior)


def _in_a_set(model: LatentClassModel, item: int, latent_class: int, group: int) -> bool:
    """Tell whether an item's prior in a class is that of its set's joint answers."""
    for one in model.item_sets:
        if item in one.items and latent_class in one.classes:
            stated = model.response_prior_origin(group, item, latent_class) != DEFAULT
            if item == one.first and not stated and _is_tied(model, group, item, latent_class):
                msg = "an item that is answered together with another is held equal to a third"
                raise NoAlternative(msg)
            return item != one.first or not stated
    return False


def _is_tied(model: LatentClassModel, group: int, item: int, latent_class: int) -> bool:
    tied = model.response_assumptions.tied
    form = tied.forms[Place(ResponseVector(group, item, latent_class), 0)]
    return any(tied.reasons[int(model.table.element_block[e])] for e in form.elements)


def _response_priors(model: LatentClassModel, change: Callable[[Floats], Floats]) -> Iterator[str]:
    """Yield statements that give every item's answers their other prior, in each class."""
    stated: set[int] = set()
    for j, item in enumerate(model.items):
        groups = range(model.n_response_groups if j in model.free_items else 1)
        wanted: dict[tuple[int, int], Floats] = {}
        for g in groups:
            for k in range(model.n_classes):
                if _in_a_set(model, j, k, g):
                    continue
                a = _other_prior(model, ResponseVector(g, j, k), change, stated)
                if a is not None:
                    wanted[g, k] = a
        if not wanted:
            continue
        first = next(iter(wanted.values()))
        everywhere = len(wanted) == len(groups) * model.n_classes
        if everywhere and all(np.array_equal(a, first) for a in wanted.values()):
            in_sets = any(one.first == j for one in model.item_sets)
            if in_sets or not np.all(first == 1.0):
                yield _response_prior(item.name, item.categories, (AllClasses(),), first)
            continue
        first_in = {k for one in model.item_sets if one.first == j for k in one.classes}
        for (g, k), a in wanted.items():
            if np.all(a == 1.0) and k not in first_in:
                continue
            given: list[Event | AllClasses] = [Event(Name(model.class_names[k]))]
            if len(groups) > 1 and model.groups is not None:
                given.append(_equals(model.groups.name, model.groups.levels[g]))
            yield _response_prior(item.name, item.categories, tuple(given), a)


def _other_prior(
    model: LatentClassModel,
    vector: ResponseVector,
    change: Callable[[Floats], Floats],
    stated: set[int],
) -> Floats | None:
    """Return the other prior of an item's answers in a class.

    None where there is none to state: all are known, or another place has stated it already.
    """
    tied = model.response_assumptions.tied
    forms = [tied.forms[Place(vector, c)] for c in range(model.items[vector.item].n_categories)]
    block_of = model.table.element_block
    elements = [e for form in forms for e in form.elements]
    if not elements:
        return None
    shared = any(tied.reasons[int(block_of[e])] for e in elements)
    if shared and set(elements) & stated:
        return None
    if any(len(form.elements) > 1 for form in forms):
        msg = (
            "single answers of items with more than two are held equal, and a prior on the shared "
            "ones alone cannot be stated"
        )
        raise NoAlternative(msg)
    block = change(model.table.element_prior)
    if shared:
        stated |= set(elements)
    return np.array([_share(form, forms, block) for form in forms])


def _share(form: Form, forms: Sequence[Form], block: Floats) -> float:
    """Return the parameter of a place: equal places of one vector give sum a - (m - 1)."""
    if not form.elements:
        return 1.0  # known: its parameter is not used
    times = sum(other.elements == form.elements for other in forms)
    return float((block[form.elements[0]] + times - 1.0) / times)


def _response_prior(
    item: str, categories: Sequence[str], given: tuple[Event | AllClasses, ...], a: Floats
) -> str:
    events = (_equals(item, categories[0]), *(Event(Name(name)) for name in categories[1:]))
    return to_text(Prior(Probability(events, given), Dirichlet(tuple(a.tolist()))))


def _equals(name: str, value: str) -> Event:
    return Event(Name(name), "=", (Name(value),))
