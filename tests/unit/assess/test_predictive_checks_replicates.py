"""Replicates and discrepancies at known parameters, against closed forms and SciPy."""

from __future__ import annotations

from itertools import product
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from scipy import stats

from bayeslca.assess.fit.replicates import POWER, Replicates, replicates
from bayeslca.assess.fit.strata import strata_of
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses

YES = Item("fees", ("no", "yes"), yes="yes")
MEETS = Item("meets", ("no", "yes"))
TYPE = Item("type", ("pump", "well", "spring"))
SCALE = Item("trust", ("low", "middle", "high"), ordered=True)
LAMBDAS = {"g2": 0.0, "x2": 1.0, "power_divergence": POWER}


def at_known(
    model: Any,
    responses: Responses,
    elements: Any,
    prevalence: Any,
    n: int = 2000,
    seed: int = 5,
) -> Replicates:
    """Replicates of a posterior that knows its parameters, so that they are independent."""
    elements, prevalence = np.asarray(elements, float), np.asarray(prevalence, float)
    draws = SimpleNamespace(
        elements=np.broadcast_to(elements, (4, n // 4, elements.size)),
        prevalence=np.broadcast_to(prevalence, (4, n // 4, *prevalence.shape)),
        n_chains=4,
        n_draws=n // 4,
    )
    stand_in: Any = SimpleNamespace(
        model=model, responses=responses, table=model.table, draws=draws
    )
    return replicates(stand_in, n, seed)


def answers(items: tuple[Item, ...], codes: Any, groups: Any = None, **more: Any) -> Responses:
    codes = np.asarray(codes, dtype=np.int16)
    counts = more.pop("counts", np.ones(len(codes), dtype=np.int64))
    if groups is not None:
        more["groups"] = Groups("district", ("north", "south"))
        more["group_codes"] = np.asarray(groups, dtype=np.int32)
    return Responses(items, codes, np.asarray(counts), **more)


def close_to(values: Any, mean: float, variance: float) -> bool:
    """Tell whether mean and variance lie within 5 standard errors of what they should be."""
    n = len(values)
    near = abs(values.mean() - mean) < 5 * np.sqrt(variance / n)
    fourth = np.mean((values - values.mean()) ** 4)
    return bool(near and abs(values.var() - variance) < 5 * np.sqrt(fourth / n))


def test_margins_of_one_class_are_binomial() -> None:
    model = LatentClassModel((YES, MEETS), 1)
    found = at_known(model, answers(model.items, [[0, 1]] * 40), [0.7, 0.3, 0.1, 0.9], [[1.0]])
    for column, p in ((1, 0.3), (3, 0.9)):
        counts = found.counts.replicated[:, -1, column]
        assert close_to(counts, 40 * p, 40 * p * (1 - p))
        seen = np.bincount(counts.astype(int), minlength=41)
        expected = stats.binom.pmf(np.arange(41), 40, p) * len(counts)
        keep = expected > 5
        grouped = [np.append(x[keep], x[~keep].sum()) for x in (seen, expected)]
        assert stats.chisquare(*grouped).pvalue > 1e-4
    assert close_to(found.pair.replicated[:, -1, 0], 0.0, 1.0)


def test_each_replicate_draws_classes_anew_from_the_prevalence() -> None:
    model = LatentClassModel((YES, MEETS), 2)
    elements = [0.9, 0.1, 0.2, 0.8, 0.8, 0.2, 0.3, 0.7]  # item by item, class by class
    # The data are all "no, no": kept classes would be the first for nearly every case
    found = at_known(model, answers(model.items, [[0, 0]] * 50), elements, [[0.25, 0.75]])
    p_yes = 0.25 * 0.1 + 0.75 * 0.8
    assert close_to(found.counts.replicated[:, -1, 1], 50 * p_yes, 50 * p_yes * (1 - p_yes))
    p_two = 0.25 * 0.1 * 0.2 + 0.75 * 0.8 * 0.7
    score_two = found.scores.replicated[:, -1, 2]
    assert close_to(score_two, 50 * p_two, 50 * p_two * (1 - p_two))


def test_expected_sum_scores_are_those_of_all_patterns() -> None:
    """Every pattern enumerated here, by group and missing pattern; sums are folded there."""
    items = (YES, SCALE, TYPE)  # an unordered item adds nothing
    model = LatentClassModel(items, 2, groups=Groups("district", ("north", "south")))
    rng = np.random.default_rng(9)
    blocks = [rng.dirichlet(np.ones(r)) for r in (2, 2, 3, 3, 3, 3)]
    prevalence = np.array([[0.3, 0.7], [0.9, 0.1]])
    codes = [[0, 0, 0]] * 5 + [[1, -1, 2]] * 3 + [[-1, 2, 1]] * 4 + [[1, 1, 1]] * 6
    responses = answers(items, codes, [0] * 12 + [1] * 6)
    found = at_known(model, responses, np.concatenate(blocks), prevalence, n=400)
    direct = np.zeros((3, 4))
    for row, code in enumerate(codes):
        g = int(row >= 12)
        for k, fees, trust in product(range(2), range(2), range(3)):
            p = prevalence[g, k] * blocks[k][fees] * blocks[2 + k][trust]
            points = (fees if code[0] >= 0 else 0) + (trust if code[1] >= 0 else 0)
            direct[[g, 2], points] += p
    np.testing.assert_allclose(found.expected_scores[0], direct)
    drawn = found.scores.replicated.mean(axis=0)
    assert np.all(np.abs(drawn - direct) < 5 * np.sqrt(direct / 400) + 1e-9)


def test_masks_and_groups_are_kept() -> None:
    model = LatentClassModel((YES, TYPE, MEETS), 2, groups=Groups("district", ("north", "south")))
    codes = [[0, -1, 1]] * 7 + [[1, 2, -1]] * 5 + [[-1, 0, -1]] * 3 + [[1, 1, 1]] * 4 + [[-1] * 3]
    group = [0] * 7 + [1] * 5 + [0] * 3 + [1] * 4 + [0]
    responses = answers(model.items, codes, group)
    rng = np.random.default_rng(2)
    elements = np.concatenate([rng.dirichlet(np.ones(r)) for r in (2, 2, 3, 3, 2, 2)])
    found = at_known(model, responses, elements, [[1.0, 0.0], [0.2, 0.8]], n=200)
    per_item = np.add.reduceat(found.counts.replicated, [0, 2, 5], axis=2)
    assert np.all(per_item[:, 0] == [7, 3, 7])
    assert np.all(per_item[:, 1] == [9, 9, 4])
    assert np.all(per_item[:, 2] == [16, 12, 11])
    assert np.all(found.scores.replicated[:, 0].sum(axis=-1) == 10)
    # north has class 1 only, south mostly class 2
    p = {g: found.counts.replicated[:, g, 1].mean() / n for g, n in ((0, 7), (1, 9))}
    yes = elements[1], 0.2 * elements[1] + 0.8 * elements[3]
    for g, n in ((0, 7), (1, 9)):
        assert abs(p[g] - yes[g]) < 5 * np.sqrt(yes[g] * (1 - yes[g]) / (200 * n))


def test_groups_that_the_model_pools_are_still_looked_at() -> None:
    model = LatentClassModel((YES, MEETS), 1)
    responses = answers(model.items, [[1, 1]] * 30 + [[0, 0]] * 30, [0] * 30 + [1] * 30)
    found = at_known(model, responses, [0.5, 0.5, 0.5, 0.5], [[1.0]], n=400)
    assert found.strata.group_names == ("north", "south")
    assert found.margin.observed[0, :, 1] == pytest.approx([30**0.5, -(30**0.5), 0.0])
    assert np.all(found.g2.replicated[:, 0] < found.g2.observed[:, 0])


@pytest.mark.parametrize("name", LAMBDAS)
def test_discrepancies_are_those_of_scipy_on_the_whole_table(name: str) -> None:
    """All 12 cells enumerated here (some of them empty); none is there."""
    items = (YES, MEETS, TYPE)
    model = LatentClassModel(items, 2)
    rng = np.random.default_rng(4)
    codes = rng.integers([2, 2, 2], size=(30, 3))  # never "spring": empty cells
    elements = np.concatenate([rng.dirichlet(np.ones(r)) for r in (2, 2, 2, 2, 3, 3)])
    found = at_known(model, answers(items, codes), elements, [[0.4, 0.6]], n=4)
    cells = list(product(range(2), range(2), range(3)))
    observed = [int((codes == cell).all(axis=1).sum()) for cell in cells]
    expected = [30 * cell_probability(elements, cell) for cell in cells]
    assert 0 in observed
    direct = stats.power_divergence(observed, expected, lambda_=LAMBDAS[name]).statistic
    assert getattr(found, name).observed[:, -1] == pytest.approx(direct)


def cell_probability(elements: np.ndarray, cell: tuple[int, ...]) -> float:
    fees, meets, kind = elements[:4].reshape(2, 2), elements[4:8].reshape(2, 2), elements[8:]
    kind = kind.reshape(2, 3)
    weights = np.array([0.4, 0.6])
    return float(np.sum(weights * fees[:, cell[0]] * meets[:, cell[1]] * kind[:, cell[2]]))


@pytest.mark.parametrize("name", LAMBDAS)
def test_replicates_have_the_discrepancies_of_their_own_tables(name: str) -> None:
    items = (YES, TYPE)
    model = LatentClassModel(items, 2)
    elements = np.array([0.9, 0.1, 0.3, 0.7, 0.6, 0.3, 0.1, 0.1, 0.2, 0.7])
    found = at_known(model, answers(items, [[0, 0]] * 25), elements, [[0.3, 0.7]], n=40)
    fees, kind = elements[:4].reshape(2, 2), elements[4:].reshape(2, 3)
    expected = 25 * np.einsum("k,ka,kb->ab", [0.3, 0.7], fees, kind).ravel()
    # With two items the joint answers are the whole table
    tables = joint_counts(model, items, elements)
    for draw in range(40):
        direct = stats.power_divergence(tables[draw], expected, lambda_=LAMBDAS[name]).statistic
        assert getattr(found, name).replicated[draw, -1] == pytest.approx(direct)
    assert np.array_equal(found.n_patterns.replicated[:, -1], (tables > 0).sum(axis=1))


def joint_counts(model: LatentClassModel, items: tuple[Item, ...], elements: Any) -> Any:
    """Joint answers of the replicates of the test above, taken where they are counted."""
    from bayeslca.assess.fit import replicates as room

    kept: list[Any] = []

    class Kept(room._Measure):
        def _replicate(self, *given: Any) -> Any:
            out = super()._replicate(*given)
            kept.append(out[2][:, 0])
            return out

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(room, "_Measure", Kept)
        at_known(model, answers(items, [[0, 0]] * 25), elements, [[0.3, 0.7]], n=40)
    return np.concatenate(kept)


def test_missing_patterns_and_groups_are_tables_of_their_own() -> None:
    items = (YES, MEETS)
    model = LatentClassModel(items, 1)
    codes = [[0, 0]] * 3 + [[0, 1]] * 2 + [[1, -1]] * 4 + [[0, -1]] + [[1, 1]] * 5
    group = [0] * 3 + [0] * 2 + [0] * 4 + [0] + [1] * 5
    found = at_known(model, answers(items, codes, group), [0.6, 0.4, 0.7, 0.3], [[1.0]], n=4)
    tables = [
        ([3, 2, 0, 0], 5 * np.array([0.42, 0.18, 0.28, 0.12])),
        ([1, 4], 5 * np.array([0.6, 0.4])),
        ([0, 0, 0, 5], 5 * np.array([0.42, 0.18, 0.28, 0.12])),
    ]
    each = [stats.power_divergence(o, e, lambda_=0).statistic for o, e in tables]
    assert found.g2.observed[0] == pytest.approx([each[0] + each[1], each[2], sum(each)])
    assert found.n_patterns.observed[0].tolist() == [4, 1, 5]


def test_a_table_of_patterns_is_its_cases() -> None:
    model = LatentClassModel((YES, MEETS), 1)
    patterns = answers(model.items, [[0, 0], [1, 1], [0, 1]], counts=[5, 3, 2])
    cases = answers(model.items, [[0, 0]] * 5 + [[1, 1]] * 3 + [[0, 1]] * 2)
    one, two = (at_known(model, r, [0.6, 0.4, 0.5, 0.5], [[1.0]], n=40) for r in (patterns, cases))
    assert np.array_equal(one.g2.replicated, two.g2.replicated)
    assert np.array_equal(one.counts.replicated, two.counts.replicated)


def test_many_items_do_not_collide() -> None:
    items = tuple(Item(f"item_{j}", ("no", "yes")) for j in range(40))
    model = LatentClassModel(items, 1)
    codes = np.random.default_rng(1).integers(2, size=(30, 40))
    found = at_known(model, answers(items, codes), np.full(80, 0.5), [[1.0]], n=4)
    # every pattern its own: G2 = 2 n log(1 / (n p)) exactly
    exact = 2 * 30 * (-np.log(30) + 40 * np.log(2))
    assert found.g2.replicated[:, -1] == pytest.approx(exact)
    assert found.g2.observed[:, -1] == pytest.approx(exact)
    assert np.all(found.n_patterns.replicated[:, -1] == 30)


def test_a_pair_answered_together_is_drawn_and_expected_together() -> None:
    builder = TableBuilder([2, 3, 2], 1)
    pair = builder.answered_together(0, 1)
    builder.set_joint(0, pair, 0, builder.block(np.ones(6)))
    builder.set_item(0, 2, 0, builder.block(np.ones(2)))
    items = (YES, SCALE, MEETS)
    model = SimpleNamespace(table=builder.build(), items=items, groups=None)
    joint = np.array([0.3, 0.1, 0.05, 0.05, 0.1, 0.4])
    codes = [[0, 0, 1]] * 30 + [[0, -1, 1]] * 10 + [[-1, 2, 0]] * 10
    found = at_known(model, answers(items, codes), [*joint, 0.2, 0.8], [[1.0]])
    # Residuals of replicates have mean 0 and variance 1 only if both sides know the dependence
    assert close_to(found.pair.replicated[:, -1, 0], 0.0, 1.0)
    yes = found.counts.replicated[:, -1, 1]
    assert close_to(yes, 40 * 0.55, 40 * 0.55 * 0.45)
    drawn = found.scores.replicated[:, -1].mean(axis=0)
    assert np.all(np.abs(drawn - found.expected_scores[0, -1]) < 5 * np.sqrt(drawn / 2000))
    median = np.median(found.odds.replicated[:, -1, 0])
    exact = (0.3 * 0.5 + 0.1 * 0.4) / (0.1 * 0.05 + 0.05 * 0.15)
    assert 0.5 * exact < median < 2 * exact
    direct = 2 * 30 * np.log(1 / (0.3 * 0.8)) - 2 * 10 * np.log(0.45 * 0.8)
    direct -= 2 * 10 * np.log(0.45 * 0.2)
    assert found.g2.observed[:, -1] == pytest.approx(direct)


def test_impossible_answers_are_never_drawn() -> None:
    model = LatentClassModel((YES, TYPE), 2)
    elements = [1.0, 0.0, 0.0, 1.0, 0.5, 0.5, 0.0, 0.0, 1.0, 0.0]
    found = at_known(model, answers(model.items, [[0, 0], [1, 1]]), elements, [[0.5, 0.5]])
    assert np.all(found.counts.replicated[:, -1, 4] == 0)
    assert np.all(np.isfinite(found.g2.replicated))


def test_the_same_seed_gives_the_same_replicates() -> None:
    model = LatentClassModel((YES, MEETS), 1)
    made = [
        at_known(model, answers(model.items, [[0, 1]] * 40), [0.7, 0.3, 0.1, 0.9], [[1.0]], 40, s)
        for s in (1, 1, 2)
    ]
    assert np.array_equal(made[0].g2.replicated, made[1].g2.replicated)
    assert not np.array_equal(made[0].g2.replicated, made[2].g2.replicated)


def test_strata_count_their_cases() -> None:
    model = LatentClassModel((YES, MEETS), 1)
    strata = strata_of(model, answers(model.items, [[0, 0]] * 3 + [[0, -1]] * 2, counts=[2] * 5))
    assert sorted(strata.size.tolist()) == [4, 6]
    assert strata.answered.tolist() == [[10, 6]]
