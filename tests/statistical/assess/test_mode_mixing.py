"""Modes that chains do not leave, mixed by their evidence: against a model without the modes.

The order of an item that hardly tells the classes apart keeps one labelling of each draw of the
free model. Its two labellings are modes of their own, and the free model says how probable each is.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.convergence import mode_mixing
from bayeslca.assess.convergence.mode_mixing import _chosen
from bayeslca.assess.evidence.log_evidence import log_evidence
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261206
ITEMS = ["radio", "fees", "accounts", "fenced", "meets"]


@cache
def responses() -> Responses:
    rng = np.random.default_rng(SEED)
    managed = rng.random(120) < 0.5
    chance = np.where(managed[:, None], [0.55, 0.9, 0.9, 0.85, 0.9], [0.5, 0.1, 0.15, 0.2, 0.1])
    said = rng.random(chance.shape) < chance
    return Responses.from_frame(
        pd.DataFrame(np.where(said, "yes", "no"), columns=ITEMS), items=ITEMS
    )


@cache
def free() -> Posterior:
    model = LatentClassModel(
        responses().items, ("high", "low"), ("high is where P(fees=yes) is highest",)
    )
    return model.sample(responses(), seed=SEED, ess=3000, progress=False)


@cache
def ordered() -> Posterior:
    model = LatentClassModel(
        responses().items, ("high", "low"), ("P(radio=yes | high) > P(radio=yes | low)",)
    )
    return model.sample(responses(), seed=SEED, max_sweeps=8_000, progress=False)


def share_in_order() -> tuple[float, float]:
    """Return P(radio order as stated, where high collects fees | answers), and its error."""
    draws = free().response_probability_draws  # (chain, draw, group, class, response)
    holds = (draws[:, :, 0, 0, 1] > draws[:, :, 0, 1, 1]).astype(float)
    return float(holds.mean()), float(holds.std() / np.sqrt(2000.0))


def test_each_mode_has_its_share() -> None:
    expected, error = share_in_order()
    assert 0.55 < expected < 0.98
    starts = ordered().draws.starts
    assert starts is not None
    assert starts.n_modes == 2
    shares, errors = starts.shares, starts.share_errors
    assert sum(shares) == pytest.approx(1.0)
    assert max(errors) < 0.02
    assert abs(max(shares) - expected) < 4 * np.hypot(errors[0], error)
    mixed = ordered().draws.statistics["mode"]
    assert np.mean(mixed == 0) == pytest.approx(shares[0], abs=0.01)


def test_the_draws_are_those_of_the_whole_posterior() -> None:
    share, error = share_in_order()
    mean = free().response_probability_draws.mean(axis=(0, 1))[0, :, 3]  # P(fees=yes | class)
    expected = share * mean[0] + (1 - share) * mean[1]
    found = float(ordered().response_probability_draws[:, :, 0, 0, 3].mean())
    starts = ordered().draws.starts
    assert starts is not None
    tolerance = 4 * np.hypot(starts.share_errors[0], error) + 0.01
    assert abs(found - expected) < tolerance * abs(mean[0] - mean[1])


def test_the_verdict_says_the_shares_and_is_to_be_trusted() -> None:
    diagnostics = ordered().diagnostics()
    assert "modes_mixed" in {one.kind for one in diagnostics.findings}
    assert "by their evidence these hold" in diagnostics.verdict
    assert diagnostics.trustworthy, diagnostics.verdict


def test_the_evidence_is_that_of_both_modes() -> None:
    found, whole = log_evidence(ordered()), log_evidence(free())
    assert found.reliable, found.reason
    assert len(found.modes) == 2
    # The order only picks a label: the constrained model's evidence is the free one's.
    assert abs(found.log_evidence - whole.log_evidence) < 4 * np.hypot(found.mcse, whole.mcse)


def test_modes_whose_shares_are_vague_are_not_mixed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(mode_mixing, "MOST_SHARE_ERROR", 0.0)
    posterior = ordered().model.sample(
        responses(), seed=SEED, max_sweeps=4_000, draws=500, progress=False
    )
    starts = posterior.draws.starts
    assert starts is not None
    assert not starts.shares
    assert "known to within" in starts.why_unweighed
    diagnostics = posterior.diagnostics()
    assert not diagnostics.trustworthy
    assert "several modes, weights unknown (their shares are known" in diagnostics.verdict


def test_a_saved_posterior_still_knows_its_modes(tmp_path) -> None:
    ordered().save(tmp_path / "fit.nc")
    again = Posterior.load(tmp_path / "fit.nc")
    assert again.draws.starts is not None
    assert again.draws.starts.shares == ordered().draws.starts.shares
    assert replace(again.draws.starts).why_unweighed == ""
    assert log_evidence(again).log_evidence == log_evidence(ordered()).log_evidence


@pytest.mark.parametrize("shares", [(0.7, 0.3), (0.25, 0.75), (0.9996, 0.0004)])
def test_no_draw_is_taken_twice_and_chains_are_alike(shares: tuple[float, float]) -> None:
    choice = _chosen(((0, 1, 2), (3,)), np.array(shares), 1000, np.random.default_rng(1))
    taken = choice.chain * 1000 + choice.draw
    assert np.unique(taken).size == taken.size
    assert np.mean(choice.mode == 0) == pytest.approx(
        shares[0] if shares[1] > 0.001 else 1.0, abs=0.005
    )
    assert np.ptp((choice.mode == 0).sum(axis=1)) == 0
    assert set(choice.chain[choice.mode == 0].tolist()) == {0, 1, 2}
    assert set(choice.chain[choice.mode == 1].tolist()) <= {3}
    for row in range(4):  # a stretch of each chain, in its order
        for mode in (0, 1):
            mine = taken[row][choice.mode[row] == mode]
            assert np.all(np.diff(mine) > 0)
