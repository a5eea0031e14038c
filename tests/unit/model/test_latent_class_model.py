"""The model as an object: what it takes, what it refuses, and how it is kept."""

import json
import pickle

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.position_names import block_names, element_names, prevalence_names
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item

FEES = Item("fees", ("no", "yes"), yes="yes")
MEETS = Item("meets", ("never", "at times", "often"), ordered=True)
ITEMS = (FEES, MEETS)
NAMES = ("managed", "informal", "lapsed")
DISTRICTS = Groups("district", ("north", "south west"))
RULES = (
    "managed is where P(fees=yes) is highest",
    "lapsed is where P(fees=yes) is lowest",
)


def test_a_number_of_classes_makes_an_exploratory_model():
    model = LatentClassModel([FEES, MEETS], 3)
    assert model.exploratory
    assert model.items == ITEMS
    assert model.class_names == ("1", "2", "3")
    assert (model.n_classes, model.n_groups) == (3, 1)
    assert model.symmetry.prior_group.n_members == 6
    assert model.symmetry.named_group.n_members == 6


def test_a_number_from_numpy_is_a_number():
    model = LatentClassModel(ITEMS, np.int64(2))
    assert model == LatentClassModel(ITEMS, 2)
    assert type(model.classes) is int


def test_names_with_naming_rules_make_a_confirmatory_model():
    model = LatentClassModel(ITEMS, list(NAMES), RULES)
    assert not model.exploratory
    assert model.class_names == NAMES
    assert [rule.latent_class for rule in model.naming_rules] == [0, 2]
    assert model.symmetry.prior_group.n_members == 6
    assert model.symmetry.named_group.is_identity


def test_what_is_not_stated_is_uniform():
    model = LatentClassModel(ITEMS, 2, groups=DISTRICTS)
    assert np.array_equal(model.table.element_prior, np.ones(10))
    assert np.array_equal(model.prevalence_source.concentration, np.ones((2, 2)))
    assert model.response_prior_origin(0, 0, 0) == "default"


def test_stated_priors_stand_in_the_table():
    model = LatentClassModel(
        ITEMS,
        ("managed", "lapsed"),
        [
            "P(fees=yes | managed) ~ Beta(9, 2)",
            "P(meets=never, 'at times', often | lapsed) ~ Dirichlet(4, 1, 2)",
            "P(managed, lapsed) ~ Dirichlet(3, 1)",
        ],
    )
    table = model.table
    fees = table.direct_element[:2]
    assert table.element_prior[fees[:, 0]].tolist() == [2.0, 9.0]
    assert table.element_prior[fees[:, 1]].tolist() == [1.0, 1.0]
    assert table.element_prior[table.direct_element[2:, 1]].tolist() == [4.0, 1.0, 2.0]
    assert model.prevalence_source.concentration.tolist() == [[3.0, 1.0]]
    assert model.response_prior_origin(0, 0, 0) == "P(fees=yes | managed) ~ Beta(9, 2)"
    assert model.symmetry.table_group.n_members == 2
    assert model.symmetry.prior_group.is_identity


@pytest.mark.parametrize(
    ("statements", "refused"),
    [
        ((), "tells managed from informal or lapsed"),
        (RULES[:1], "tells informal from lapsed"),
        (("P(fees=yes | lapsed) ~ Beta(1, 5)",), "tells managed from informal"),
        (("P(managed, informal, lapsed) ~ Dirichlet(2, 1, 1)",), "tells informal from lapsed"),
        (("P(fees=yes | .) ~ Beta(2, 2)",), "tells managed from informal or lapsed"),
    ],
)
def test_named_classes_that_nothing_tells_apart_are_refused_by_name(statements, refused):
    with pytest.raises(ModelError, match=refused) as error:
        LatentClassModel(ITEMS, NAMES, statements)
    assert "is where P(fees=yes) is highest" in str(error.value)
    assert "classes=3" in str(error.value)


def test_the_remedies_of_the_refusal_work_as_written():
    rule = "managed is where P(fees=yes) is highest"
    prior = "P(fees=yes | managed) ~ Beta(9, 2)"
    for statement in (rule, prior):
        model = LatentClassModel(ITEMS, ("managed", "lapsed"), [statement])
        assert model.symmetry.named_group.is_identity


