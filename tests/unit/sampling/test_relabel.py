"""Relabelling: exact optimum, brute force, naming rules, order, and how settled names are."""

from __future__ import annotations

import csv
import tomllib
from itertools import permutations, product
from pathlib import Path

import numpy as np
import pytest
from scipy.special import rel_entr

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.permutations import Factor, PermutationGroup, permutation_group
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import UnitTable
from bayeslca.responses.item import Item
from bayeslca.responses.units import collapse
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import (
    best_members,
    fit_reference,
    matching_costs,
    relabel,
)

REFERENCES = Path(__file__).parents[2] / "references"
SEED = 20261201


def symmetric_group(n_classes: int) -> PermutationGroup:
    return permutation_group(1, n_classes, [Factor((0,), tuple(range(n_classes)))])


def units_of(counts: list[int], groups: list[int] | None = None) -> UnitTable:
    n = len(counts)
    return UnitTable(
        row_start=np.zeros(n + 1, dtype=np.int64),
        row=np.zeros(0, dtype=np.int64),
        count=np.asarray(counts, dtype=np.int64),
        prevalence_row=np.asarray(groups or [0] * n, dtype=np.int64),
        log_weight=np.zeros((0, 1)),
    )


def matched(shares: np.ndarray, units: UnitTable, group: PermutationGroup) -> np.ndarray:
    reference = fit_reference(shares, units, group)
    return best_members(matching_costs(shares, reference, units, group.n_groups), group)


def objective(shares: np.ndarray, found: np.ndarray, count: np.ndarray) -> float:
    """Return Stephens' criterion, written out: shares (K, U, S), found (S, K)."""
    moved = np.stack([shares[p, :, s] for s, p in enumerate(found)])  # (S, K, U)
    return float((rel_entr(moved, moved.mean(axis=0)) * count).sum())


@pytest.fixture(scope="module")
def small_case() -> np.ndarray:
    with (REFERENCES / "relabelling_small_case.csv").open() as file:
        rows = [[float(value) for value in row] for row in list(csv.reader(file))[1:]]
    table = np.array(rows)[:, 2:].reshape(5, 4, 3)  # draw, individual, class
    return table.transpose(2, 1, 0)


def test_reaches_the_exact_optimum_of_the_reference_case(small_case: np.ndarray) -> None:
    # Source: tests/references/references.toml, relabelling_case (brute force over 6^4).
    with (REFERENCES / "references.toml").open("rb") as file:
        tables = tomllib.load(file)["table"]
    case = next(table for table in tables if table["id"] == "relabelling_case")["computed"][0]
    count = np.ones(4)
    found = matched(small_case, units_of([1] * 4), symmetric_group(3))[:, 0]
    np.testing.assert_array_equal(found, case["permutations"])
    assert objective(small_case, found, count) == pytest.approx(case["objective"], abs=1e-9)
    before = np.tile(np.arange(3), (5, 1))
    assert objective(small_case, before, count) == pytest.approx(case["objective_before"], abs=1e-9)
    reference = fit_reference(small_case, units_of([1] * 4), symmetric_group(3))
    np.testing.assert_allclose(reference, case["q"], atol=1e-12)


def test_counts_weigh_as_repeated_cases() -> None:
    rng = np.random.default_rng(SEED)
    shares = rng.dirichlet([0.5] * 3, size=(5, 40)).transpose(2, 0, 1)
    counts = [7, 1, 3, 1, 2]
    by_count = matched(shares, units_of(counts), symmetric_group(3))
    spread = np.repeat(shares, counts, axis=1)
    by_case = matched(spread, units_of([1] * 14), symmetric_group(3))
    np.testing.assert_array_equal(by_count, by_case)
    unweighted = matched(shares, units_of([1] * 5), symmetric_group(3))
    assert not np.array_equal(by_count, unweighted)


def test_equals_brute_force_over_all_relabellings() -> None:
    rng = np.random.default_rng(SEED)
    for _ in range(20):
        truth = rng.dirichlet([0.4] * 3, size=6)
        noisy = [rng.dirichlet(30 * row + 0.3, size=4) for row in truth]  # (U, S, K)
        shares = np.stack(noisy).transpose(2, 0, 1)
        for s in range(1, 4):
            shares[:, :, s] = shares[rng.permutation(3), :, s]
        count = rng.integers(1, 5, size=6)
        found = matched(shares, units_of(count.tolist()), symmetric_group(3))[:, 0]
        every = (
            np.array([[0, 1, 2], *choice]) for choice in product(permutations(range(3)), repeat=3)
        )
        best = min(objective(shares, choice, count) for choice in every)
        assert objective(shares, found, count) == pytest.approx(best, rel=1e-9)


