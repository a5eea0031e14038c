"""Classes of a refit called as those of the original."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import membership
from bayeslca.responses.item import Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.align import align
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled

ITEMS = tuple(Item(f"item_{j}", ("no", "yes")) for j in range(5))
SHAPE = (2, 30)


def made(model: LatentClassModel) -> tuple[Responses, Draws]:
    """Three clear classes, and draws around their true values."""
    rng = np.random.default_rng(5)
    yes = np.array([[0.95] * 5, [0.05] * 5, [0.95, 0.95, 0.05, 0.05, 0.05]])
    z = rng.choice(3, 150, p=[0.5, 0.3, 0.2])
    codes = (rng.random((150, 5)) < yes[z]).astype(np.int16)
    responses = Responses(ITEMS, codes, np.ones(150, dtype=np.int64))
    blocks = [
        rng.dirichlet(60 * np.array([1 - yes[k, j], yes[k, j]]) + 1, size=SHAPE)
        for j in range(5)
        for k in range(3)
    ]
    draws = Draws(
        elements=np.concatenate(blocks, axis=-1),
        prevalence=rng.dirichlet([50, 30, 20], size=SHAPE)[:, :, None],
        log_likelihood=np.zeros(SHAPE),
        log_prior=np.zeros(SHAPE),
    )
    return responses, draws


def test_draws_in_any_order_are_put_back() -> None:
    model = LatentClassModel(ITEMS, 3)
    responses, draws = made(model)
    units = compile_units(model.table, model.units(responses))
    reference = membership(model.table, units, draws.elements, draws.prevalence).mean(axis=(0, 1))
    order = np.array([2, 0, 1])
    by_block = draws.elements.reshape(*SHAPE, 5, 3, 2)
    mixed = replace(
        draws,
        elements=by_block[:, :, :, order].reshape(draws.elements.shape),
        prevalence=draws.prevalence[..., order],
    )
    same = np.broadcast_to(np.arange(3), (*SHAPE, 1, 3))
    found = align(model, units, Relabelled(mixed, same), reference)
    assert np.array_equal(found.draws.elements, draws.elements)
    assert np.array_equal(found.draws.prevalence, draws.prevalence)
    assert (found.permutations == np.array([1, 2, 0])).all()


def test_classes_that_the_model_tells_apart_are_left_alone() -> None:
    rules = (
        "P(item_0=yes | a) ~ Beta(9, 1)", "P(item_0=yes | b) ~ Beta(1, 9)",
        "P(item_1=yes | b) ~ Beta(1, 5)",
    )  # fmt: skip
    model = LatentClassModel(ITEMS, ("a", "b", "c"), rules)
    responses, draws = made(model)
    units = compile_units(model.table, model.units(responses))
    reference = membership(model.table, units, draws.elements, draws.prevalence).mean(axis=(0, 1))
    same = np.broadcast_to(np.arange(3), (*SHAPE, 1, 3))
    given = Relabelled(draws, same)
    assert align(model, units, given, reference[:, [1, 0, 2]]) is given
