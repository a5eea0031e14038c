"""Pairs of items: residuals and odds ratios against direct formulas."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.assess.fit.item_pairs import ItemPairs, with_sum
from bayeslca.model.pair_measures import answer_scores
from bayeslca.responses.item import Item

YES = Item("fees", ("no", "yes"), yes="yes")
MEETS = Item("meets", ("no", "yes"))
TURNED = Item("meets", ("yes", "no"), yes="yes")
TYPE = Item("type", ("pump", "well", "spring"))
SCALE = Item("trust", ("low", "middle", "high"), ordered=True)


def residual(pairs: ItemPairs, counts: list[float], probability: list[float]) -> float:
    n = np.array([[float(sum(counts))]])
    found = pairs.residuals(np.array([counts], float), np.array([probability], float), n)
    assert found.shape == (2, 1)
    assert found[0] == pytest.approx(found[1])  # one group is all groups
    return float(found[0, 0])


def test_the_odds_ratio_of_two_yes_no_items() -> None:
    pairs = ItemPairs((YES, MEETS))
    assert pairs.odds_ratio(np.array([30.0, 5.0, 6.0, 20.0])) == pytest.approx([30 * 20 / (5 * 6)])
    assert np.isinf(pairs.odds_ratio(np.array([30.0, 0.0, 6.0, 20.0]))[0])


def test_the_odds_ratio_does_not_depend_on_the_order_of_no_and_yes() -> None:
    straight = ItemPairs((YES, MEETS)).odds_ratio(np.array([30.0, 5.0, 6.0, 20.0]))
    turned = ItemPairs((YES, TURNED)).odds_ratio(np.array([5.0, 30.0, 20.0, 6.0]))
    assert straight == pytest.approx(turned)
    p = [0.25] * 4
    one = residual(ItemPairs((YES, MEETS)), [30, 5, 6, 20], p)
    assert one == pytest.approx(residual(ItemPairs((YES, TURNED)), [5, 30, 20, 6], p))
    assert one > 0


def test_the_odds_ratio_of_ordered_items_counts_pairs_of_cases() -> None:
    """Concordant over discordant pairs of cases: Agresti (1980), Biometrics 36, 59-67."""
    rng = np.random.default_rng(3)
    a, b = rng.integers(3, size=40), rng.integers(2, size=40)
    table = np.zeros((3, 2))
    np.add.at(table, (a, b), 1)
    sign = np.sign(a[:, None] - a) * np.sign(b[:, None] - b)
    direct = (sign > 0).sum() / (sign < 0).sum()
    assert ItemPairs((SCALE, YES)).odds_ratio(table.ravel()) == pytest.approx([direct])


def test_an_unordered_item_has_no_odds_ratio() -> None:
    assert np.isnan(ItemPairs((TYPE, YES)).odds_ratio(np.ones(6))).all()


def test_the_residual_is_observed_less_expected_counts_in_errors() -> None:
    """With its margins met, a 2 x 2 table's counts are off by one number, O11 - E11."""
    p = np.array([0.3, 0.2, 0.1, 0.4])
    counts = 100 * p + np.array([6.0, -6.0, -6.0, 6.0])
    weights = np.array([0.5 * 0.6, -0.5 * 0.4, -0.5 * 0.6, 0.5 * 0.4])  # (a - .5)(b - .6)
    variance = 100 * (np.sum(weights**2 * p) - np.sum(weights * p) ** 2)
    found = residual(ItemPairs((YES, MEETS)), counts.tolist(), p.tolist())
    assert found == pytest.approx(6.0 / np.sqrt(variance))
    assert residual(ItemPairs((YES, MEETS)), (100 * p).tolist(), p.tolist()) == pytest.approx(0.0)