def test_list_of_members_and_assignment_agree() -> None:
    rng = np.random.default_rng(SEED)
    costs = rng.normal(size=(200, 2, 5, 5))
    factors = [Factor((0,), (0, 2, 4)), Factor((0, 1), (1, 3)), Factor((1,), (0, 2, 4))]
    listed = permutation_group(2, 5, factors)
    assert listed.permutations is not None
    assigned = PermutationGroup(2, 5, listed.factors, None, listed.n_members)
    np.testing.assert_array_equal(best_members(costs, listed), best_members(costs, assigned))


def test_groups_with_labels_of_their_own_move_on_their_own() -> None:
    rng = np.random.default_rng(SEED)
    truth = rng.dirichlet([0.2, 0.2], size=8)
    groups = [0] * 4 + [1] * 4
    shares = np.repeat(truth.T[:, :, None], 50, axis=2)
    flips = rng.random((2, 50)) < 0.5
    flips[:, 0] = False
    for s in range(50):
        for g in range(2):
            if flips[g, s]:
                shares[:, 4 * g : 4 * g + 4, s] = shares[::-1, 4 * g : 4 * g + 4, s]
    group = permutation_group(2, 2, [Factor((0,), (0, 1)), Factor((1,), (0, 1))])
    found = matched(shares, units_of([1] * 8, groups), group)
    np.testing.assert_array_equal(found[:, :, 0], flips.T.astype(int))


ITEMS = tuple(Item(f"item{j}", ("no", "yes"), yes="yes") for j in range(1, 6))
TRUE_YES = np.array(
    [[0.9, 0.85, 0.9, 0.8, 0.9], [0.5, 0.1, 0.8, 0.2, 0.1], [0.1, 0.4, 0.1, 0.1, 0.2]]
)
TRUE_PREVALENCE = np.array([0.25, 0.45, 0.3])


