"""Each thing that can be wrong with sampling, made on purpose, beside a case where it is not."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose

from bayeslca.assess.convergence.diagnosis import Diagnostics, diagnose
from bayeslca.assess.convergence.modes import largest_r_hat
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import relabel
from bayeslca.sampling.starting_points import StartingPoints

SEED = 20261203
CHAINS, DRAWS, N = 4, 400, 300
ITEMS = tuple("abcdef")
HIGH, LOW = (0.9, 0.8, 0.85, 0.9, 0.8, 0.75), (0.1, 0.2, 0.15, 0.1, 0.25, 0.2)


def answers(prevalence: Any, yes: Any, n: int = N) -> Responses:
    """Responses of cases drawn from the given classes."""
    rng = np.random.default_rng(SEED)
    z = rng.choice(len(prevalence), p=prevalence, size=n)
    said = rng.random((n, len(ITEMS))) < np.asarray(yes)[z]
    frame = pd.DataFrame(np.where(said, "yes", "no"), columns=list(ITEMS))
    return Responses.from_frame(frame, items=list(ITEMS))


@dataclass
class Maker:
    """Makes a posterior from invented draws around given values, chain by chain."""

    responses: Responses = field(default_factory=lambda: answers((0.6, 0.4), (HIGH, LOW)))
    prevalence: Any = (0.6, 0.4)
    yes: Any = (HIGH, LOW)
    classes: Any = 2
    statements: tuple[str, ...] = ()
    chains: int = CHAINS
    length: int = DRAWS
    more: dict[str, Any] = field(default_factory=dict)

    def draws(self) -> tuple[np.ndarray, np.ndarray]:
        """Independent draws: P(yes) (chain, draw, K, item) and prevalence (chain, draw, K)."""
        rng = np.random.default_rng(SEED + 1)
        shape = (self.chains, self.length)
        a = 120 * np.asarray(self.yes, dtype=float)
        yes = rng.beta(a, 120 - a, size=(*shape, *a.shape))
        prevalence = rng.dirichlet(N * np.asarray(self.prevalence, dtype=float), size=shape)
        return yes, prevalence

    def posterior(
        self, yes: np.ndarray | None = None, prevalence: np.ndarray | None = None
    ) -> Posterior:
        invented = self.draws()
        yes = invented[0] if yes is None else yes
        prevalence = invented[1] if prevalence is None else prevalence
        model = LatentClassModel(self.responses.items, self.classes, statements=self.statements)
        at = [item.categories.index("yes") for item in model.items]
        pairs = np.stack([1 - yes, yes], axis=-1)
        for j, position in enumerate(at):
            if position == 0:
                pairs[..., j, :] = pairs[..., j, ::-1]
        # Blocks stand item by item, and within an item class by class.
        elements = pairs.swapaxes(2, 3).reshape(*yes.shape[:2], -1)
        units = compile_units(model.table, model.units(self.responses))
        rows = prevalence[:, :, None, :]
        by_unit = log_unit_likelihood(model.table, units, elements, rows)
        draws = Draws(
            elements=elements,
            prevalence=rows,
            log_likelihood=by_unit @ units.count,
            log_prior=np.zeros(yes.shape[:2]),
            **self.more,
        )
        return Posterior(model, self.responses, relabel(model, units, draws))


def kinds(found: Diagnostics) -> set[str]:
    return {finding.kind for finding in found.findings}


def swapped(values: np.ndarray, chains: slice) -> np.ndarray:
    out = values.copy()
    out[chains] = out[chains][:, :, ::-1]
    return out


def test_chains_that_agree_are_trusted() -> None:
    found = diagnose(Maker().posterior())
    assert found.trustworthy
    assert kinds(found) == set()
    assert found.verdict.startswith("The chains agree: largest R-hat 1.0")
    assert repr(found).startswith("The chains agree")


def test_table_holds_what_arviz_computes() -> None:
    from arviz_stats.base import array_stats

    posterior = Maker().posterior()
    table = diagnose(posterior).table
    assert list(table["quantity"].unique()) == [
        "log likelihood", "prevalence", "separation", "response probability",
    ]  # fmt: skip
    assert len(table) == 1 + 2 + 1 + 2 * 6 * 2
    lp = posterior.draws.log_likelihood
    row = table.iloc[0]
    assert row["r_hat"] == pytest.approx(float(array_stats.rhat(lp)))
    assert row["ess_bulk"] == pytest.approx(float(array_stats.ess(lp)))
    tail = float(array_stats.ess(lp, method="tail", prob=(0.05, 0.95)))
    assert row["ess_tail"] == pytest.approx(tail)
    assert row["mcse"] == pytest.approx(float(array_stats.mcse(lp, method="mean")))
    wanted = table.query(
        "quantity == 'response probability' and latent_class == '2' and item == 'c'"
    )
    draws = posterior.response_probability_draws[:, :, 0, 1, 5]
    last = wanted[wanted["category"] == posterior.model.items[2].categories[1]].iloc[0]
    assert last["r_hat"] == pytest.approx(float(array_stats.rhat(draws)))
    assert last["mean"] == pytest.approx(draws.mean())


def test_label_switching_alone_is_harmless() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    half = slice(0, 2)
    found = diagnose(maker.posterior(swapped(yes, half), swapped(prevalence, half)))
    assert kinds(found) == {"label_switching"}
    assert found.trustworthy
    assert_allclose(found.table["r_hat"].max(), 1.0, atol=0.01)


def test_chains_in_different_modes_are_not_to_be_trusted() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    # Two chains split the cases by other items: no naming of the classes makes them agree.
    other = (HIGH[:3] + LOW[3:], LOW[:3] + HIGH[3:])
    yes[2:] = Maker(yes=other).draws()[0][2:]
    found = diagnose(maker.posterior(yes, prevalence))
    assert not found.trustworthy
    assert {"chains_in_different_modes", "not_converged"} <= kinds(found)
    assert found.verdict.startswith("Not to be trusted: the chains are in different modes")
    assert found.findings[0].level == "problem"


def test_a_chain_that_lags_is_not_another_mode() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    yes[0, :, 0, 0] = 0.9 * yes[0, :, 0, 0]
    found = diagnose(maker.posterior(yes, prevalence))
    assert "not_converged" in kinds(found)
    assert "chains_in_different_modes" not in kinds(found)
    assert "P(a=yes | 1)" in next(f for f in found.findings if f.kind == "not_converged").about


def test_a_slowly_moving_quantity_has_too_few_effective_draws() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    # All chains swing together four times: they agree, but hold few independent draws.
    swing = np.sin(2 * np.pi * 4 * np.arange(DRAWS) / DRAWS)
    yes[:, :, 0, 0] = 0.8 + 0.1 * swing + 0.001 * yes[:, :, 0, 0]
    found = diagnose(maker.posterior(yes, prevalence))
    assert "not_converged" in kinds(found)
    assert found.table["r_hat"].max() < 1.01
    assert "effective sample size down to" in found.verdict


def three_classes(third: float, yes: Any = (HIGH, LOW, (0.5,) * 6)) -> Maker:
    responses = answers((0.6, 0.4), (HIGH, LOW))
    shares = (0.6 * (1 - third), 0.4 * (1 - third), third)
    return Maker(responses, prevalence=shares, yes=yes, classes=3)


def test_an_empty_class_is_named_and_does_not_hold_the_verdict() -> None:
    maker = three_classes(1 / N)
    yes, prevalence = maker.draws()
    for chain in range(CHAINS):  # its answers differ from chain to chain
        yes[chain, :, 2] = 0.2 + 0.2 * chain + 0.01 * yes[chain, :, 2]
    prevalence = prevalence * (1, 1, 0.3) + (0.7 * prevalence[..., 2:] * (1, 0, 0))
    found = diagnose(maker.posterior(yes, prevalence))
    empty = next(finding for finding in found.findings if finding.kind == "empty_class")
    assert empty.about == ("3",)
    assert found.trustworthy
    assert "Class 3 is empty" in found.verdict
    rows = found.table[found.table["latent_class"] == "3"]
    assert set(rows["note"]) == {"empty class"}
    assert rows["r_hat"].max() > 1.5  # reported all the same


def test_a_small_class_is_not_an_empty_one() -> None:
    wide = (HIGH, LOW, HIGH[:3] + LOW[3:])
    maker = Maker(answers((0.5, 0.38, 0.12), wide), (0.5, 0.38, 0.12), wide, 3)
    found = diagnose(maker.posterior())
    assert not {"empty_class", "duplicate_classes"} & kinds(found)
    assert set(found.table["note"]) == {""}


def test_twin_classes_are_named() -> None:
    maker = three_classes(0.3, (HIGH, LOW, HIGH))
    found = diagnose(maker.posterior())
    twins = next(finding for finding in found.findings if finding.kind == "duplicate_classes")
    assert len(twins.about) == 2
    told = set("123") - set(twins.about)
    apart = found.table[found.table["latent_class"].isin(list(told))]
    assert set(apart["note"]) == {""}
    assert set(found.table[found.table["latent_class"].isin(twins.about)]["note"]) == {
        "not told apart"
    }
    assert "are not told apart" in found.verdict


NAMED = ("P(a=yes | high) ~ Beta(9, 2)",)


def test_names_that_are_not_settled_are_in_the_verdict() -> None:
    maker = Maker(classes=("high", "low"), statements=NAMED)
    yes, prevalence = maker.draws()
    wrong = slice(0, DRAWS // 20)  # a twentieth of every chain under the other labelling
    yes[:, wrong] = yes[:, wrong, ::-1]
    prevalence[:, wrong] = prevalence[:, wrong, ::-1]
    found = diagnose(maker.posterior(yes, prevalence))
    assert "names_not_settled" in kinds(found)
    assert "settled" in found.verdict


def test_settled_names_are_not_mentioned() -> None:
    found = diagnose(Maker(classes=("high", "low"), statements=NAMED).posterior())
    assert kinds(found) == set()
    assert found.trustworthy


def test_divergences_of_nuts_are_a_problem() -> None:
    diverging = np.zeros((CHAINS, DRAWS))
    fine = Maker(more={"sampler": "nuts", "statistics": {"diverging": diverging}})
    assert diagnose(fine.posterior()).trustworthy
    assert kinds(diagnose(fine.posterior())) == set()
    diverging[1, 7:10] = 1
    found = diagnose(fine.posterior())
    assert not found.trustworthy
    assert "3 of 1,600 NUTS draws diverged" in found.verdict


def test_nuts_cannot_weigh_labellings_that_only_priors_tell_apart() -> None:
    nuts = {"sampler": "nuts", "statistics": {"diverging": np.zeros((CHAINS, DRAWS))}}
    named = Maker(classes=("high", "low"), statements=NAMED, more=nuts)
    assert "labellings_not_visited" in kinds(diagnose(named.posterior()))
    assert "labellings_not_visited" not in kinds(diagnose(Maker(more=nuts).posterior()))


def test_the_limit_is_a_warning_where_everything_has_converged() -> None:
    found = diagnose(Maker(more={"limit_reached": True, "sweeps": 9000}).posterior())
    assert found.trustworthy
    assert kinds(found) == {"limit_reached"}
    assert "limit of sweeps was reached (9,000 per chain)" in found.verdict


def test_constants_are_not_flagged() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    yes[:, :, 1, 3] = 0.1
    found = diagnose(maker.posterior(yes, prevalence))
    assert found.trustworthy
    constant = found.table[found.table["note"] == "constant"]
    assert set(constant["item"]) == {"d"}
    assert len(constant) == 2


def test_chains_that_stand_still_apart_are_flagged() -> None:
    maker = Maker()
    yes, prevalence = maker.draws()
    yes[:, :, 1, 3] = np.array([0.1, 0.12, 0.1, 0.12])[:, None]
    found = diagnose(maker.posterior(yes, prevalence))
    assert not found.trustworthy
    assert "not_converged" in kinds(found)
    assert largest_r_hat(yes[:, :, 1, 3]) == np.inf
    assert largest_r_hat(np.ones((4, 50, 2))) == 1.0


def starting_points(modes: tuple[int, ...], gap: float) -> StartingPoints:
    mode = np.array(modes)
    kept = [m for m in range(mode.max() + 1) if m * gap <= 10.0]
    return StartingPoints(
        log_posterior=-500.0 - gap * mode,
        mode=mode,
        n_modes=len(kept),
        kept=np.array([int(np.flatnonzero(mode == m)[0]) for m in kept]),
        dropped=tuple(m for m in range(mode.max() + 1) if m not in kept),
        best=-500.0,
    )


def test_several_modes_within_reach_have_unknown_weights() -> None:
    found = diagnose(Maker(more={"starts": starting_points((0, 0, 1), 4.0)}).posterior())
    assert not found.trustworthy
    assert kinds(found) == {"several_modes"}
    assert "several modes, weights unknown" in found.verdict


def test_modes_far_below_are_dropped_and_said() -> None:
    found = diagnose(Maker(more={"starts": starting_points((0, 0, 1), 14.0)}).posterior())
    assert found.trustworthy
    assert kinds(found) == {"modes_dropped"}
    assert "2 of 3 short runs reached the best mode" in found.verdict
    assert "14.0 nats lower and was dropped" in found.verdict
    one = diagnose(Maker(more={"starts": starting_points((0, 0, 0), 4.0)}).posterior())
    assert kinds(one) == set()


def test_a_single_chain_cannot_show_modes() -> None:
    found = diagnose(Maker(chains=1, length=CHAINS * DRAWS).posterior())
    assert kinds(found) == {"one_chain"}
    assert not found.trustworthy
    assert found.verdict.startswith("Not to be trusted: with a single chain there is no R-hat")


def test_a_model_that_the_answers_cannot_determine_is_said() -> None:
    # Goodman (1974): two classes of two yes/no items, 5 parameters for 3 free cells.
    maker = Maker(responses=replace(answers((0.6, 0.4), (HIGH, LOW)).with_items(["a", "b"])))
    maker = replace(maker, yes=(HIGH[:2], LOW[:2]))
    found = diagnose(maker.posterior())
    assert "not_identified" in kinds(found)
    assert found.trustworthy  # the sampling is: the rest is what the priors say
    assert "cannot determine all of the model" in found.verdict


def test_names_are_escaped_in_a_notebook() -> None:
    found = diagnose(Maker(more={"limit_reached": True}).posterior())
    evil = replace(found.findings[0], message="class <script>alert(1)</script>")
    page = replace(found, findings=(evil,))._repr_html_()
    assert "<script>" not in page
    assert "&lt;script&gt;" in page
