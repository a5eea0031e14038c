"""The model in words, the weights of its priors, and what is pointed out before sampling."""

import numpy as np
import pytest

from bayeslca.model import cautions
from bayeslca.model.cautions import impossible_patterns
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prior_weights import prior_weights
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses

BINARY = tuple(Item(name, ("no", "yes")) for name in ("fees", "accounts", "fenced", "meets"))
KIND = Item("kind", tuple(f"kind {i}" for i in range(20)))
PRIOR = "P(fees=yes | managed) ~ Beta(9, 2)"


def responses_of(items, n, seed=0, groups=None):
    rng = np.random.default_rng(seed)
    codes = np.column_stack([rng.integers(0, item.n_categories, n) for item in items])
    n_groups = len(groups.levels) if groups else 1
    return Responses(
        items=items,
        codes=codes.astype(np.int16),
        counts=np.ones(n, dtype=np.int64),
        groups=groups,
        group_codes=(np.arange(n) % n_groups).astype(np.int32),
    )


def kinds(findings):
    return [finding.kind for finding in findings]


def test_weights_are_pseudo_cases_against_the_expected_answers():
    """By hand: 60 cases, Dirichlet(2, 1) on the prevalences: 40 expected in the first class."""
    model = LatentClassModel(
        BINARY, ("managed", "lapsed"), [PRIOR, "P(managed, lapsed) ~ Dirichlet(2, 1)"]
    )
    responses = responses_of(BINARY, 60)
    weights = prior_weights(model, responses)
    assert len(weights) == 8
    first = weights[0]
    assert first.block == "P(fees=no, yes | managed)"
    assert (first.items, first.classes) == (("fees",), ("managed",))
    assert first.concentration == (2.0, 9.0)
    assert first.origin == PRIOR
    assert first.weight == 11.0
    assert first.expected == pytest.approx(40.0)
    assert first.ratio == pytest.approx(11 / 40)
    assert first.share == pytest.approx(11 / 51)
    assert first.heavy
    assert weights[1].expected == pytest.approx(20.0)
    assert not weights[1].heavy
    assert prior_weights(model)[0].expected is None


def test_a_prior_on_the_first_item_of_a_set_is_weighed_against_its_own_answers():
    """By hand: 60 cases that answered both items, 30 expected in each class."""
    model = LatentClassModel(
        BINARY, ("managed", "lapsed"), [PRIOR], answered_together=[["fees", "accounts"]]
    )
    stated = [w for w in prior_weights(model, responses_of(BINARY, 60)) if w.origin == PRIOR]
    assert [w.expected for w in stated] == [pytest.approx(30.0)]


def test_missing_answers_do_not_count_against_a_prior():
    responses = responses_of(BINARY, 60)
    codes = responses.codes.copy()
    codes[:40, 0] = -1
    fewer = Responses(BINARY, codes, responses.counts, group_codes=responses.group_codes)
    weights = prior_weights(LatentClassModel(BINARY, 2), fewer)
    assert weights[0].expected == pytest.approx(10.0)
    assert weights[2].expected == pytest.approx(30.0)


def test_expected_answers_add_up_over_groups():
    """By hand: 30 cases north with shares 3:1, 30 south with 1:1: 22.5 + 15 in class managed."""
    groups = Groups("district", ("north", "south"))
    model = LatentClassModel(
        BINARY,
        ("managed", "lapsed"),
        ["P(managed, lapsed | district=north) ~ Dirichlet(3, 1)", PRIOR],
        groups=groups,
    )
    weights = prior_weights(model, responses_of(BINARY, 60, groups=groups))
    assert weights[0].expected == pytest.approx(37.5)
    assert weights[1].expected == pytest.approx(22.5)


class WithOneBlock(LatentClassModel):
    """A model whose two classes share the block of the first item."""

    @property
    def table(self):
        builder = TableBuilder([2] * 4, 2)
        shared = builder.block((1.0, 1.0))
        for j in range(4):
            for k in range(2):
                builder.set_item(0, j, k, shared if j == 0 else builder.block((1.0, 1.0)))
        return builder.build()


def test_a_shared_block_weighs_against_all_the_answers_it_serves():
    weights = prior_weights(WithOneBlock(BINARY, 2), responses_of(BINARY, 60))
    assert weights[0].classes == ("1", "2")
    assert weights[0].expected == pytest.approx(60.0)
    assert weights[1].expected == pytest.approx(30.0)


def test_a_twenty_category_item_at_sixty_cases_is_all_prior():
    """Rule 30's own example: 20 pseudo-cases against 20 expected in each of three classes."""
    items = (*BINARY, KIND)
    found = LatentClassModel(items, 3).findings(responses_of(items, 60))
    heavy = [finding for finding in found if finding.kind == "heavy_prior"]
    assert len(heavy) == 1
    assert heavy[0].about == ("kind", "1", "2", "3")
    assert heavy[0].value == pytest.approx(1.0)
    assert "counts for 20 cases, against about 20" in heavy[0].message
    assert heavy[0].remedy.startswith("Merge rare categories")


def test_a_heavy_stated_prior_has_a_remedy_of_its_own():
    model = LatentClassModel(BINARY, ("managed", "lapsed"), [PRIOR])
    heavy = [f for f in model.findings(responses_of(BINARY, 60)) if f.kind == "heavy_prior"]
    assert [finding.about for finding in heavy] == [("fees", "managed")]
    assert heavy[0].remedy.startswith("Say in the report")


