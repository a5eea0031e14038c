"""P(number of classes | answers): prior, table, words; refusals of the evidence in words."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.class_count.class_counts import (
    ClassCounts,
    _has_its_rivals,
    checked_prior,
    class_counts,
)
from bayeslca.assess.class_count.words import evidence_in_words, strength
from bayeslca.assess.comparison.compare import compare_class_counts
from bayeslca.assess.evidence.conditionals import FreeParameters, conditional_parameters
from bayeslca.assess.evidence.log_evidence import Evidence, log_evidence
from bayeslca.assess.evidence.model_evidence import Estimate
from bayeslca.assess.evidence.proposal import Proposal, labels_of
from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261212
QUICK: dict[str, Any] = {"draws": 300, "ess": 200, "r_hat": 1.05, "progress": False}
ITEMS = ["fees", "accounts", "fenced", "meets"]


@cache
def responses() -> Responses:
    rng = np.random.default_rng(SEED)
    managed = rng.random(80) < 0.4
    said = rng.random((80, len(ITEMS))) < np.where(managed, 0.9, 0.15)[:, None]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=ITEMS)
    frame.loc[3, "fees"] = None
    return Responses.from_frame(frame, items=ITEMS)


@cache
def fitted(classes: int) -> Posterior:
    return LatentClassModel(responses().items, classes).sample(responses(), seed=SEED, **QUICK)


@cache
def counts() -> ClassCounts:
    return class_counts({k: fitted(k) for k in (1, 2, 3)})


def changed(posterior: Posterior, **more: Any) -> Posterior:
    draws = replace(posterior.draws, **more)
    return replace(posterior, relabelled=replace(posterior.relabelled, draws=draws))


def test_probabilities_follow_from_evidences_and_prior() -> None:
    table = counts().table
    weights = np.exp(table["log_evidence"] - table["log_evidence"].max())
    assert table["probability"].to_numpy() == pytest.approx(weights / weights.sum())
    assert table["prior"].to_numpy() == pytest.approx([1 / 3] * 3)
    stated = class_counts({k: fitted(k) for k in (1, 2, 3)}, prior={1: 1, 2: 1, 3: 2}).table
    odds = stated["probability"] / table["probability"]
    assert odds[3] / odds[2] == pytest.approx(2.0)
    assert table.loc[2, "log_bayes_factor"] == pytest.approx(
        table.loc[2, "log_evidence"] - table.loc[1, "log_evidence"]
    )


def test_the_comparison_has_the_evidence_of_every_row() -> None:
    own = LatentClassModel(responses().items, ("a", "b"), ("a is where P(fees=yes) is highest",))
    found = compare_class_counts(
        responses(),
        [1, 2],
        fitted={k: fitted(k) for k in (1, 2)},
        own=own,
        seed=SEED,
        prior_on_count={1: 1.0, 2: 3.0},
        **QUICK,
    )
    table = found.table
    assert table["log_evidence"].notna().all()
    assert table["probability"].isna().tolist() == [False, False, True]
    assert table["probability"].iloc[:2].sum() == pytest.approx(1.0)
    assert found.class_counts is not None
    assert found.class_counts.table["prior"].tolist() == [0.25, 0.75]
    # A naming rule picks a label and changes nothing else: the evidence is that of two classes.
    gap = table["log_evidence"].iloc[2] - table["log_evidence"].iloc[1]
    assert abs(gap) < 4 * np.hypot(*table["log_evidence_mcse"].iloc[1:])
    assert "P(number | answers)" in repr(found)
    assert max(map(len, repr(found).splitlines())) <= 80
    assert found.verdict.endswith(found.class_counts.verdict)
    assert "<th>Log evidence</th>" in found._repr_html_()


def test_a_wrong_prior_is_refused_before_anything_is_sampled() -> None:
    with pytest.raises(ModelError, match="each of 1, 2"):
        compare_class_counts(responses(), [1, 2], prior_on_count={1: 1.0}, **QUICK)


def test_the_same_posteriors_give_the_same_evidence() -> None:
    again = class_counts({k: fitted(k) for k in (1, 2, 3)})
    assert again.table["log_evidence"].tolist() == counts().table["log_evidence"].tolist()


def test_labels_do_not_matter() -> None:
    posterior = fitted(3)
    free = FreeParameters(posterior.table, posterior.model.prevalence_source)
    group = posterior.model.symmetry.prior_group
    elements, prevalence = posterior.draws.elements[0, :20], posterior.draws.prevalence[0, :20]
    conditionals = conditional_parameters(
        free, posterior.unit_table, elements, prevalence, np.random.default_rng(SEED)
    )
    proposal = Proposal.flattened(free, labels_of(free, group), conditionals)
    values = free.joined(elements, prevalence)
    expected = proposal.log_density(values)
    assert group.permutations is not None
    assert len(group.permutations) == 6
    for member in group.permutations:
        moved = values[:, free.moved_by(member)]
        assert proposal.log_density(moved) == pytest.approx(expected, rel=1e-10)
        relabelled = Proposal.flattened(
            free, proposal.labels, conditionals[:, free.moved_by(member)]
        )
        assert relabelled.log_density(values) == pytest.approx(expected, rel=1e-10)


def test_summing_over_permutations_one_by_one_gives_the_same_density() -> None:
    posterior = fitted(3)
    free = FreeParameters(posterior.table, posterior.model.prevalence_source)
    group = posterior.model.symmetry.prior_group
    by_permanent = labels_of(free, group)
    one_by_one = labels_of(free, replace(group, factors=None))
    assert by_permanent.members is None
    assert one_by_one.members is not None
    rng = np.random.default_rng(SEED)
    components = free.prior + rng.gamma(2.0, 5.0, size=(7, free.prior.size))
    values = free.draw(components[:5], rng)
    densities = [
        Proposal(free, labels, components).log_density(values)
        for labels in (by_permanent, one_by_one)
    ]
    assert densities[0] == pytest.approx(densities[1], rel=1e-10)


def test_classes_are_drawn_for_every_case() -> None:
    posterior = fitted(2)
    free = FreeParameters(posterior.table, posterior.model.prevalence_source)
    found = conditional_parameters(
        free,
        posterior.unit_table,
        posterior.draws.elements[0, :9],
        posterior.draws.prevalence[0, :9],
        np.random.default_rng(SEED),
    )
    added = found - free.prior
    n = posterior.table.n_elements
    assert added[:, n:].sum(axis=1) == pytest.approx([80.0] * 9)
    assert added[:, :n].sum(axis=1) == pytest.approx([80.0 * 4 - 1] * 9)  # one answer is missing
    assert np.all(added >= 0)


@pytest.mark.parametrize(
    ("prior", "said"),
    [({1: 1.0, 2: 1.0}, "each of 1, 2, 3"), ({1: -1.0, 2: 1, 3: 1}, "0 or more"),
     ({1: 0, 2: 0, 3: 0}, "above 0"), ({1: np.nan, 2: 1, 3: 1}, "0 or more")],
)  # fmt: skip
def test_a_prior_that_does_not_fit_is_refused(prior: dict[int, float], said: str) -> None:
    with pytest.raises(ModelError, match=said):
        checked_prior(prior, [1, 2, 3])


def test_chains_that_disagree_have_no_reliable_evidence() -> None:
    posterior = fitted(2)
    far = posterior.draws.log_likelihood.copy()
    far[0] -= 30.0
    found = log_evidence(changed(posterior, log_likelihood=far))
    assert not found.reliable
    assert "chains disagree" in found.reason
    assert "not reliable" in repr(found)


def test_two_modes_within_reach_have_no_reliable_evidence() -> None:
    posterior = fitted(2)
    assert posterior.draws.starts is not None
    starts = replace(posterior.draws.starts, n_modes=2)  # and no chain was kept in the second
    found = log_evidence(changed(posterior, starts=starts))
    assert not found.reliable
    assert "2 modes" in found.reason


def test_few_draws_are_refused() -> None:
    posterior = fitted(2)
    d = posterior.draws
    few = changed(
        posterior,
        elements=d.elements[:, :10],
        prevalence=d.prevalence[:, :10],
        log_likelihood=d.log_likelihood[:, :10],
        log_prior=d.log_prior[:, :10],
    )
    found = log_evidence(few)
    assert not found.reliable
    assert "fewer than 100 draws" in found.reason
    assert np.isnan(found.log_evidence)


def test_one_reliable_number_among_several_has_no_probability() -> None:
    # It would be 1 whatever the answers say, as nothing competes with it.
    posterior = fitted(2)
    swapped = posterior.draws.prevalence[..., ::-1].copy()
    found = class_counts({1: fitted(1), 2: changed(posterior, prevalence=swapped)})
    assert found.table["reliable"].tolist() == [True, False]
    assert found.table["probability"].isna().all()


@pytest.mark.parametrize(
    ("counts", "reliable", "weighed"),
    [
        ([1, 2, 3], [1, 2, 3], True),
        ([1, 2, 3], [1, 2], False),  # three, beside the best, may be better still
        ([1, 2, 3, 4], [1, 2, 3], True),  # 2 is the best; four is not beside it
        ([1, 2], [1], False),
        ([1, 3], [1], False),
        ([2], [2], True),
        ([1, 2], [], False),
    ],
)
def test_the_best_number_needs_its_neighbours_to_be_weighed(
    counts: list[int], reliable: list[int], weighed: bool
) -> None:
    value = np.array([{1: -90.0, 2: -10.0, 3: -12.0, 4: -13.0}[k] for k in reliable])
    assert _has_its_rivals(counts, reliable, value) is weighed


@pytest.mark.parametrize(
    ("value", "why_not", "weighed"),
    [(-60.0, "", True), (-25.0, "", False), (-60.0, "the chains disagree", False)],
)
def test_a_neighbour_far_below_need_not_be_guarded(
    value: float, why_not: str, weighed: bool
) -> None:
    # Nothing guards the bridge of two classes, but it would have to be off by 20 nats or more.
    bridge = Estimate("bridge", value, 0.1, why_not)
    unguarded = Evidence(value, 0.1, False, "nothing guards it", (bridge,))
    found = _has_its_rivals([2, 3, 4], [3, 4], np.array([-10.0, -12.0]), {2: unguarded})
    assert found is weighed


def test_draws_from_somewhere_else_are_noticed() -> None:
    # Prevalences swapped against response probabilities: not the posterior's draws at all.
    posterior = fitted(2)
    swapped = posterior.draws.prevalence[..., ::-1].copy()
    found = log_evidence(changed(posterior, prevalence=swapped))
    assert not found.reliable


def row(probability: float, evidence: float, reliable: bool = True, reason: str = "") -> dict:
    return {
        "log_evidence": evidence if reliable else np.nan,
        "probability": probability if reliable else np.nan,
        "probability_mcse": 0.001,
        "reliable": reliable,
        "reason": reason,
    }


def test_words_for_a_settled_number() -> None:
    table = pd.DataFrame([row(0.001, -20.0), row(0.999, -10.0)], index=[1, 2])
    assert evidence_in_words(table, is_uniform=True, stated=False) == (
        "If one and two classes were equally probable before the answers, two classes have "
        "probability 0.999 after them. By the grades of Kass & Raftery 1995 the evidence for two "
        "classes over one class is very strong (Bayes factor 22,026). All this depends on uniform "
        "priors of probabilities and on equal prior weights of the numbers; other priors give "
        "other figures."
    )


def test_words_for_an_open_number_and_an_unreliable_one() -> None:
    table = pd.DataFrame(
        [row(0.6, -10.0), row(0.4, -10.4), row(0, 0, False, "the chains disagree")], index=[2, 3, 4]
    )
    said = evidence_in_words(table, is_uniform=False, stated=True)
    assert "as probable as stated" in said
    assert "two classes have probability 0.60 after them, three classes 0.40" in said
    assert "do not settle the number beyond these two" in said
    assert "over three classes is not worth more than a bare mention (Bayes factor 1.5)" in said
    assert "The evidence of four classes is not reliable (the chains disagree)" in said
    assert "the priors stated for probabilities" in said


@pytest.mark.parametrize(
    ("reliable", "words"),
    [
        ((1, 2, 3), "If one to three classes were"),
        ((1, 3), "If one and three classes were"),
        ((1, 2, 4), "If one, two and four classes were"),
    ],
)
def test_words_pass_over_no_number_without_evidence(reliable: tuple[int, ...], words: str) -> None:
    # A number whose evidence is not reliable is not among those that were compared.
    table = pd.DataFrame(
        [row(1 / len(reliable), -10.0, k in reliable, "two modes") for k in (1, 2, 3, 4)],
        index=[1, 2, 3, 4],
    )
    assert evidence_in_words(table, is_uniform=True, stated=False).startswith(words)


@pytest.mark.parametrize(
    ("factor", "words"),
    [(2.9, "positive"), (2.5, "not worth more than a bare mention"), (19.0, "positive"),
     (21.0, "strong"), (149.0, "very strong"), (0.04, "strong")],
)  # fmt: skip
def test_grades_of_kass_and_raftery(factor: float, words: str) -> None:
    # Kass & Raftery (1995), table of 2 ln B: 0-2, 2-6, 6-10, above 10 (from memory).
    assert strength(float(np.log(factor))) == words


@pytest.mark.parametrize(
    ("chances", "said"), [((0.1, 0.3, 0.6), True), ((0.1, 0.6, 0.3), False), ((0.2, 0.8), False)]
)
def test_the_largest_number_is_no_sign_of_so_many_kinds(
    chances: tuple[float, ...], said: bool
) -> None:
    table = pd.DataFrame(
        [row(chance, np.log(chance)) for chance in chances], index=range(1, len(chances) + 1)
    )
    words = evidence_in_words(table, is_uniform=True, stated=False)
    assert ("the largest number that was compared" in words) is said
