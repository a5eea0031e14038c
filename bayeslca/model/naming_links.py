"""Naming rules as orders: where priors or constraints already treat classes differently.

While all classes are exchangeable, a rule only says which sampled class gets which name, and it
is applied draw by draw. Where something stated is about a class of that name, the names have a
meaning before any rule: renaming would carry one class's prior to another. There the rule is an
order between probabilities, kept while sampling, so that prior and rule hold of the same class.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from bayeslca.exceptions import StatementError
from bayeslca.model.places import Link, Place, PrevalenceVector, ResponseVector, Vector
from bayeslca.model.statements.resolved import MembershipTerm, ResolvedNamingRule, ResponsePrior

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def naming_links(model: LatentClassModel) -> tuple[Link, ...]:
    """Return the orders that a model's naming rules keep; none while classes are exchangeable.

    Raises
    ------
    StatementError
        When a rule cannot be kept as an order between single probabilities.
    """
    if not _speaks_of_classes(model):
        return ()
    return tuple(_orders(model))


def _speaks_of_classes(model: LatentClassModel) -> bool:
    """Whether a prior, a constraint or a set of items is about some classes, not all alike."""
    for one in model.item_sets:
        if len(one.classes) < model.n_classes or len(set(one.priors.values())) > 1:
            return True
    for prior in model.stated.priors:
        if isinstance(prior, ResponsePrior):
            if prior.latent_class is not None:
                return True
        elif len(set(prior.concentration)) > 1:
            return True
    terms = (term for one in model.stated.constraints for term in one.terms.values())
    return any(isinstance(t, MembershipTerm) or t.latent_class is not None for t in terms)


def _orders(model: LatentClassModel) -> Iterator[Link]:
    """Yield each rule's class above (or below) every class that earlier rules left."""
    left = list(range(model.n_classes))
    for rule in model.naming_rules:
        left.remove(rule.latent_class)
        for other in left:
            one, two = (_place(model, rule, k) for k in (rule.latent_class, other))
            above, below = (one, two) if _is_high(model, rule) else (two, one)
            yield Link(above, ">", below, rule.text)


def _place(model: LatentClassModel, rule: ResolvedNamingRule, latent_class: int) -> Place:
    if rule.answer is None:
        if model.n_groups > 1:
            raise _refused(rule, "the prevalence of every group cannot be ordered by one rule")
        return Place(PrevalenceVector(0), latent_class)
    item, categories = rule.answer
    if item in model.free_items:
        raise _refused(rule, f"'{model.items[item].name}' has other probabilities in each group")
    single = _single(categories, model.items[item].n_categories)
    if single is None:
        raise _refused(rule, "several answers together cannot be ordered")
    vector: Vector = ResponseVector(0, item, latent_class)
    return Place(vector, single)


def _is_high(model: LatentClassModel, rule: ResolvedNamingRule) -> bool:
    """Whether the rule's class stands above the others in the place that is ordered."""
    is_complement = rule.answer is not None and len(rule.answer[1]) > 1
    return (rule.extreme == "highest") != is_complement


def _single(categories: Sequence[int], n_categories: int) -> int | None:
    """Return the one category, or the one that is left out."""
    if len(categories) == 1:
        return categories[0]
    others = [c for c in range(n_categories) if c not in categories]
    return others[0] if len(others) == 1 else None


def _refused(rule: ResolvedNamingRule, because: str) -> StatementError:
    return StatementError(
        f"this rule stands beside statements about single classes, and {because}",
        statement=rule.text,
        position=0,
        remedy="Name the classes by a single answer that all groups share, or leave the rule out "
        "where the other statements tell the classes apart.",
    )
