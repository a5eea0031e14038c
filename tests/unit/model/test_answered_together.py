"""Items that are answered together within a class: what may be said, and what it compiles to."""

from __future__ import annotations

import re
from itertools import product

import numpy as np
import pytest
from scipy import stats

from bayeslca import AnsweredTogether, Groups, Item, LatentClassModel
from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.alternative_priors import under_other_priors
from bayeslca.model.answered_together import default_concentration
from bayeslca.model.compile import compile_units
from bayeslca.model.joint_answers import joints
from bayeslca.model.position_names import block_names, element_names
from bayeslca.model.probabilities import (
    draw_elements,
    log_unit_likelihood,
    response_probability,
    row_probability,
)
from bayeslca.model.simulate import Parameters
from bayeslca.responses.units import MISSING, Units, collapse

SEED = 20261231
NO_YES = ("no", "yes")
FEES, ACCOUNTS, MEETS = (Item(name, NO_YES, yes="yes") for name in ("fees", "accounts", "meets"))
TRUST = Item("trust", ("low", "middle", "high"), ordered=True)
ITEMS = (FEES, ACCOUNTS, MEETS, TRUST)
TOLD = ("P(meets=yes | managed) ~ Beta(9, 2)",)
CLASSES = ("managed", "lapsed")


def units_of(patterns: list[tuple[int, ...]], sizes: tuple[int, ...]) -> Units:
    codes = np.array(patterns, dtype=np.int16)
    n = len(codes)
    return collapse(codes, np.zeros(n, dtype=np.int32), np.ones(n, dtype=np.int64), sizes)


@pytest.mark.parametrize(
    ("given", "said"),
    [
        ("fees", "must be a list of sets"),
        (["fees", "accounts"], "is no set of items. Write each set in brackets"),
        ([["fees", "acounts"]], r"'acounts', which is no item \(near names: 'accounts'\)"),
        ([["fees"]], r"\[fees\]: a set has two items or more"),
        ([["fees", "fees"]], "'fees' is listed twice"),
        ([["fees", "accounts"], ["accounts", "meets"]], "'accounts' stands in two sets"),
        ([AnsweredTogether(["fees", "meets"], ["manged"])], r"'manged' \(near names: 'managed'\)"),
        ([AnsweredTogether(["fees", "meets"], [])], "classes is an empty list"),
    ],
)
def test_what_is_no_set_is_refused_by_name(given: object, said: str) -> None:
    with pytest.raises(ModelError, match=said):
        LatentClassModel(ITEMS, CLASSES, TOLD, answered_together=given)


def test_numbered_classes_cannot_be_chosen_from() -> None:
    with pytest.raises(ModelError, match="a number names none"):
        LatentClassModel(ITEMS, 2, answered_together=[AnsweredTogether(["fees", "meets"], ["1"])])


@pytest.mark.parametrize("prior", [0.0, -1.0, True, "uniform", float("inf"), [1, 1, 0, 1]])
def test_a_prior_is_a_number_above_0(prior: object) -> None:
    with pytest.raises(ModelError, match="a Dirichlet parameter is a number above 0"):
        AnsweredTogether(["fees", "meets"], prior=prior)


def test_too_many_joint_answers_are_refused() -> None:
    many = [Item(name, tuple("abcde")) for name in ("one", "two", "three")]
    with pytest.raises(ModelError, match="125 joint answers, more than the 64"):
        LatentClassModel(many, 2, answered_together=[["one", "two", "three"]])


BY_CLASS = [
    AnsweredTogether(["fees", "accounts"], ["managed"], prior=[2.0, 1.0, 3.0, 14.0]),
    AnsweredTogether(["fees", "accounts"], ["lapsed"]),
]