def test_a_single_named_class_needs_nothing():
    assert LatentClassModel(ITEMS, ["everyone"]).n_classes == 1


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (((), 2), "the model has no items"),
        ((("fees",), 2), "'fees' is not an Item"),
        (((FEES, FEES), 2), "the item 'fees' is given twice"),
        ((ITEMS, 0), "at least 1 class"),
        ((ITEMS, True), "a number or a list of names"),
        ((ITEMS, 2.5), "a number or a list of names"),
        ((ITEMS, "managed"), r"classes=\['managed', ...\]"),
        ((ITEMS, ()), "classes is an empty list"),
        ((ITEMS, ("a", "b", "a")), "the class 'a' is given twice"),
        ((ITEMS, ("a", " ")), "cannot be the name of a class"),
        ((ITEMS, ("a", 2)), "cannot be the name of a class"),
        ((ITEMS, 2, "P(1) > 0.5"), "Put it in brackets"),
        ((ITEMS, 2, [3]), "is not a text"),
        ((ITEMS, 2, (), None, {"P(a) > 0.1": "x"}), "not a statement of the model"),
    ],
)
def test_what_is_wrong_is_said_with_its_remedy(arguments, message):
    with pytest.raises(ModelError, match=message):
        LatentClassModel(*arguments)


def test_models_are_equal_hashable_and_can_be_pickled():
    one = LatentClassModel(ITEMS, NAMES, RULES, DISTRICTS)
    two = LatentClassModel(list(ITEMS), list(NAMES), list(RULES), DISTRICTS)
    assert one == two
    assert hash(one) == hash(two)
    assert one != LatentClassModel(ITEMS, NAMES, RULES)
    assert pickle.loads(pickle.dumps(one)) == one


def test_a_model_survives_being_written_as_json():
    model = LatentClassModel(
        ITEMS, NAMES, RULES, DISTRICTS, {RULES[0]: "what the programme meant by managed"}
    )
    assert LatentClassModel.from_dict(json.loads(json.dumps(model.to_dict()))) == model
    plain = LatentClassModel(ITEMS, 4)
    assert LatentClassModel.from_dict(json.loads(json.dumps(plain.to_dict()))) == plain


def test_a_model_does_not_change_what_it_was_given():
    sources = {RULES[0]: "a"}
    model = LatentClassModel(ITEMS, NAMES, RULES, statement_sources=sources)
    sources[RULES[0]] = "b"
    assert model.statement_sources == {RULES[0]: "a"}


def test_the_repr_says_what_the_model_is():
    assert repr(LatentClassModel(ITEMS, 3)) == "LatentClassModel(2 items, classes=3)"
    named = repr(LatentClassModel(ITEMS, ["a", "b"], ["a is where P(fees=yes) is highest"]))
    assert "classes=['a', 'b']" in named
    assert "a is where P(fees=yes) is highest" in named


def test_elements_blocks_and_prevalences_are_called_as_in_statements():
    model = LatentClassModel(ITEMS, ("managed", "lapsed"), RULES, DISTRICTS)
    assert element_names(model)[:5] == (
        "P(fees=no | managed)",
        "P(fees=yes | managed)",
        "P(fees=no | lapsed)",
        "P(fees=yes | lapsed)",
        "P(meets=never | managed)",
    )
    assert "at times" in element_names(model)[5]
    assert block_names(model)[0] == "P(fees=no, yes | managed)"
    assert prevalence_names(model)[0][1] == "P(lapsed | district=north)"
    assert prevalence_names(LatentClassModel(ITEMS, 2)) == (("P(1)", "P(2)"),)


class WithKnown(LatentClassModel):
    """A model whose first class never meets; the rest of that item is shared out by a block."""

    @property
    def table(self):
        builder = TableBuilder([2, 3], 1)
        builder.set_item(0, 0, 0, builder.block((1.0, 1.0)))
        builder.set_known(0, 1, 0, {0: 0.4}, builder.block((1.0, 1.0)))
        builder.block((1.0, 1.0))
        return builder.build()


def test_elements_that_are_only_a_part_are_called_so():
    model = WithKnown(ITEMS, 1)
    assert element_names(model)[2:] == (
        "part of P(meets='at times' | 1)",
        "part of P(meets=often | 1)",
        "element 4 (in no row)",
        "element 5 (in no row)",
    )
    assert block_names(model)[1:] == (
        "P(meets=never, 'at times', often | 1)",
        "block 2 (in no row)",
    )


def test_names_of_parameters_can_be_read_back():
    from bayeslca.model.statements.notation import parse, to_text

    model = LatentClassModel(ITEMS, ("managed", "lapsed"), RULES, DISTRICTS)
    for name in (*element_names(model), *sum(prevalence_names(model), ()), *block_names(model)):
        assert to_text(parse(name)) == name


def test_identifiability_speaks_of_the_models_names():
    found = LatentClassModel(ITEMS, 2).identifiability()
    assert not found.identified
    assert "P(fees=yes | 1)" in found.not_identified
    assert "P(1)" in found.not_identified


def test_units_are_pooled_when_the_model_has_no_groups():
    grouped = LatentClassModel(ITEMS, 2, groups=DISTRICTS)
    responses = grouped.simulate(60, seed=1).responses
    assert grouped.units(responses).n_units > LatentClassModel(ITEMS, 2).units(responses).n_units
    assert LatentClassModel(ITEMS, 2).units(responses).n_cases == 60
