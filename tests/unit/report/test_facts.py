"""Facts that the text rests on, each worked out a second way."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from matplotlib.figure import Figure as Drawing
from scipy.stats import beta, rankdata

from bayeslca.report.facts import Facts
from bayeslca.report.placement import Placement, placement
from bayeslca.report.plots import plot_ranks
from bayeslca.report.priors import priors_table
from bayeslca.report.sections import reviewer

GUIDELINES = Path(__file__).parents[2] / "references" / "reporting_guidelines.toml"


def test_overall_share_weighs_groups_by_their_cases(mixed: Any, made: Any) -> None:
    units = mixed.responses.units
    n_north = units.count[units.group == 0].sum()
    n_south = units.count[units.group == 1].sum()
    assert n_north != n_south
    draws = mixed.prevalence_draws
    both = (n_north * draws[:, :, 0] + n_south * draws[:, :, 1]) / (n_north + n_south)
    for k, share in enumerate(Facts(made.content(mixed)).overall):
        assert share.median == pytest.approx(np.median(both[:, :, k]))
        assert share.lower == pytest.approx(np.quantile(both[:, :, k], 0.025))


def test_without_groups_overall_is_the_table(small: Any, made: Any) -> None:
    shares = Facts(made.content(small)).overall
    np.testing.assert_allclose([s.median for s in shares], small.prevalence()["median"])


def test_placement_is_bayes_rule_averaged_over_draws(small: Any) -> None:
    placed = placement(small)
    items, units = small.model.items, small.responses.units
    probability = small.response_probability_draws[:, :, 0]
    for unit in range(0, units.n_units, 10):
        joint = small.prevalence_draws[:, :, 0].copy()
        for j in range(len(items)):
            if units.pattern[unit, j] >= 0:
                joint *= probability[:, :, :, 2 * j + units.pattern[unit, j]]
        mean = (joint / joint.sum(axis=2, keepdims=True)).mean(axis=(0, 1))
        assert placed.highest[unit] == pytest.approx(mean.max())
        assert placed.modal[unit] == mean.argmax()


def test_placement_counts_cases_not_patterns() -> None:
    placed = Placement(
        highest=np.array([0.95, 0.7, 0.5]),
        modal=np.array([0, 1, 1]),
        count=np.array([10, 4, 6]),
        n_classes=3,
    )
    assert placed.n_cases == 20
    assert placed.mean_highest == pytest.approx((9.5 + 2.8 + 3.0) / 20)
    assert placed.n_at_least(0.7) == 14
    np.testing.assert_array_equal(placed.placed_in(), [10, 10, 0])


def test_ranks_agree_with_scipy(small: Any) -> None:
    ax = plot_ranks(small, ax=Drawing().subplots())
    ranks = rankdata(small.draws.log_likelihood).reshape(4, 100)
    for chain in range(4):
        expected, _ = np.histogram(ranks[chain] - 1, bins=20, range=(0, 400))
        drawn = [bar.get_height() for bar in ax.containers[chain]]
        np.testing.assert_allclose(drawn, np.minimum(expected / 10, 0.98))


def test_priors_are_those_of_the_model_with_their_statement(made: Any) -> None:
    stated = "P(item_1=yes | managed) ~ Beta(9, 2)"
    rules = (stated, "lapsed is where P(item_2=yes) is lowest")
    posterior = made.posterior(made.items(3), ("managed", "lapsed"), statements=rules)
    table = priors_table(posterior)
    row = table[(table["item"] == "item_1") & (table["latent_class"] == "managed")]
    row = row[row["category"] == "yes"].iloc[0]
    assert row["prior"] == "Beta(9, 2)"
    assert row["statement"] == stated
    assert row["prior_mean"] == pytest.approx(9 / 11)
    assert row["prior_lower"] == pytest.approx(beta(9, 2).ppf(0.025))
    others = table[table["statement"] == ""]
    assert set(others["prior"]) == {"Beta(1, 1)"}


def test_share_of_the_prior_is_its_weight_over_all(made: Any) -> None:
    posterior = made.posterior(made.items(2), 1, n_cases=8)
    answered = posterior.responses.units
    n = answered.count[answered.pattern[:, 0] >= 0].sum()
    row = priors_table(posterior).query("item == 'item_1'").iloc[0]
    assert row["prior_share"] == pytest.approx(2 / (2 + n))


@pytest.mark.parametrize("diagnostic", [False, True])
def test_guideline_items_are_those_of_the_guidelines(
    small: Any, made: Any, diagnostic: bool
) -> None:
    known = {
        name: {item[0] for item in content["items"]}
        for name, content in tomllib.loads(GUIDELINES.read_text(encoding="utf-8")).items()
    }
    sheets = {"BARG": "barg", "WAMBS": "wambs", "STARD-BLCM": "stard_blcm"}
    content = made.content(small, diagnostic=diagnostic)
    section = reviewer.reviewer_section(Facts(content), {"bayeslca": "0"})
    (questions,) = [block for block in section.blocks if block.kind == "questions"]
    cited: dict[str, set[str]] = {name: set() for name in sheets}
    for entry in questions.entries:
        for part in filter(None, entry.guidelines.split("; ")):
            name, numbers = part.split(" ", 1)
            for number in numbers.split(", "):
                first, _, last = number.partition("-")
                cited[name] |= _between(first, last) if last else {first}
    for name, sheet in sheets.items():
        assert cited[name] <= known[sheet]
    assert bool(cited["STARD-BLCM"]) == diagnostic


def _between(first: str, last: str) -> set[str]:
    """Return the items of a run: 5A-5C, or 7-9."""
    stem = re.match(r"\d*(?=[A-Z]$)", first)
    if stem:
        return {f"{stem[0]}{chr(c)}" for c in range(ord(first[-1]), ord(last[-1]) + 1)}
    return {str(number) for number in range(int(first), int(last) + 1)}


def test_wrong_names_of_models_never_count_as_tied(small: Any, made: Any) -> None:
    comparison = made.comparison(best=3)
    comparison.table["tied"] = pd.Series(
        [False, False, True, False, False, False], index=range(1, 7)
    )
    facts = Facts(made.content(small, comparison=comparison))
    assert facts.tied == (3,)
    assert not facts.outside_tie