def test_a_number_for_each_joint_answer_is_a_prior_on_both_items() -> None:
    """Sums of a Dirichlet's parts are Beta: 17 and 3 of fees, 15 and 5 of accounts."""
    model = LatentClassModel(ITEMS, CLASSES, answered_together=BY_CLASS)
    assert model.symmetry.prior_group.is_identity  # the priors tell the classes apart
    assert not model.symmetry.table_group.is_identity
    rng = np.random.default_rng(SEED)
    elements = np.array([draw_elements(model.table, rng) for _ in range(4000)])
    found = response_probability(model.table, elements)[:, 0, 0]
    assert stats.kstest(found[:, 1], stats.beta(17, 3).cdf).pvalue > 1e-3
    assert stats.kstest(found[:, 3], stats.beta(15, 5).cdf).pvalue > 1e-3
    joint = row_probability(model.table, elements)[:, model.table.joint_row[0], 0]
    assert stats.kstest(joint[:, 1], stats.beta(1, 19).cdf).pvalue > 1e-3
    text = " ".join(model.describe().split())
    assert "Dirichlet(2, 1, 3, 14) on no and no, no and yes, yes and no, yes and yes" in text
    assert "which gives fees alone Beta(17, 3) of yes" in text
    assert "accounts alone Beta(15, 5) of yes" in text


@pytest.mark.parametrize(
    ("given", "statements", "said"),
    [
        ([AnsweredTogether(["fees", "accounts"], prior=[1, 2, 3])], TOLD, "3 numbers, and there"),
        ([*BY_CLASS, ["fees", "accounts"]], (), "given twice for class 'managed'"),
        ([*BY_CLASS, ["accounts", "fees"]], (), "stands in two sets"),
        (BY_CLASS, ("P(fees=yes | managed) ~ Beta(9, 2)",), "'fees' has a prior already"),
    ],
)
def test_priors_that_do_not_fit_are_refused(given: list, statements: tuple, said: str) -> None:
    with pytest.raises(ModelError, match=said):
        LatentClassModel(ITEMS, CLASSES, statements, answered_together=given)


def test_all_of_a_set_are_free_by_group_or_none() -> None:
    groups = Groups("district", ("north", "south"))
    with pytest.raises(ModelError, match=r"\[fees\] may differ by group"):
        LatentClassModel(
            ITEMS, 2, groups=groups, free_by_group=["fees"], answered_together=[["fees", "meets"]]
        )


@pytest.mark.parametrize(
    "statement",
    [
        "P(accounts=yes | managed) ~ Beta(9, 2)",
        "P(accounts=yes | .) ~ Beta(2, 2)",
        "P(accounts=yes | managed) > 0.5",
        "P(accounts=yes | managed) = 0.9",
        "P(accounts=yes | managed) = P(fees=yes | managed)",
        "managed is where P(accounts=yes) is highest",
    ],
)
def test_statements_on_a_sum_are_refused_with_the_remedy(statement: str) -> None:
    with pytest.raises(StatementError) as caught:
        LatentClassModel(
            ITEMS, CLASSES, (*TOLD, statement), answered_together=[["fees", "accounts"]]
        )
    assert "'accounts' is answered together with 'fees'" in str(caught.value)
    assert "answered_together=[['accounts', 'fees']]" in str(caught.value)


def test_they_hold_where_the_set_does_not() -> None:
    model = LatentClassModel(
        ITEMS,
        CLASSES,
        (*TOLD, "P(accounts=yes | lapsed) ~ Beta(1, 9)", "P(accounts=yes | lapsed) < 0.5"),
        answered_together=[AnsweredTogether(["fees", "accounts"], ["managed"])],
    )
    assert model.table.is_bounded


def test_a_prior_on_the_first_item_is_exact() -> None:
    model = LatentClassModel(
        ITEMS,
        CLASSES,
        (*TOLD, "P(fees=yes | managed) ~ Beta(9, 2)"),
        answered_together=[["fees", "accounts"]],
    )
    rng = np.random.default_rng(SEED)
    elements = np.array([draw_elements(model.table, rng) for _ in range(4000)])
    fees = response_probability(model.table, elements)[:, 0, 0, 1]
    assert stats.kstest(fees, stats.beta(9, 2).cdf).pvalue > 1e-3  # SciPy's own distribution


