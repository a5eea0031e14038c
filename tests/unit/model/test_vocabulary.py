"""Names of statements are looked up, or refused with near names and the place."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.statements.notation import parse
from bayeslca.model.statements.resolve import kind_of, read_statements, resolve
from bayeslca.model.statements.resolved import (
    MembershipTerm,
    PrevalencePrior,
    PrevalenceTerm,
    ResolvedNamingRule,
    ResolvedQuantity,
    ResolvedRelations,
    ResponsePrior,
    ResponseTerm,
)
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import Groups, Item

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("accounts", ("yes", "no")),
    Item("type", ("a", "b", "c")),
    Item("trust", ("low", "middle", "high", "very high"), ordered=True),
)
CLASSES = ("managed", "informal", "lapsed")
NAMED = Vocabulary(ITEMS, CLASSES, Groups("district", ("north", "south")))
NUMBERED = Vocabulary(ITEMS, ("1", "2"), exploratory=True)
TWO = Vocabulary(ITEMS, ("well", "ill"))


# --- what a probability stands for ---------------------------------------------------------------

TERMS = {
    "P(informal)": PrevalenceTerm(1, "every"),
    "P(.)": PrevalenceTerm(None, "every"),
    "P(informal | district=south)": PrevalenceTerm(1, 1),
    "P(informal | overall)": PrevalenceTerm(1, "overall"),
    "P(fees | lapsed)": ResponseTerm(((0, (1,)),), 2, "every"),
    "P(accounts=yes | .)": ResponseTerm(((1, (0,)),), None, "every"),
    "P(fees=no | lapsed, district=north)": ResponseTerm(((0, (0,)),), 2, 0),
    "P(fees=no | district=north, lapsed)": ResponseTerm(((0, (0,)),), 2, 0),
    "P(fees, type=b | managed)": ResponseTerm(((0, (1,)), (2, (1,))), 0, "every"),
    "P(fees=yes, fees=no | managed)": None,
    "P(trust>=high | managed)": ResponseTerm(((3, (2, 3)),), 0, "every"),
    "P(trust>high | managed)": ResponseTerm(((3, (3,)),), 0, "every"),
    "P(trust<high | managed)": ResponseTerm(((3, (0, 1)),), 0, "every"),
    "P(trust<=high | managed)": ResponseTerm(((3, (0, 1, 2)),), 0, "every"),
    "P(type in {c, a} | managed)": ResponseTerm(((2, (0, 2)),), 0, "every"),
    "P(managed | fees, accounts=no)": MembershipTerm(0, ((0, (1,)), (1, (1,))), "every"),
    "P(managed | district=south, type=c)": MembershipTerm(0, ((2, (2,)),), 1),
}


@pytest.mark.parametrize("text", [text for text in TERMS if TERMS[text] is not None])
def test_a_probability_is_looked_up(text):
    resolved = resolve(text, NAMED)
    assert isinstance(resolved, ResolvedQuantity)
    assert resolved.terms == {parse(text): TERMS[text]}


def test_a_numbered_model_speaks_of_all_classes():
    resolved = resolve("P(fees=yes | .) > P(accounts=yes | .)", NUMBERED)
    assert isinstance(resolved, ResolvedRelations)
    assert list(resolved.terms.values()) == [
        ResponseTerm(((0, (1,)),), None),
        ResponseTerm(((1, (0,)),), None),
    ]


def test_an_item_may_be_called_like_a_number_of_a_class():
    vocabulary = Vocabulary((Item("1", ("no", "yes")),), ("1", "2"), exploratory=True)
    resolved = resolve("P(1=yes | .)", vocabulary)
    assert list(resolved.terms.values()) == [ResponseTerm(((0, (1,)),), None)]


# --- kinds of statements -------------------------------------------------------------------------

KINDS = {
    "P(fees=yes | managed) ~ Beta(9, 2)": ("prior", ResponsePrior),
    "P(managed, informal, lapsed) ~ Dirichlet(1, 1, 1)": ("prior", PrevalencePrior),
    "managed is where P(fees=yes) is highest": ("naming_rule", ResolvedNamingRule),
    "P(managed) > 0.2": ("relation", ResolvedRelations),
    "P(managed) > 0.2 and P(lapsed) = 0": ("relation", ResolvedRelations),
    "P(managed) - P(lapsed)": ("quantity", ResolvedQuantity),
    "P(managed)": ("quantity", ResolvedQuantity),
}


@pytest.mark.parametrize("text", KINDS)
def test_the_kind_of_a_statement(text):
    kind, resolved = KINDS[text]
    assert kind_of(parse(text)) == kind
    assert isinstance(resolve(text, NAMED), resolved)


def test_naming_rules_are_looked_up():
    rule = resolve("lapsed is where P(trust>=high) is lowest", NAMED)
    assert rule == ResolvedNamingRule(
        2, (3, (2, 3)), "lowest", "lapsed is where P(trust>=high) is lowest"
    )
    by_prevalence = resolve("managed is where prevalence is highest", NAMED)
    assert by_prevalence.answer is None


def test_priors_and_naming_rules_of_a_model_are_sorted_apart():
    found = read_statements(
        ["managed is where P(fees) is highest", "P(fees | lapsed) ~ Beta(1, 9)"], NAMED
    )
    assert [prior.text for prior in found.priors] == ["P(fees | lapsed) ~ Beta(1, 9)"]
    assert [rule.latent_class for rule in found.naming_rules] == [0]


@pytest.mark.parametrize("text", ["P(managed) > 0.2", "P(fees | lapsed) = 0 and P(managed) > 0.2"])
def test_constraints_of_a_model_are_sorted_apart(text):
    found = read_statements([text, "P(fees | lapsed) ~ Beta(1, 9)"], NAMED)
    assert [relations.text for relations in found.constraints] == [text]


def test_a_quantity_is_no_assumption():
    with pytest.raises(StatementError, match="this computes something"):
        read_statements(["P(managed)"], NAMED)


def test_a_wrong_name_in_a_constraint_is_told():
    with pytest.raises(StatementError, match="near names: 'managed'"):
        read_statements(["P(manged) > 0.2"], NAMED)


# --- priors --------------------------------------------------------------------------------------

PRIORS = [
    (NAMED, "P(fees=yes | managed) ~ Beta(9, 2)", ResponsePrior, (2, 9)),
    (NAMED, "P(fees=no | managed) ~ Beta(9, 2)", ResponsePrior, (9, 2)),
    (NAMED, "P(fees | managed) ~ Beta(9, 2)", ResponsePrior, (2, 9)),
    (NAMED, "P(accounts=yes | managed) ~ Beta(9, 2)", ResponsePrior, (9, 2)),
    (NAMED, "P(fees=yes, no | managed) ~ Dirichlet(9, 2)", ResponsePrior, (2, 9)),
    (NAMED, "P(type=a, b, c | managed) ~ Dirichlet(1, 2, 3)", ResponsePrior, (1, 2, 3)),
    (NAMED, "P(type=c, a, b | managed) ~ Dirichlet(1, 2, 3)", ResponsePrior, (2, 3, 1)),
    (NUMBERED, "P(type=a, b, c | .) ~ Dirichlet(1, 1, 4)", ResponsePrior, (1, 1, 4)),
    (NUMBERED, "P(fees=yes | .) ~ Beta(2, 3)", ResponsePrior, (3, 2)),
    (NAMED, "P(managed, informal, lapsed) ~ Dirichlet(1, 2, 3)", PrevalencePrior, (1, 2, 3)),
    (NAMED, "P(lapsed, managed, informal) ~ Dirichlet(1, 2, 3)", PrevalencePrior, (2, 3, 1)),
    (NAMED, "P(.) ~ Dirichlet(0.5)", PrevalencePrior, (0.5, 0.5, 0.5)),
    (NUMBERED, "P(.) ~ Dirichlet(4)", PrevalencePrior, (4, 4)),
    (TWO, "P(ill) ~ Beta(2, 8)", PrevalencePrior, (8, 2)),
    (TWO, "P(well) ~ Beta(2, 8)", PrevalencePrior, (2, 8)),
]


@pytest.mark.parametrize(("vocabulary", "text", "kind", "concentration"), PRIORS)
def test_a_prior_is_put_into_the_models_order(vocabulary, text, kind, concentration):
    prior = resolve(text, vocabulary)
    assert isinstance(prior, kind)
    assert prior.concentration == concentration
    assert prior.group is None
    assert prior.text == text


def test_where_a_prior_stands():
    assert resolve("P(type=a, b, c | lapsed) ~ Dirichlet(1, 1, 1)", NAMED).latent_class == 2
    assert resolve("P(fees | .) ~ Beta(1, 1)", NAMED).latent_class is None
    assert resolve("P(fees | managed, district=south) ~ Beta(1, 1)", NAMED).group == 1
    assert resolve("P(. | district=south) ~ Dirichlet(1)", NAMED).group == 1


def test_an_elicited_prior_has_its_mode_and_bound():
    # Branscum, Gardner & Johnson (2005): most likely 0.55, below 0.85 with 0.95 -> Beta(2.82, 2.49)
    prior = resolve("P(fees=yes | .) ~ Beta(most_likely=0.55, below=0.85, sure=0.95)", NAMED)
    assert prior.concentration == pytest.approx((2.49, 2.82), abs=0.005)


# --- what is refused -----------------------------------------------------------------------------

# vocabulary, statement, text at the caret, part of the problem, part of the remedy
REFUSED = [
    (NAMED, "P(manged) > 0.2", "manged", "near names: 'managed'", "managed, informal"),
    (NAMED, "P(fess=yes | managed)", "fess", "near names: 'fees'", "fees, accounts"),
    (NAMED, "P(fees=ys | managed)", "ys", "near names: 'yes'", "no, yes"),
    (NAMED, "P(fees=yes | managd)", "managd", "near names: 'managed'", "managed, informal"),
    (NAMED, "P(fees=yes | accounts)", "accounts", "which answer counts as yes", "accounts=no"),
    (NAMED, "P(managed | distrikt=north)", "distrikt", "near names: 'district'", "district"),
    (NAMED, "P(managed | district=nord)", "nord", "near names: 'north'", "north, south"),
    (NAMED, "P(managed | district)", "district", "stands without a group", "district=north"),
    (NAMED, "P(managed | district=north, overall)", "overall", "given twice", "one group"),
    (NAMED, "P(district=north)", "district", "group column", "after the bar"),
    (NAMED, "P(accounts | managed)", "accounts", "which answer counts as yes", "declare yes"),
    (NAMED, "P(type>=b | managed)", "type", "no order", "type in {"),
    (NAMED, "P(trust>='very high' | .) > P(trust>'very high' | .)", "trust>'", "no cat", "low"),
    (NAMED, "P(trust>=low | managed)", "trust", "every category", "low, middle"),
    (NAMED, "P(type in {a, b, c} | managed)", "type", "every category", "a, b, c"),
    (NAMED, "P(type in {a, a} | managed)", "a, a", "listed twice", "once"),
    (NAMED, "P(fees=yes)", "P(", "class is missing", "P(fees=yes | .)"),
    (NAMED, "P(fees=yes | managed, lapsed)", "lapsed", "not in two", "each class"),
    (NAMED, "P(fees=yes | managed=yes)", "managed", "is a class", "district"),
    (NAMED, "P(fees=yes | managed, accounts=no)", "accounts", "do not depend", "joint"),
    (NAMED, "P(fees=yes | managed, overall)", "P(", "prevalences only", "Leave it out"),
    (NAMED, "P(fees, fees=no | managed)", "fees=no", "appears twice", "in {a, b}"),
    (NAMED, "P(managed | fees, fees=no)", "fees=no", "appears twice", "in {a, b}"),
    (NAMED, "P(fees, managed)", "managed", "several answers to one item", "in {"),
    (NAMED, "P(fees, . | managed)", ".", "after the bar", "P(fees=yes | .)"),
    (NAMED, "P(type=a, b | managed)", "b", "braces", "P(type in {a, b}"),
    (NAMED, "P(managed, informal)", "informal", "no joint probability", "P(a) + P(b)"),
    (NAMED, "P(managed=yes)", "managed", "takes no answer", "P(managed)"),
    (NAMED, "P(managed | lapsed)", "lapsed", "a class given a class", "group or answers"),
    (NAMED, "P(. | fees=yes)", "P(", "needs one class", "membership()"),
    (NAMED, "P(managed | fees=yes) ~ Beta(1, 1)", "fees", "given answers", "P(managed)"),
    (NAMED, "3 + 4", "+", "no probability", "P(fees=yes | managed)"),
    (NAMED, "P(managed) > 0.2 and 1 > 0", "1 > 0", "no probability", "P(fees=yes | managed)"),
    (NAMED, "P(managed) > 20", "20", "between 0 and 1", "0.2"),
    (NAMED, "1.5 > P(managed)", "1.5", "between 0 and 1", "0 to 1"),
    (NUMBERED, "P(1) > 0.5", "1)", "a number names none", "P(fees=yes | .)"),
    (NUMBERED, "P(fees=yes | 2) > 0.5", "2)", "a number names none", "P(fees=yes | .)"),
    (NUMBERED, "P(fees=yes | 2) ~ Beta(1, 1)", "2)", "a number names none", "P(fees=yes | .)"),
    (NUMBERED, "P(1, 2) ~ Dirichlet(1, 1)", "1, 2)", "a number names none", "P(fees=yes | .)"),
    (NUMBERED, "a is where P(fees) is highest", "a", "no name for a rule", "classes ="),
    (NUMBERED, "P(fees=yes | ., district=north)", "district", "no item or group", "fees"),
    (NAMED, "manged is where P(fees) is highest", "manged", "near names: 'managed'", "informal"),
    (NAMED, "fees is where P(fees) is highest", "fees", "is an item", "managed"),
    (NAMED, "managed is where P(fees | managed) is highest", "managed)", "no bar", "P(fees=yes)"),
    (NAMED, "managed is where P(fees, accounts=no) is highest", "fees", "one answer", "P(fees"),
    (NAMED, "managed is where P(.) is highest", ".", "one answer", "P(fees=yes)"),
    (NAMED, "managed is where P(managed) is highest", "managed)", "an answer", "prevalence"),
    (NAMED, "managed is where P(accounts) is highest", "accounts", "counts as yes", "declare"),
    (NAMED, "P(managed) ~ Beta(1, 1)", "Beta", "here are 3", "P(managed, informal, lapsed) ~"),
    (NAMED, "P(managed, lapsed) ~ Beta(1, 1)", "Beta", "one probability", "Dirichlet(1, 1, 1)"),
    (NAMED, "P(managed, lapsed) ~ Dirichlet(1, 1)", "managed", "missing: informal", "informal"),
    (NAMED, "P(managed, managed, lapsed) ~ Dirichlet(1, 1, 1)", "managed, l", "twice", "informal"),
    (NAMED, "P(managed, informal, lapsed) ~ Dirichlet(1, 1)", "Dirichlet", "3 names", "1, 1, 1"),
    (NAMED, "P(managed, .) ~ Dirichlet(1)", ".", "every class", "P(.) ~ Dirichlet(1)"),
    (NAMED, "P(., managed) ~ Dirichlet(1)", "managed", "every class", "P(.) ~ Dirichlet(1)"),
    (NAMED, "P(.) ~ Beta(1, 1)", "Beta", "one number", "P(.) ~ Dirichlet(1)"),
    (NAMED, "P(.) ~ Dirichlet(1, 2, 3)", "Dirichlet", "one number", "P(.) ~ Dirichlet(1)"),
    (NAMED, "P(. | overall) ~ Dirichlet(1)", "P(", "overall", "Leave out"),
    (NAMED, "P(. | managed) ~ Dirichlet(1)", "managed", "class given a class", "group"),
    (NAMED, "P(type=a | managed) ~ Beta(1, 1)", "Beta", "3 categories", "a, b, c | managed) ~"),
    (NAMED, "P(type=a, b | .) ~ Dirichlet(1, 1)", "type", "missing: c", "P(type=a, b, c | .) ~"),
    (NAMED, "P(type=a, b, b | .) ~ Dirichlet(1, 1, 1)", "b |", "listed twice", "a, b, c"),
    (NAMED, "P(type=a, b, d | .) ~ Dirichlet(1, 1, 1)", "d |", "no category 'd'", "a, b, c"),
    (NAMED, "P(type=a, b, c | .) ~ Dirichlet(1, 1)", "Dirichlet", "3 names", "1, 1, 1"),
    (NAMED, "P(type in {a, b} | .) ~ Beta(1, 1)", "type", "single answers", "Dirichlet"),
    (NAMED, "P(fees=yes, accounts=no | .) ~ Beta(1, 1)", "accounts", "one item", "Dirichlet(1, 1)"),
    (NAMED, "P(fees=yes, no | .) ~ Beta(1, 1)", "Beta", "one probability", "Dirichlet(1, 1)"),
    (NAMED, "P(fees=yes) ~ Beta(1, 1)", "P(", "class is missing", "P(fees=yes | .)"),
    (NAMED, "P(fees=yes | ., accounts=no) ~ Beta(1, 1)", "accounts", "do not depend", "Leave"),
    (NAMED, "P(district=north) ~ Beta(1, 1)", "district", "group column", "after the bar"),
    (
        NAMED,
        "P(fees | .) ~ Beta(most_likely=0.8, above=0.9, sure=0.95)",
        "Beta",
        "excludes the most likely value",
        "below=0.9",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("vocabulary", "text", "at", "problem", "remedy"), REFUSED)
def test_what_means_nothing_here_is_refused(vocabulary, text, at, problem, remedy):
    with pytest.raises(StatementError) as caught:
        resolve(text, vocabulary)
    assert problem in caught.value.problem
    assert remedy in caught.value.remedy
    assert caught.value.statement == text
    assert text[caught.value.position :].startswith(at)


@pytest.mark.parametrize(
    ("classes", "items", "groups", "message"),
    [
        (("fees", "b"), ("fees",), None, "both a class and an item"),
        (("a", "b"), ("fees",), "a", "both a class and a group column"),
        (("a", "b"), ("fees",), "fees", "both an item and a group column"),
        (("a", "a"), ("fees",), None, "two classes"),
        (("a", "b"), ("fees", "fees"), None, "two items"),
    ],
)
def test_names_are_disjoint(classes, items, groups, message):
    items = tuple(Item(name, ("no", "yes")) for name in items)
    with pytest.raises(ModelError, match=message):
        Vocabulary(items, classes, Groups(groups, ("x", "y")) if groups else None)


@settings(max_examples=100, deadline=None)
@given(
    st.sampled_from(sorted(TERMS) + [text for text in KINDS]),
    st.lists(st.text(min_size=1, max_size=6), min_size=6, max_size=6, unique=True),
)
def test_renaming_classes_and_items_consistently_changes_nothing(text, new):
    old = ["managed", "informal", "lapsed", "fees", "accounts", "type"]
    naming = dict(zip(old, new, strict=True))
    taken = {"trust", "district"} & set(new)
    if TERMS.get(text, text) is None or taken:
        return
    items = tuple(
        Item(naming.get(i.name, i.name), i.categories, ordered=i.ordered, yes=i.yes) for i in ITEMS
    )
    renamed = Vocabulary(items, tuple(naming[c] for c in CLASSES), NAMED.groups)
    before, after = resolve(text, NAMED), resolve(_renamed(text, naming), renamed)
    for name in ("terms", "concentration", "latent_class", "answer"):
        first, second = getattr(before, name, None), getattr(after, name, None)
        if name == "terms" and first is not None:
            first, second = list(first.values()), list(second.values())
        assert first == second


def _renamed(text, naming):
    for name in naming:
        text = text.replace(name, f"\0{name}\0")
    for name, new in naming.items():
        text = text.replace(f"\0{name}\0", "'" + new.replace("'", "''") + "'")
    return text
