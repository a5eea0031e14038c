"""The same model under other priors."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import beta, dirichlet

from bayeslca.exceptions import ModelError
from bayeslca.model.alternative_priors import (
    ALTERNATIVES,
    HALF,
    JEFFREYS,
    TWICE,
    UNIFORM,
    NoAlternative,
    check_alternatives,
    distinct_alternatives,
    log_prior_ratio,
    under_other_priors,
)
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.item import Groups, Item

ITEMS = (
    Item("fees", ("no", "yes")),
    Item("accounts", ("no", "yes")),
    Item("type", ("pump", "well", "spring")),
)
CLASSES = ("managed", "lapsed")
STATED = ("P(fees=yes | managed) ~ Beta(9, 2)", "P(managed, lapsed) ~ Dirichlet(3, 1)")
GROUPS = Groups("district", ("north", "south"))


@pytest.mark.parametrize(("name", "times"), [(HALF, 0.5), (TWICE, 2.0)])
def test_every_parameter_is_scaled_stated_or_not(name: str, times: float) -> None:
    model = LatentClassModel(ITEMS, CLASSES, STATED)
    other = under_other_priors(model, name)
    assert other.table.element_prior == pytest.approx(times * model.table.element_prior)
    assert other.prevalence_source.concentration[0] == pytest.approx([3 * times, times])


@pytest.mark.parametrize(("name", "value"), [(UNIFORM, 1.0), (JEFFREYS, 0.5)])
def test_uniform_and_jeffreys_take_the_place_of_stated_priors(name: str, value: float) -> None:
    other = under_other_priors(LatentClassModel(ITEMS, CLASSES, STATED), name)
    assert set(other.table.element_prior) == {value}
    assert set(other.prevalence_source.concentration.ravel()) == {value}


@pytest.mark.parametrize("name", ALTERNATIVES)
def test_constraints_and_rules_stay_and_shared_blocks_are_scaled_as_one(name: str) -> None:
    """Half of a shared uniform block is Beta(1/2, 1/2); two halves made equal would be no prior."""
    statements = (
        "P(fees=yes | managed) = P(accounts=yes | managed)",
        "P(accounts=yes | managed) ~ Beta(4, 2)",
        "P(fees=yes | lapsed) = 0.1",
        "P(type=pump | managed) = 0.2",
        "P(type=well | lapsed) = P(type=spring | lapsed)",
        "P(managed) > 0.3",
    )
    model = LatentClassModel(ITEMS, CLASSES, statements)
    other = under_other_priors(model, name)
    change = {HALF: lambda a: a / 2, TWICE: lambda a: 2 * a}.get(
        name, lambda a: np.full_like(a, 1.0 if name == UNIFORM else 0.5)
    )
    assert other.table.element_prior == pytest.approx(change(model.table.element_prior))
    blocks = model.prevalence_source.blocks, other.prevalence_source.blocks
    assert blocks[1].element_prior == pytest.approx(change(blocks[0].element_prior))
    assert np.array_equal(blocks[1].element_lower, blocks[0].element_lower)
    assert [text for text in other.statements if "~" not in text] == [
        text for text in statements if "~" not in text
    ]


def test_groups_held_equal_share_one_scaled_prior() -> None:
    model = LatentClassModel(
        ITEMS,
        CLASSES,
        (
            "P(fees=yes | managed, district=north) ~ Beta(3, 1)",
            "P(managed | district=north) = P(managed | district=south)",
            "P(managed, lapsed | district=north) ~ Dirichlet(3, 1)",
        ),
        groups=GROUPS,
        free_by_group=("fees",),
    )
    other = under_other_priors(model, TWICE)
    assert other.table.element_prior == pytest.approx(2 * model.table.element_prior)
    assert other.prevalence_source.blocks.element_prior == pytest.approx([6.0, 2.0])


def test_of_pooled_units_the_top_level_is_scaled() -> None:
    model = LatentClassModel(ITEMS, 2, groups=GROUPS, pooled=True, spread_prior=(1.0, 3.0))
    assert under_other_priors(model, TWICE).spread_prior == (2.0, 6.0)
    assert under_other_priors(model, TWICE).prevalence_source.mean_prior == pytest.approx([2, 2])
    assert under_other_priors(model, JEFFREYS).spread_prior == (1.0, 3.0)


def test_a_number_of_classes_gets_statements_about_all_of_them() -> None:
    other = under_other_priors(LatentClassModel(ITEMS, 2), HALF)
    assert set(other.table.element_prior) == {0.5}
    assert other.symmetry.named_group.n_members == 2


def test_what_changes_nothing_or_the_same_is_left_out_with_a_reason() -> None:
    found, left_out = distinct_alternatives(LatentClassModel(ITEMS, 2), ALTERNATIVES)
    assert list(found) == [HALF, TWICE]
    assert left_out == {
        UNIFORM: "it is the study's own prior",
        JEFFREYS: "it is the same as “half as strong” here",
    }


def test_classes_that_only_priors_told_apart_may_be_exchangeable() -> None:
    model = LatentClassModel(ITEMS, CLASSES, STATED[:1])
    assert model.symmetry.named_group.is_identity
    assert not under_other_priors(model, UNIFORM).symmetry.named_group.is_identity


def test_single_answers_held_equal_have_no_alternative() -> None:
    model = LatentClassModel(
        ITEMS, CLASSES, (*STATED, "P(type=pump | managed) = P(type=pump | lapsed)")
    )
    with pytest.raises(NoAlternative, match="single answers of items with more than two"):
        under_other_priors(model, HALF)
    assert list(distinct_alternatives(model, ALTERNATIVES)[0]) == []


def test_an_unknown_prior_is_refused_with_near_names() -> None:
    with pytest.raises(ModelError, match=r"'Jeffrey'.*Jeffreys"):
        check_alternatives(["Jeffrey"])


def test_the_ratio_of_priors_is_that_of_scipys_densities() -> None:
    """Up to a constant, which weights that sum to 1 do not see."""
    items = ITEMS[::2]
    stated = ("P(fees=yes | managed) ~ Beta(9, 2)", "P(managed, lapsed) ~ Dirichlet(3, 1)")
    model = LatentClassModel(items, CLASSES, stated)
    other = under_other_priors(model, HALF)
    rng = np.random.default_rng(1)
    fees = rng.beta(2, 2, size=(40, 2))
    kind = rng.dirichlet([2, 2, 2], size=(40, 2))
    share = rng.dirichlet([2, 2], size=(40, 1))
    blocks = [np.stack([1 - fees[:, k], fees[:, k]], axis=1) for k in range(2)]
    elements = np.concatenate([*blocks, kind[:, 0], kind[:, 1]], axis=1)

    def density(times: float) -> np.ndarray:
        out = beta.logpdf(fees[:, 0], 9 * times, 2 * times)
        out = out + beta.logpdf(fees[:, 1], times, times)
        for s in range(40):
            out[s] += dirichlet.logpdf(share[s, 0], [3 * times, times])
            out[s] += sum(dirichlet.logpdf(kind[s, k], [times] * 3) for k in range(2))
        return out

    ratio = log_prior_ratio(model, other, elements, share)
    off = ratio - (density(0.5) - density(1.0))
    assert np.ptp(off) < 1e-9
    assert np.ptp(ratio) > 1.0
