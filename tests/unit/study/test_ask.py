"""Answers to statements that are put to a fit."""

from __future__ import annotations

from pathlib import Path

import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses
from bayeslca.study.ask import _answer


@pytest.fixture
def posterior(folder: Path) -> Posterior:
    items = ["fees", "accounts", "meets"]
    responses = Responses.read(folder / "answers.csv", items=items, group="district")
    model = LatentClassModel(
        responses.items,
        ("managed", "lapsed"),
        statements=("managed is where P(fees=yes) is highest",),
        groups=responses.groups,
    )
    return model.sample(responses, seed=1, draws=100, ess=50, r_hat=1.1, progress=False)


def test_a_quantity_of_every_group_has_a_sentence_for_each(posterior: Posterior) -> None:
    said = _answer(posterior, "P(managed | fees=yes)")
    by_group = [
        repr(posterior.quantity(f"P(managed | fees=yes, district={level})"))
        for level in ("hill", "plain")
    ]
    flat = " ".join(said.split())
    for level, alone in zip(("hill", "plain"), by_group, strict=True):
        numbers = alone.split(" is ", 1)[1]
        assert f"{level}: P(managed | fees=yes) is {numbers}" in flat
    assert max(map(len, said.splitlines())) <= 80


def test_a_quantity_of_every_class_names_the_classes(posterior: Posterior) -> None:
    said = _answer(posterior, "P(fees=yes | .)")
    assert said.startswith("managed: P(fees=yes | .) is ")
    assert "\nlapsed: P(fees=yes | .) is " in said


def test_a_single_quantity_has_no_place_before_it(posterior: Posterior) -> None:
    assert _answer(posterior, "P(fees=yes | managed)").startswith("P(fees=yes | managed) is ")