def test_four_binary_items_with_three_classes_are_pointed_out():
    found = LatentClassModel(BINARY, 3).findings(responses_of(BINARY, 500))
    assert kinds(found) == ["not_identified"]
    assert "14 free parameters" in found[0].message


def test_a_sound_model_with_enough_cases_has_no_findings():
    assert LatentClassModel(BINARY, 2).findings(responses_of(BINARY, 500)) == ()


def test_few_cases_for_each_parameter_are_a_note():
    found = LatentClassModel(BINARY, 2).findings(responses_of(BINARY, 40))
    assert "few_cases" in kinds(found)
    assert "40 cases for 9 free parameters" in found[-1].message or any(
        "40 cases for 9 free parameters" in finding.message for finding in found
    )


def test_small_groups_are_named():
    groups = Groups("district", ("north", "south"))
    responses = responses_of(BINARY, 70, groups=groups)
    found = LatentClassModel(BINARY, 2, groups=groups).findings(responses)
    small = [finding for finding in found if finding.kind == "small_group"]
    assert [finding.about for finding in small] == [("north",), ("south",)]
    assert "35 cases, fewer than 20 for each of 2 classes" in small[0].message


class WithZeros(LatentClassModel):
    """A model whose first class never says yes to fees, the second never to accounts."""

    @property
    def table(self):
        builder = TableBuilder([2] * 4, 2)
        for j in range(4):
            for k in range(2):
                if j == k:
                    builder.set_known(0, j, k, {1: 0.0})
                else:
                    builder.set_item(0, j, k, builder.block((1.0, 1.0)))
        return builder.build()


def test_cases_that_no_class_can_give_are_named():
    codes = np.array([[1, 1, 0, 1], [1, 0, 0, 0], [0, 0, 1, 1], [1, 1, 0, 1]], dtype=np.int16)
    responses = Responses(
        BINARY,
        codes,
        np.ones(4, dtype=np.int64),
        case_ids=("w1", "w2", "w3", "w4"),
        group_codes=np.zeros(4, dtype=np.int32),
    )
    model = WithZeros(BINARY, 2)
    (found,) = impossible_patterns(model, responses)
    assert found.level == "problem"
    assert found.about == ("w1", "w4")
    assert found.value == 2.0
    assert "w1, w4 (the first: fees=yes, accounts=yes, fenced=no, meets=yes)" in found.message
    assert "Check these answers" in found.remedy
    assert impossible_patterns(LatentClassModel(BINARY, 2), responses) == ()


def test_the_description_says_what_is_assumed_and_what_it_weighs():
    model = LatentClassModel(
        BINARY,
        ("managed", "informal", "lapsed"),
        [PRIOR, "lapsed is where P(fees=yes) is lowest"],
        statement_sources={PRIOR: "ministry's survey of 2019"},
    )
    text = model.describe(responses_of(BINARY, 118))
    assert "3 classes, 4 items and 14 free parameters" in text
    assert "lapsed is where P(fees=yes) is lowest (a naming rule, kept as" in text
    assert "Dirichlet(1, 1, 1), the default" in text
    words = " ".join(text.split())
    assert "counts for 3 cases, against 118 observed" in words
    assert f"{PRIOR} [ministry's survey of 2019]; counts for 11 cases" in words
    assert "against about 39 expected answers (!)" in words
    assert "counts for 2 cases in the class, against about 39 expected answers." in words
    assert max(map(len, text.splitlines())) <= 80


def test_only_what_treats_classes_differently_is_said_to_tell_them_apart():
    rule = "lapsed is where P(fees=yes) is lowest"
    alike = ["P(accounts=yes | .) ~ Beta(2, 2)", "P(managed, lapsed) ~ Dirichlet(2, 2)"]
    text = LatentClassModel(BINARY, ("managed", "lapsed"), [rule, *alike]).describe()
    told_apart = text[text.index("What tells them apart") : text.index("Items")]
    assert rule in told_apart
    assert not any(statement in told_apart for statement in alike)
    assert all(statement in text for statement in alike)


def test_the_class_that_naming_rules_leave_over_is_named():
    names = ("managed", "informal", "lapsed")
    rules = [
        f"{name} is where P(fees=yes) is {extreme}"
        for name, extreme in (("managed", "highest"), ("lapsed", "lowest"))
    ]
    assert "informal is the class that is left" in LatentClassModel(BINARY, names, rules).describe()


def test_the_defaults_are_said_in_numbers():
    """By hand: the quantile q of Beta(1, 31) is 1 - (1 - q) ** (1 / 31)."""
    words = " ".join(LatentClassModel(BINARY, 2).describe(responses_of(BINARY, 60)).split())
    assert f"{1 - 0.5 ** (1 / 31):.1%} (up to {1 - 0.025 ** (1 / 31):.1%})" in words
    assert f"about {1 / 62:.1%}" in words


def test_the_description_without_responses_and_with_groups():
    groups = Groups("district", ("north", "south"))
    model = LatentClassModel(BINARY, 2, ["P(fees=yes | .) ~ Beta(2, 3)"], groups=groups)
    text = model.describe()
    assert "interchangeable" in text
    assert "In each district: Dirichlet(1, 1)" in text
    assert "the same in all groups" in text
    assert text.count("P(fees=yes | .) ~ Beta(2, 3)") == 1
    assert "describe(responses)" in text


def test_a_single_class_is_described():
    text = LatentClassModel(BINARY, 1).describe(responses_of(BINARY, 30))
    assert "One class" in text
    assert "1 class, 4 items and 4 free parameters" in text


def test_thresholds_are_those_of_the_messages():
    assert cautions.CASES_PER_CLASS == 20
    assert cautions.HEAVY == 0.2
