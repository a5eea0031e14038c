"""Statements on probabilities that are sums of joint answers: refused by name.

Of a set of items that are answered together only the first one's probabilities are a block of
their own; those of the others are sums of products, for which no exact sampler is written.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from bayeslca.exceptions import StatementError
from bayeslca.model.places import Link, ResponseVector
from bayeslca.model.statements.resolved import ResponsePrior

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def refuse_priors_on_sums(model: LatentClassModel) -> None:
    """Refuse priors on items that are not the first of their set, and second ones on the first.

    Raises
    ------
    StatementError
    """
    for prior in model.stated.priors:
        if isinstance(prior, ResponsePrior):
            every = range(model.n_classes)
            classes = every if prior.latent_class is None else (prior.latent_class,)
            _refuse(model, prior.item, classes, prior.text, "a prior")
            _refuse_second(model, prior.item, classes, prior.text)


def _refuse_second(model: LatentClassModel, item: int, classes: Sequence[int], text: str) -> None:
    """Refuse a prior on the first item where the set's own prior has a number for each answer."""
    for one in model.item_sets:
        for k in one.stated.intersection(classes):
            if item == one.first and len(set(one.priors[k])) > 1:
                name = model.items[item].name
                msg = (
                    f"'{name}' has a prior already: that of the joint answers of its set "
                    "(answered_together), with a number for each of them"
                )
                remedy = "Keep one of the two."
                raise StatementError(msg, statement=text, position=0, remedy=remedy)


def refuse_links_on_sums(model: LatentClassModel, links: Sequence[Link]) -> None:
    """Refuse constraints, and naming rules kept as orders, on items not the first of their set.

    Raises
    ------
    StatementError
    """
    for link in links:
        for place in link.places:
            if isinstance(place.vector, ResponseVector):
                at = place.vector
                _refuse(model, at.item, (at.latent_class,), link.text, "a constraint")


def _refuse(
    model: LatentClassModel, item: int, classes: Sequence[int], text: str, what: str
) -> None:
    for one in model.item_sets:
        if item not in one.others or not one.classes.intersection(classes):
            continue
        name, first = model.items[item].name, model.items[one.first].name
        where = model.class_names[min(one.classes.intersection(classes))]
        in_class = "every class" if model.exploratory else f"class {where}"
        msg = (
            f"in {in_class} '{name}' is answered together with '{first}', so that its "
            f"probabilities are sums of joint answers: no exact sampler is written for {what} on "
            "such a sum"
        )
        others = [name, *(model.items[j].name for j in one.items if j != item)]
        instead = "test the statement as a hypothesis of the posterior"
        if what == "a prior":
            instead = "give the joint answers a prior (AnsweredTogether(..., prior=[...]))"
        remedy = (
            f"Put '{name}' first, answered_together=[[{', '.join(repr(n) for n in others)}]] "
            f"(what is stated on the first item holds exactly), or {instead}, or take the class "
            "out of the set."
        )
        raise StatementError(msg, statement=text, position=0, remedy=remedy)
