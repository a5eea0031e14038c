"""The model that maximum likelihood fits: priors play no part, and names are given afterwards."""

from __future__ import annotations

from dataclasses import replace
from math import factorial

from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.naming_links import naming_links
from bayeslca.model.statements.notation import parse
from bayeslca.model.statements.syntax import Prior


def likelihood_model(model: LatentClassModel) -> LatentClassModel:
    """Return a model with the same maximum, without priors, whose naming rules are not orders.

    While sampling, a naming rule beside a prior on a single class is an order, since the prior
    and the rule must be of the same class. The likelihood does not change when classes that
    nothing else tells apart change places, so the rules can be applied to any maximum: it is
    among those that keep the orders. Pooling is a prior too: without it each unit has prevalences
    of its own. Other models come back as they are.

    Parameters
    ----------
    model : LatentClassModel
    """
    if model.pooled:
        model = replace(model, pooled=False, spread_prior=(1.0, 1.0))
    if not naming_links(model):
        return model
    texts = tuple(text for text in model.statements if not isinstance(parse(text), Prior))
    try:
        free = replace(model, statements=texts, statement_sources={})
    except ModelError:
        return model  # without the priors some classes have no name
    all_alike = free.symmetry.prior_group.n_members >= factorial(model.n_classes)
    return free if all_alike else model