def planted(
    model: LatentClassModel, n_draws: int, permutation_of: np.ndarray
) -> tuple[Draws, UnitTable, np.ndarray, np.ndarray]:
    """Draws close to the truth, each then permuted; returns also what they were before."""
    rng = np.random.default_rng(SEED)
    n_classes, table = model.n_classes, model.table
    z = rng.choice(
        n_classes, p=TRUE_PREVALENCE[:n_classes] / TRUE_PREVALENCE[:n_classes].sum(), size=300
    )
    codes = (rng.random((300, 5)) < TRUE_YES[z]).astype(np.int16)
    units = collapse(codes, np.zeros(300, dtype=np.int32), np.ones(300, dtype=np.int64), (2,) * 5)
    yes = rng.beta(
        200 * TRUE_YES[:n_classes], 200 * (1 - TRUE_YES[:n_classes]), (n_draws, n_classes, 5)
    )
    elements = np.empty((n_draws, table.n_elements))
    for j in range(5):
        for k in range(n_classes):
            no_row, yes_row = table.response_row[0, 2 * j], table.response_row[0, 2 * j + 1]
            elements[:, table.direct_element[yes_row, k]] = yes[:, k, j]
            elements[:, table.direct_element[no_row, k]] = 1 - yes[:, k, j]
    prevalence = rng.dirichlet(200 * TRUE_PREVALENCE[:n_classes], size=n_draws)[:, None, :]
    moved, moved_prevalence = elements.copy(), prevalence.copy()
    for s, permutation in enumerate(permutation_of):
        moved[s] = elements[s, element_map(table, permutation[None, :])]
        moved_prevalence[s, 0] = prevalence[s, 0, permutation]
    unit_table = compile_units(table, units)
    shape = (2, n_draws // 2)
    moved, moved_prevalence = moved.reshape(*shape, -1), moved_prevalence.reshape(*shape, 1, -1)
    draws = Draws(
        moved,
        moved_prevalence,
        log_unit_likelihood(table, unit_table, moved, moved_prevalence) @ unit_table.count,
        log_prior(table, model.prevalence_source, moved, moved_prevalence),
    )
    return draws, unit_table, elements.reshape(*shape, -1), prevalence.reshape(*shape, 1, -1)


def test_undoes_label_switching_and_orders_classes_by_falling_prevalence() -> None:
    rng = np.random.default_rng(SEED)
    shuffles = np.array([rng.permutation(3) for _ in range(200)])
    model = LatentClassModel(ITEMS, 3)
    draws, units, elements, prevalence = planted(model, 200, shuffles)
    found = relabel(model, units, draws)
    order = np.array([1, 2, 0])  # TRUE_PREVALENCE falling
    np.testing.assert_array_equal(found.draws.prevalence, prevalence[..., order])
    expected = elements[..., element_map(model.table, order[None, :])]
    np.testing.assert_array_equal(found.draws.elements, expected)
    undone = np.take_along_axis(draws.prevalence, found.permutations, axis=-1)
    np.testing.assert_array_equal(undone, found.draws.prevalence)
    assert found.names_settled == 1.0
    assert found.findings == ()


def test_all_chains_get_the_same_labels_in_more_than_six_classes() -> None:
    # 7! members are not listed: classes are assigned.
    items = tuple(Item(f"q{j}", ("no", "yes")) for j in range(7))
    model = LatentClassModel(items, 7)
    assert model.symmetry.named_group.permutations is None
    rng = np.random.default_rng(SEED)
    table = model.table
    yes = np.where(np.eye(7, dtype=bool), 0.95, 0.05)  # (class, item)
    elements = np.empty((40, table.n_elements))
    for j, k in product(range(7), range(7)):
        rows = table.response_row[0, 2 * j : 2 * j + 2]
        elements[:, table.direct_element[rows[1], k]] = yes[k, j]
        elements[:, table.direct_element[rows[0], k]] = 1 - yes[k, j]
    base = np.arange(1, 8) / 28
    prevalence = np.tile(base, (40, 1, 1))
    for s in range(40):
        shuffle = rng.permutation(7)
        elements[s] = elements[s, element_map(table, shuffle[None, :])]
        prevalence[s, 0] = base[shuffle]
    codes = np.eye(7, dtype=np.int16)
    units = collapse(codes, np.zeros(7, np.int32), np.full(7, 5), (2,) * 7)
    draws = Draws(
        elements.reshape(4, 10, -1),
        prevalence.reshape(4, 10, 1, 7),
        np.zeros((4, 10)),
        np.zeros((4, 10)),
    )
    found = relabel(model, compile_units(table, units), draws)
    np.testing.assert_array_equal(
        found.draws.prevalence, np.broadcast_to(base[::-1], (4, 10, 1, 7))
    )
    assert np.ptp(found.draws.elements.reshape(40, -1), axis=0).max() == 0


def test_never_searches_beyond_what_the_model_leaves_open() -> None:
    # A prior tells the classes apart: draws of the other labelling are reported, not moved.
    model = LatentClassModel(ITEMS, ("a", "b"), statements=("P(item1=yes | a) ~ Beta(3, 1)",))
    swapped = np.tile([0, 1], (200, 1))
    swapped[:14] = [1, 0]
    draws, units, _, _ = planted(model, 200, swapped)
    found = relabel(model, units, draws)
    np.testing.assert_array_equal(found.draws.elements, draws.elements)
    np.testing.assert_array_equal(
        found.permutations[..., 0, :], np.broadcast_to([0, 1], (2, 100, 2))
    )
    assert found.names_settled == 186 / 200
    assert found.share_per_labelling == (186 / 200, 14 / 200)
    (finding,) = found.findings
    assert finding.kind == "names_not_settled"
    assert "93 % settled" in finding.message
    assert finding.about == ("a", "b")


def test_settled_names_are_no_finding() -> None:
    model = LatentClassModel(ITEMS, ("a", "b"), statements=("P(item1=yes | a) ~ Beta(3, 1)",))
    swapped = np.tile([0, 1], (200, 1))
    swapped[:2] = [1, 0]  # one per cent
    draws, units, _, _ = planted(model, 200, swapped)
    found = relabel(model, units, draws)
    assert found.names_settled == 0.99
    assert found.findings == ()


def test_naming_rules_name_every_draw() -> None:
    rules = (
        "low is where P(item1=yes) is lowest",
        "big is where P(item3=yes) is highest",
    )
    rng = np.random.default_rng(SEED)
    shuffles = np.array([rng.permutation(3) for _ in range(200)])
    model = LatentClassModel(ITEMS, ("big", "middle", "low"), statements=rules)
    draws, units, _, prevalence = planted(model, 200, shuffles)
    found = relabel(model, units, draws)
    np.testing.assert_array_equal(found.draws.prevalence, prevalence)  # TRUE_YES is in this order
    np.testing.assert_array_equal(found.draws.log_prior, draws.log_prior)
    assert found.names_settled == 1.0


def test_a_rule_that_flickers_leaves_the_names_unsettled() -> None:
    # item4 is .8 in class 0 and .2 in class 1; where a draw has them the other way round, the
    # rule gives the name to the class that all other answers show to be the other one.
    rules = ("a is where P(item4=yes) is highest",)
    model = LatentClassModel(ITEMS, ("a", "b"), statements=rules)
    draws, units, _, _ = planted(model, 200, np.tile([0, 1], (200, 1)))
    table = model.table
    elements = draws.elements.copy()
    rows = table.response_row[0, 6:8]
    for row in rows:
        one, two = table.direct_element[row]
        elements[0, :20, [one, two]] = elements[0, :20, [two, one]]
    flickering = Draws(elements, draws.prevalence, draws.log_likelihood, draws.log_prior)
    found = relabel(model, units, flickering)
    assert found.names_settled == pytest.approx(0.9)
    assert (found.permutations[0, :20, 0] == [1, 0]).all()


def test_one_class_is_left_alone() -> None:
    model = LatentClassModel(ITEMS, 1)
    draws, units, _, _ = planted(model, 20, np.zeros((20, 1), dtype=int))
    found = relabel(model, units, draws)
    np.testing.assert_array_equal(found.draws.elements, draws.elements)
    assert found.permutations.shape == (2, 10, 1, 1)
