"""Fitting: what is handed over, what is watched, what is refused."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest

from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior import fit as fits
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses


def test_a_seed_gives_the_same_posterior_on_any_number_of_threads(posterior: Posterior) -> None:
    again = posterior.model.sample(
        posterior.responses, seed=11, draws=150, ess=100, r_hat=1.05, progress=False, threads=1
    )
    np.testing.assert_array_equal(again.draws.elements, posterior.draws.elements)
    np.testing.assert_array_equal(again.prevalence_draws, posterior.prevalence_draws)
    other = posterior.model.sample(
        posterior.responses, seed=12, draws=150, ess=100, r_hat=1.05, progress=False
    )
    assert not np.array_equal(other.draws.elements, posterior.draws.elements)


def test_a_model_without_groups_pools_them(posterior: Posterior) -> None:
    assert posterior.responses.groups is not None
    assert posterior.prevalence_draws.shape[2] == 1
    assert posterior.units.count.sum() == 88
    log_likelihood = posterior.log_likelihood_draws @ posterior.units.count
    np.testing.assert_allclose(log_likelihood, posterior.draws.log_likelihood)


def test_groups_have_prevalences_of_their_own(grouped: Posterior) -> None:
    assert grouped.prevalence_draws.shape == (4, 150, 3, 2)
    log_likelihood = grouped.log_likelihood_draws @ grouped.units.count
    np.testing.assert_allclose(log_likelihood, grouped.draws.log_likelihood)


def test_reported_quantities_hold_the_run(posterior: Posterior) -> None:
    model, draws = posterior.model, posterior.draws
    found = fits.reported_quantities(model, posterior.unit_table, draws)
    # 2 prevalences; per class 1 + 1 + 2 + 1 free response probabilities
    assert len(found) == 2 + 2 * 5
    np.testing.assert_array_equal(found["prevalence of 2 in group 1"], draws.prevalence[..., 0, 1])


def test_classes_that_are_not_told_apart_do_not_hold_the_run(responses: Responses) -> None:
    # One kind of case, two classes.
    frame = pd.DataFrame({name: ["yes", "no"] * 20 for name in ("a", "b")})
    frame["b"] = np.repeat(["yes", "no"], 20)
    alike = Responses.from_frame(frame, items=["a", "b"])
    found = LatentClassModel(alike.items, 4).sample(
        alike, seed=1, draws=100, ess=50, r_hat=1.1, max_sweeps=4000, progress=False
    )
    watched = fits.reported_quantities(found.model, found.unit_table, found.draws)
    assert len(watched) < 4 + 4 * 2


def test_unknown_samplers_and_answers_of_others(posterior: Posterior) -> None:
    with pytest.raises(SamplingError, match=r"no sampler 'gibs' \(near names: 'gibbs'\)"):
        posterior.model.sample(posterior.responses, sampler="gibs")
    with pytest.raises(ModelError, match="the model has the item 'type'"):
        posterior.model.sample(posterior.responses.with_items(["fees", "accounts", "meets"]))


def test_nuts_is_handed_what_was_asked_for(
    posterior: Posterior, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: dict[str, object] = {}

    def stand_in(model: object, responses: Responses, **options: object) -> object:
        asked.update(options, responses=responses)
        return posterior.draws

    monkeypatch.setattr("bayeslca.sampling.nuts.draw_with_nuts", stand_in)
    found = posterior.model.sample(
        posterior.responses, sampler="nuts", seed=5, chains=2, draws=70, progress=False
    )
    assert found.prevalence_draws.shape == posterior.prevalence_draws.shape
    assert (asked["seed"], asked["chains"], asked["draws"]) == (5, 2, 70)
    assert asked["max_sweeps"] == 20_000


def test_what_was_relabelled_for_the_stopping_rule_is_the_result(posterior: Posterior) -> None:
    watch = fits._Watch(posterior.model, posterior.unit_table)
    back = np.argsort(posterior.relabelled.permutations, axis=-1)
    sampled = dataclasses.replace(
        posterior.draws, prevalence=np.take_along_axis(posterior.prevalence_draws, back, axis=-1)
    )
    fresh = watch.relabelled(sampled)
    watch(sampled)
    kept = watch.relabelled(sampled)
    np.testing.assert_array_equal(kept.draws.elements, fresh.draws.elements)
    np.testing.assert_array_equal(kept.draws.prevalence, fresh.draws.prevalence)
    moved = dataclasses.replace(sampled, elements=sampled.elements[:, ::-1])
    assert not np.array_equal(watch.relabelled(moved).draws.elements, kept.draws.elements)