@pytest.mark.parametrize(
    ("prior", "items", "margin"),
    [
        (None, (FEES, ACCOUNTS), stats.beta(1, 1)),
        (1.0, (FEES, ACCOUNTS), stats.beta(2, 2)),  # statistics: Dirichlet(1, 1, 1, 1)
        (None, (FEES, ACCOUNTS, MEETS), stats.beta(1, 1)),
    ],
)
def test_the_prior_of_each_item_alone(prior: float | None, items: tuple, margin: object) -> None:
    """Sums of a Dirichlet's parts are Beta (common knowledge); both items alike."""
    together = AnsweredTogether([item.name for item in items], prior=prior)
    model = LatentClassModel(items, 1, answered_together=[together])
    rng = np.random.default_rng(SEED)
    elements = np.array([draw_elements(model.table, rng) for _ in range(4000)])
    found = response_probability(model.table, elements)[:, 0, 0]
    for j in range(len(items)):
        assert stats.kstest(found[:, 2 * j + 1], margin.cdf).pvalue > 1e-3


def test_the_default_for_part_of_a_set_is_the_default_of_that_part() -> None:
    """A sum of parts of Dirichlet(a, ..., a) is Dirichlet with the parameters summed."""
    assert default_concentration((2, 2)) == 0.5
    assert 2 * default_concentration((2, 2, 2)) == pytest.approx(default_concentration((2, 2)))
    assert 3 * default_concentration((3, 3, 3)) == pytest.approx(default_concentration((3, 3)))