def test_the_residual_of_an_unordered_pair_is_x2_of_independence_in_its_own_errors() -> None:
    """With independent answers and both margins met, T is Pearson's X2 of independence."""
    pa, pb = np.array([0.2, 0.5, 0.3]), np.array([0.4, 0.6])
    p = np.outer(pa, pb).ravel()
    moved = np.array([4.0, -4.0, -1.0, 1.0, -3.0, 3.0])
    x2 = np.sum(moved**2 / (100 * p))
    found = residual(ItemPairs((TYPE, YES)), (100 * p + moved).tolist(), p.tolist())
    assert found == pytest.approx((x2 - 2) / np.sqrt(2 * 2))  # E T = df = 2 x 1


@pytest.mark.parametrize("items", [(YES, MEETS), (TYPE, YES)])
def test_missed_margins_alone_move_no_pair(items: tuple[Item, ...]) -> None:
    pa = np.array([0.3, 0.7]) if items[0] is YES else np.array([0.3, 0.5, 0.2])
    seen = np.array([0.6, 0.4]) if items[0] is YES else np.array([0.6, 0.2, 0.2])
    pb = np.array([0.5, 0.5])
    n = 200
    found = residual(
        ItemPairs(items),
        (n * np.outer(seen, pb)).ravel().tolist(),
        np.outer(pa, pb).ravel().tolist(),
    )
    assert found < 0.1


@pytest.mark.parametrize("items", [(YES, MEETS), (SCALE, YES), (TYPE, SCALE), (TYPE, TYPE)])
def test_residuals_have_mean_0_and_variance_1_under_the_model(items: tuple[Item, ...]) -> None:
    rng = np.random.default_rng(8)
    size = items[0].n_categories * items[1].n_categories
    p = rng.dirichlet(4 * np.ones(size))
    counts = rng.multinomial(150, p, size=4000).astype(float)[:, None]
    found = ItemPairs(items).residuals(counts, p[None], np.array([[150.0]]))[:, 0, 0]
    assert abs(found.mean()) < 5 / np.sqrt(4000)
    fourth = np.mean((found - found.mean()) ** 4)
    # Without an order it is scaled like a chi-square, which it is under independence only
    slack = 0.0 if ItemPairs(items).is_scored[0] else 0.3
    assert abs(found.var() - 1) < 5 * np.sqrt(fourth / 4000) + slack


def test_an_unordered_pair_that_hangs_together_as_expected_is_not_off() -> None:
    p = (np.eye(3) * 0.26 + 0.06 * (1 - np.eye(3))).ravel()
    p /= p.sum()
    counts = np.random.default_rng(8).multinomial(150, p, size=4000).astype(float)[:, None]
    found = ItemPairs((TYPE, TYPE)).residuals(counts, p[None], np.array([[150.0]]))[:, 0, 0]
    assert abs(found.mean()) < 5 * found.std() / np.sqrt(4000)


def test_something_that_cannot_vary_is_not_off() -> None:
    assert residual(ItemPairs((YES, MEETS)), [10, 0, 0, 0], [1.0, 0.0, 0.0, 0.0]) == 0.0


def test_groups_are_added_up() -> None:
    p = np.array([[0.25] * 4, [0.25] * 4])
    counts = np.array([[10.0, 0, 0, 10], [0, 10, 10, 0]])
    found = ItemPairs((YES, MEETS)).residuals(counts, p, np.array([[20.0], [20.0]]))
    assert found[0, 0] == -found[1, 0] > 4
    assert found[2, 0] == pytest.approx(0.0)
    assert with_sum(np.array([[1.0], [2.0]])).tolist() == [[1.0], [2.0], [3.0]]


def test_what_answers_count_for() -> None:
    assert answer_scores((YES, TURNED, TYPE, SCALE)).tolist() == [0, 1, 1, 0, 0, 0, 0, 0, 1, 2]


def test_joint_answers_find_their_columns() -> None:
    pairs = ItemPairs((YES, TYPE, MEETS))
    assert pairs.pairs == ((0, 1), (0, 2), (1, 2))
    assert pairs.start.tolist() == [0, 6, 10, 16]
    assert pairs.columns[4].tolist() == [1, 3]  # fees=yes, type=well
    assert pairs.columns[15].tolist() == [4, 6]  # type=spring, meets=yes
