"""A model whose naming rules are orders: the same posterior, written without rules.

Where statements speak of single classes, the model keeps its rules as orders already. Where all
classes are exchangeable but for the rules, the draws that the rules have named are draws of the
model in which each rule is a set of orders: "managed is where P(fees=yes) is highest" is
P(fees=yes | managed) > P(fees=yes | b) for the classes b that are left.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from math import factorial

from bayeslca.exceptions import BayesLCAError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.naming import classes_named
from bayeslca.model.naming_links import naming_links
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.resolved import ResolvedNamingRule
from bayeslca.model.statements.syntax import Event, Name, Probability, Relation


def without_rules(model: LatentClassModel) -> LatentClassModel | None:
    """Return the model with orders in the place of its naming rules; None where there are none.

    That is where the rules leave classes unnamed, and where a rule compares a mean over groups or
    a sum of answers.
    """
    rules = model.naming_rules
    if not rules or naming_links(model):
        return model
    k = model.n_classes
    group = model.symmetry.prior_group
    if group.n_members != factorial(k) or len(classes_named(rules, k)) < k:
        return None
    left, orders = list(range(k)), []
    for rule in rules:
        left.remove(rule.latent_class)
        if left and not _is_single(rule, model):
            return None
        orders += [_order(rule, other, model) for other in left]
    texts = [text for text in model.statements if text not in {rule.text for rule in rules}]
    try:
        return replace(model, statements=(*texts, *orders), statement_sources={})
    except BayesLCAError:
        return None


@dataclass(frozen=True, repr=False)
class UnnamedModel(LatentClassModel):
    """A model whose class names mean nothing: what naming rules are applied to."""

    def _refuse_classes_not_told_apart(self) -> None:
        """Let exchangeable classes be."""


def without_names(model: LatentClassModel) -> UnnamedModel:
    """Return the model without its naming rules, its classes exchangeable."""
    same = {field.name: getattr(model, field.name) for field in fields(LatentClassModel)}
    rules = {rule.text for rule in model.naming_rules}
    texts = tuple(text for text in model.statements if text not in rules)
    return UnnamedModel(**{**same, "statements": texts, "statement_sources": {}})


def _is_single(rule: ResolvedNamingRule, model: LatentClassModel) -> bool:
    if rule.answer is None:
        return model.n_groups == 1
    item, categories = rule.answer
    return len(categories) == 1 and item not in model.free_items


def _order(rule: ResolvedNamingRule, other: int, model: LatentClassModel) -> str:
    one, two = _compared(rule, rule.latent_class, model), _compared(rule, other, model)
    return to_text(Relation((one, two), (">" if rule.extreme == "highest" else "<",)))


def _compared(rule: ResolvedNamingRule, latent_class: int, model: LatentClassModel) -> Probability:
    of_class = Event(Name(model.class_names[latent_class]))
    if rule.answer is None:
        return Probability((of_class,))
    item, (category,) = rule.answer
    spec = model.items[item]
    answer = Event(Name(spec.name), "=", (Name(spec.categories[category]),))
    return Probability((answer,), (of_class,))