def product_parameters(
    plain: LatentClassModel, paired: LatentClassModel, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Elements of a model without a set, and of one with it that makes the items independent."""
    elements = draw_elements(plain.table, rng)
    probability = response_probability(plain.table, elements)[0]
    start = plain.table.item_start
    out = np.full(paired.table.n_elements, np.nan)
    names = {name: e for e, name in enumerate(element_names(paired))}
    for j, item in enumerate(plain.items):
        for c, category in enumerate(item.categories):
            for k, name in enumerate(plain.class_names):
                value = probability[k, start[j] + c]
                alone = f"P({item.name}={category} | {name})"
                if alone in names:
                    out[names[alone]] = value
                for text, e in names.items():
                    if text.startswith(f"P({item.name}={category} | {name}, fees="):
                        out[e] = value
    assert not np.isnan(out).any()
    return elements, out


def test_independent_answers_have_the_likelihood_of_the_usual_model() -> None:
    plain = LatentClassModel(ITEMS, CLASSES, TOLD)
    paired = LatentClassModel(
        ITEMS,
        CLASSES,
        TOLD,
        answered_together=[AnsweredTogether(["fees", "trust"], ["managed"])],
    )
    elements, same = product_parameters(plain, paired, np.random.default_rng(SEED))
    prevalence = np.array([[0.3, 0.7]])
    sizes = (2, 2, 2, 3)
    every = list(product(*((MISSING, *range(size)) for size in sizes)))[1:]
    units = units_of(every, sizes)
    one, two = (
        log_unit_likelihood(model.table, compile_units(model.table, units), at, prevalence)
        for model, at in ((plain, elements), (paired, same))
    )
    np.testing.assert_allclose(one, two, rtol=1e-12)


def test_three_items_with_some_missing_are_sums_of_joint_answers() -> None:
    model = LatentClassModel(
        (FEES, ACCOUNTS, TRUST), 1, answered_together=[["fees", "accounts", "trust"]]
    )
    table = model.table
    elements = draw_elements(table, np.random.default_rng(SEED))
    whole = next(joint for joint in joints(table) if joint.is_whole)
    rows = row_probability(table, elements)[:, 0]
    joint = rows[table.joint_row[0, whole.columns]].reshape(2, 2, 3)
    assert joint.sum() == pytest.approx(1.0)
    every = list(product((MISSING, 0, 1), (MISSING, 0, 1), (MISSING, 0, 1, 2)))[1:]
    units = units_of(every, (2, 2, 3))
    found = np.exp(
        log_unit_likelihood(table, compile_units(table, units), elements, np.ones((1, 1)))
    )
    for pattern, probability in zip(units.pattern, found, strict=True):
        at = tuple(slice(None) if code == MISSING else code for code in pattern)
        assert probability == pytest.approx(joint[at].sum())


def test_a_joint_answer_can_be_impossible() -> None:
    model = LatentClassModel(
        ITEMS,
        CLASSES,
        (*TOLD, "P(fees=yes, accounts=yes | lapsed) = 0"),
        answered_together=[["fees", "accounts"]],
    )
    probability = row_probability(model.table, draw_elements(model.table, np.random.default_rng(1)))
    joint = probability[model.table.joint_row[0]]
    assert joint[3, 1] == 0.0
    assert joint[3, 0] > 0.0
    simulated = model.simulate(500, seed=SEED)
    codes = simulated.responses.codes[simulated.latent_class == 1]
    assert not np.any((codes[:, 0] == 1) & (codes[:, 1] == 1))
    said = " ".join(model.describe().split())
    assert "fees=yes together with accounts=yes in lapsed is impossible" in said


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        ("P(fees=yes, meets=yes | lapsed) = 0", "independent within a class here"),
        ("P(fees=yes, accounts=yes | .) = 0", "independent within a class here"),
        ("P(fees=yes, accounts=yes | lapsed) < 0.1", "cannot be constrained, but for = 0"),
    ],
)
def test_other_statements_on_joint_answers_are_refused(statement: str, said: str) -> None:
    together = AnsweredTogether(["fees", "accounts"], ["lapsed"])
    with pytest.raises(StatementError, match=said):
        LatentClassModel(ITEMS, CLASSES, (*TOLD, statement), answered_together=[together])


def test_simulated_joint_answers_have_the_joint_probabilities() -> None:
    model = LatentClassModel(
        (FEES, ACCOUNTS, TRUST), 1, answered_together=[["fees", "trust", "accounts"]]
    )
    elements = draw_elements(model.table, np.random.default_rng(SEED))
    parameters = Parameters(elements, np.ones((1, 1)))
    codes = model.simulate(5000, seed=SEED, parameters=parameters).responses.codes
    whole = next(joint for joint in joints(model.table) if joint.is_whole)
    expected = row_probability(model.table, elements)[model.table.joint_row[0, whole.columns], 0]
    at = np.ravel_multi_index((codes[:, 0], codes[:, 2], codes[:, 1]), whole.sizes)
    observed = np.bincount(at, minlength=12)
    kept = expected > 1e-3
    assert (
        stats.chisquare(
            np.append(observed[kept], observed[~kept].sum()),
            5000 * np.append(expected[kept], expected[~kept].sum()),
        ).pvalue
        > 1e-3
    )


def test_a_set_in_one_class_tells_it_from_the_others() -> None:
    together = AnsweredTogether(["fees", "accounts"], ["managed"])
    alone = LatentClassModel(ITEMS, CLASSES, answered_together=[together])
    assert alone.symmetry.table_group.is_identity
    with pytest.raises(ModelError, match="nothing in the study tells managed from lapsed"):
        LatentClassModel(ITEMS, CLASSES, answered_together=[["fees", "accounts"]])
    three = LatentClassModel(ITEMS, 3, answered_together=[["fees", "trust"]])
    assert three.symmetry.prior_group.n_members == 6


def test_groups_share_the_joint_answers_or_have_their_own() -> None:
    groups = Groups("district", ("north", "south"))
    together = [["fees", "accounts"]]
    shared = LatentClassModel(ITEMS, 2, groups=groups, answered_together=together)
    assert len(shared.table.joint_row) == 1
    free = LatentClassModel(
        ITEMS, 2, groups=groups, free_by_group=["accounts", "fees"], answered_together=together
    )
    assert not np.intersect1d(free.table.joint_row[0], free.table.joint_row[1]).size
    assert len(set(element_names(free))) == free.table.n_elements
    assert "P(accounts=yes | 1, fees=no, district=south)" in element_names(free)


def test_every_block_and_element_has_a_name_of_its_own() -> None:
    model = LatentClassModel(ITEMS, 2, answered_together=[["fees", "accounts", "trust"]])
    names = element_names(model)
    assert len(set(names)) == len(names)
    assert not any("part of" in name or "no row" in name for name in names)
    assert "P(accounts=no, trust=high | 2, fees=yes)" in names
    assert "P(accounts, trust | 1, fees=no)" in block_names(model)


def test_a_model_with_sets_comes_back_from_plain_values() -> None:
    model = LatentClassModel(
        ITEMS,
        CLASSES,
        TOLD,
        answered_together=[
            AnsweredTogether(["fees", "accounts"], ["managed"], prior=1.0),
            ["meets", "trust"],
        ],
    )
    assert LatentClassModel.from_dict(model.to_dict()) == model
    without = {k: v for k, v in model.to_dict().items() if k != "answered_together"}
    assert LatentClassModel.from_dict(without).answered_together == ()  # saved before there were


def test_describe_says_what_the_prior_does() -> None:
    text = " ".join(
        LatentClassModel(ITEMS, CLASSES, TOLD, answered_together=[["fees", "accounts"]])
        .describe()
        .split()
    )
    assert "fees and accounts in every class: one probability for each of their 4" in text
    assert "which gives each item alone Beta(1, 1) (uniform)" in text
    # The median of |log odds ratio| under Dirichlet(1/2, ...), by SciPy's gamma draws
    draws = np.log(stats.gamma(0.5).rvs((400_000, 4), random_state=SEED))
    middle = np.median(np.abs(draws @ [1, -1, -1, 1]))
    low, high = re.search(r"odds ratio between (\S+) and (\S+) with", text).groups()
    np.testing.assert_allclose([np.log(float(low)), np.log(float(high))], [-middle, middle], 0.03)


def test_few_cases_for_many_joint_answers_are_pointed_out() -> None:
    model = LatentClassModel(
        ITEMS, CLASSES, TOLD, answered_together=[["fees", "accounts", "trust"]]
    )
    found = model.findings(model.simulate(60, seed=SEED).responses)
    (sparse,) = [finding for finding in found if finding.kind == "sparse_joint_answers"]
    assert "12 joint answers, against about 30 cases" in sparse.message
    many = model.findings(model.simulate(600, seed=SEED).responses)
    assert not [finding for finding in many if finding.kind == "sparse_joint_answers"]


POSITIVE = [Item(test, ("negative", "positive")) for test in ("blood", "milk")]


@pytest.mark.parametrize(
    ("herds", "classes", "n_free", "rank"),
    [
        # Hui & Walter (1980, Biometrics 36, 167-171): two tests, two populations, independent
        (2, None, 6, 6),
        (1, None, 5, 3),
        # Joint results of two tests lie in a space of 3 dimensions. Both classes free: populations
        # lie on one line (4 parameters, and one for each population), however many they are.
        (2, ("infected", "healthy"), 8, 6),
        (3, ("infected", "healthy"), 9, 7),
        (6, ("infected", "healthy"), 12, 10),
        # One class independent: the line meets that surface, and the other class may be anywhere
        # on it.
        (3, ("infected",), 8, 7),
    ],
)
def test_dependent_tests_are_not_identified_by_more_herds(
    herds: int, classes: tuple[str, ...] | None, n_free: int, rank: int
) -> None:
    groups = Groups("herd", tuple("abcdef"[:herds])) if herds > 1 else None
    together = [AnsweredTogether(["blood", "milk"], classes)] if classes else []
    model = LatentClassModel(
        POSITIVE,
        ("infected", "healthy"),
        ("P(blood=positive | infected) ~ Beta(9, 2)",),
        groups=groups,
        answered_together=together,
    )
    found = model.identifiability()
    assert (found.n_free, found.rank) == (n_free, rank)


@pytest.mark.parametrize(
    ("name", "joint"),
    [
        ("half as strong", [1.0, 0.5, 1.5, 7.0]),
        ("twice as strong", [4.0, 2.0, 6.0, 28.0]),
        ("uniform", [1.0] * 4),
        ("Jeffreys", [0.5] * 4),
    ],
)
def test_other_priors_are_other_priors_of_the_joint_answers(name: str, joint: list[float]) -> None:
    other = under_other_priors(LatentClassModel(ITEMS, CLASSES, answered_together=BY_CLASS), name)
    (one,) = other.item_sets
    assert one.priors[0] == tuple(joint)
    elements = dict(zip(element_names(other), other.table.element_prior, strict=True))
    assert elements["P(fees=yes | managed)"] == joint[2] + joint[3]
    assert elements["P(accounts=no | managed, fees=yes)"] == joint[2]
