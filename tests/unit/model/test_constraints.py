"""What statements ask of single probabilities, and which are refused before sampling."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bayeslca import Item, LatentClassModel
from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.constraint_words import in_words
from bayeslca.model.constraints import read_links
from bayeslca.model.places import Link, Place, PrevalenceVector, ResponseVector
from bayeslca.model.statements.resolve import read_statements
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import Groups

ITEMS = (
    Item("fees", ("no", "yes"), yes="yes"),
    Item("meets", ("no", "yes"), yes="yes"),
    Item("type", ("a", "b", "c")),
    Item("trust", ("low", "fair", "high", "full"), ordered=True),
)
NAMES = ("managed", "informal", "lapsed")
DISTRICTS = Groups("district", ("north", "south"))
APART = (
    "P(trust=low, fair, high, full | managed) ~ Dirichlet(1, 1, 1, 2)",
    "P(trust=low, fair, high, full | informal) ~ Dirichlet(1, 1, 2, 1)",
)


def links(*texts, groups=None, free=(), items=ITEMS):
    vocabulary = Vocabulary(items, NAMES, groups)
    return read_links(read_statements(texts, vocabulary).constraints, vocabulary, free)


def model(*texts, groups=None, **options):
    return LatentClassModel(ITEMS, NAMES, (*APART, *texts), groups, **options)


def fees(k, category=1, g=0):
    return Place(ResponseVector(g, 0, k), category)


def test_a_chain_means_all_its_links_and_lower_reads_as_higher():
    text = "P(fees | lapsed) < P(fees | informal) <= P(fees | managed)"
    assert links(text) == (
        Link(fees(1), ">", fees(2), text),
        Link(fees(0), ">=", fees(1), text),
    )


def test_the_dot_means_every_class_on_its_own():
    text = "0.2 < P(fees=yes | .)"
    assert links(text) == tuple(Link(fees(k), ">", 0.2, text) for k in range(3))


def test_without_a_group_every_group_is_meant():
    text = "P(managed) > P(lapsed)"
    expected = [
        Link(Place(PrevalenceVector(g), 0), ">", Place(PrevalenceVector(g), 2), text)
        for g in range(2)
    ]
    assert list(links(text, groups=DISTRICTS)) == expected
    shared = links("P(fees | managed) > 0.5", groups=DISTRICTS)
    free = links("P(fees | managed) > 0.5", groups=DISTRICTS, free={0})
    assert [link.left for link in shared] == [fees(0)]
    assert [link.left for link in free] == [fees(0), fees(0, g=1)]


def test_several_categories_are_one_minus_the_last():
    (link,) = links("P(trust>=fair | managed) > 0.7")
    assert link.left == pytest.approx(0.3)
    assert link.right == Place(ResponseVector(0, 3, 0), 0)
    (link,) = links("P(type in {a, b} | managed) > P(type in {b, c} | lapsed)")
    assert link.left == Place(ResponseVector(0, 2, 2), 0)
    assert link.right == Place(ResponseVector(0, 2, 0), 2)
    (link,) = links("P(type in {a, b} | managed) = 1/4")
    assert (link.sign, {link.left, link.right}) == (
        "=",
        {0.75, Place(ResponseVector(0, 2, 0), 2)},
    )


def test_true_comparisons_of_numbers_say_nothing():
    assert len(links("0 < 0.2 < P(fees | managed)")) == 1


REFUSED = {
    "P(fees | managed) - P(fees | lapsed) > 0.2": "not sums or differences",
    "P(trust>=high | managed) > 0.5": "several answers together",
    "P(type in {a, b} | managed) > P(fees | managed)": "compared with a single answer",
    "P(managed) > P(fees | managed)": "against each other",
    "P(fees, meets | managed) > 0.5": "joint probability",
    "0.5 < 0.2 < P(fees | managed)": "it is not true",
    "P(fees | managed) > 1/0": "divides by 0",
    "P(managed | overall) > 0.5": "mean over groups",
    "P(fees | managed, district=north) > 0.5": "all groups share",
}


@pytest.mark.parametrize("text", REFUSED)
def test_what_cannot_be_a_constraint_is_refused_by_name(text):
    with pytest.raises(StatementError, match=REFUSED[text]) as caught:
        links(text, groups=DISTRICTS)
    assert caught.value.remedy


CONTRADICTIONS = [
    ("P(fees | managed) > P(fees | lapsed)", "P(fees | lapsed) > P(fees | managed)"),
    ("P(fees | managed) > P(fees | lapsed)", "P(fees | lapsed) = P(fees | managed)"),
    ("P(meets | managed) < 0.3", "P(meets | managed) >= 0.8"),
    ("P(meets | managed) = 0.2", "P(meets | managed) > 0.5"),
    ("P(meets | managed) = 0.2", "P(meets=no | managed) = 0.7"),
    ("P(type=a | managed) > 0.6", "P(type=b | managed) > 0.5"),
    ("P(meets | managed) = 0", "P(meets | managed) ~ Beta(2, 1)"),
    ("P(meets | managed) >= 0.8", "P(meets | managed) <= 0.8"),
    ("P(managed) > 0.5", "P(lapsed) > 0.6"),
    ("P(managed) = 0.2", "P(managed) > P(lapsed)", "P(lapsed) = P(informal)"),
    (
        "P(fees | managed) > P(meets | managed)",
        "P(meets | managed) > P(fees | lapsed)",
        "P(fees=no | lapsed) < P(fees=no | managed)",
    ),
]


@pytest.mark.parametrize("texts", CONTRADICTIONS)
def test_contradictions_name_the_guilty_statements_and_no_others(texts):
    innocent = "P(type=c | informal) > 0.1"
    with pytest.raises(ModelError) as caught:
        model(innocent, *texts)
    message = str(caught.value)
    assert all(text in message for text in texts)
    assert innocent not in message


@pytest.mark.parametrize("texts", CONTRADICTIONS)
def test_no_statement_of_a_contradiction_can_be_spared(texts):
    for left_out in texts:
        model(*(text for text in texts if text != left_out))


@pytest.mark.parametrize("text", ["P(fees | managed) > 1", "P(meets | .) < 0"])
def test_a_statement_may_contradict_what_a_probability_is(text):
    with pytest.raises(ModelError, match="no probabilities keep this statement"):
        model(text)


def test_impossible_answers_of_known_zeros_name_the_case():
    import pandas as pd

    from bayeslca import Responses

    frame = pd.DataFrame({"who": ["u", "v"], "fees": ["yes", "no"], "meets": ["yes", "no"]})
    data = Responses.from_frame(frame, items=["fees", "meets"], case="who")
    sure = LatentClassModel(
        data.items,
        ("a", "b"),
        ["P(fees=yes | a) = 0", "P(meets=yes | b) = 0", "P(fees=yes | b) ~ Beta(2, 1)"],
    )
    with pytest.raises(ModelError, match=r"'u'|: u"):
        sure.sample(data, seed=1, progress=False)


# --- meaning in the table ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (
            "P(fees=yes | managed) > P(fees=yes | lapsed)",
            "fees=yes is more likely in managed than in lapsed",
        ),
        ("P(meets=yes | lapsed) = 0", "meets=yes in lapsed is impossible"),
        ("0.2 <= P(fees=yes | .)", "fees=yes in each class has a probability at least 0.2"),
        ("P(managed) > P(lapsed)", "managed is more common than lapsed"),
        (
            "P(type=a | managed) = P(fees=yes | lapsed)",
            "type=a in managed is as likely as fees=yes in lapsed",
        ),
        (
            "P(managed | district=north) < 0.5",
            "managed of district north has a probability below 0.5",
        ),
    ],
)
def test_constraints_are_said_in_words(text, words):
    vocabulary = Vocabulary(ITEMS, NAMES, DISTRICTS)
    (constraint,) = read_statements([text], vocabulary).constraints
    assert in_words(constraint, vocabulary) == words
    assert words in " ".join(model(text, groups=DISTRICTS).describe().split())


def test_free_items_have_a_response_group_each():
    both = model(groups=DISTRICTS, free_by_group=("type",))
    assert both.table.n_response_groups == 2
    rows = both.table.response_row
    same = (rows[0] == rows[1]).tolist()
    assert same == [True] * 4 + [False] * 3 + [True] * 4
    assert both.table.n_elements == 3 * (2 + 2 + 3 + 3 + 4)
    assert LatentClassModel.from_dict(both.to_dict()) == both
    assert "free_by_group=('type',)" in repr(both)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"free_by_group": True}, "the model has no groups"),
        ({"groups": DISTRICTS, "free_by_group": ("tipe",)}, "near names: 'type'"),
        ({"groups": DISTRICTS, "free_by_group": "type"}, "must be True, False or a list"),
    ],
)
def test_wrong_free_items_are_refused(options, message):
    with pytest.raises(ModelError, match=message):
        model(**options)


def test_log_likelihood_of_the_free_model_is_the_sum_over_groups():
    """Rule 6: with everything free by group, the groups are models of their own."""
    from bayeslca.model.compile import compile_units
    from bayeslca.model.probabilities import log_unit_likelihood
    from bayeslca.model.simulate import draw_parameters

    free = model(groups=DISTRICTS, free_by_group=True)
    data = free.simulate(60, seed=3).responses
    parameters = draw_parameters(free.table, free.prevalence_source, np.random.default_rng(1))
    units = compile_units(free.table, free.units(data))
    each = log_unit_likelihood(free.table, units, parameters.elements, parameters.prevalence)
    total = float(each @ units.count)
    alone = model()
    half = free.table.n_elements // 2
    parts = 0.0
    for g in range(2):
        of_group = data.units.group == g
        elements = parameters.elements[g * half : (g + 1) * half]
        one = compile_units(alone.table, alone.units(data))
        values = log_unit_likelihood(alone.table, one, elements, parameters.prevalence[g : g + 1])
        patterns = alone.units(data).pattern
        at = [
            int(np.flatnonzero((patterns == p).all(axis=1))[0])
            for p in data.units.pattern[of_group]
        ]
        parts += float(values[at] @ data.units.count[of_group])
    assert total == pytest.approx(parts, rel=1e-12)


ORDERS = st.lists(
    st.tuples(
        st.sampled_from(NAMES), st.sampled_from(["fees", "meets"]), st.sampled_from(NAMES)
    ).filter(lambda t: t[0] != t[2]),
    min_size=1,
    max_size=4,
)


@settings(max_examples=25, deadline=None)
@given(ORDERS, st.permutations(range(3)), st.booleans())
def test_renaming_classes_and_items_changes_nothing(orders, renamed, swap):
    """The same statements with other names for the same things: same refusal, same table."""
    new = dict(zip(NAMES, [NAMES[k] for k in renamed], strict=True))
    new |= {"fees": "meets", "meets": "fees"} if swap else {"fees": "fees", "meets": "meets"}

    def outcome(name):
        items = sorted(ITEMS, key=lambda item: {"fees": 0, "meets": 1}.get(item.name, 2))
        items = [Item(name(i.name), i.categories, yes=i.yes) for i in items[:2]]
        texts = [
            f"P({name(item)}=yes | {name(a)}) > P({name(item)}=yes | {name(b)})"
            for a, item, b in orders
        ]
        texts += [f"P({name('fees')}=yes | {name('managed')}) ~ Beta(3, 1)"]
        texts += [f"P({name('fees')}=yes | {name('informal')}) ~ Beta(2, 1)"]
        try:
            made = LatentClassModel(items, [name(k) for k in NAMES], texts)
        except ModelError as error:
            return "contradict" in str(error)
        table = made.table
        return (
            table.element_prior.tolist(),
            table.order_above.tolist(),
            table.order_below.tolist(),
            made.log_bounds_probability,
        )

    assert outcome(lambda name: name) == outcome(lambda name: new.get(name, name))


@pytest.mark.parametrize(
    ("texts", "fewer"),
    [
        ((), 0),
        (("P(managed) = 0.2",), 1),
        (("P(managed) = P(lapsed)",), 1),
        (("P(managed) = 0.2", "P(lapsed) = 0.3"), 2),
        (("P(managed) > P(lapsed)", "P(fees | managed) > P(fees | lapsed)"), 0),
        (("P(meets | .) = P(fees | .)",), 3),
        (("P(type=a | managed) = P(fees | managed)", "P(type=b | lapsed) = 0"), 2),
    ],
)
def test_free_parameters_count_known_ones_out_and_shared_ones_once(texts, fewer):
    free = model().identifiability().n_free
    found = model(*texts).identifiability()
    assert found.n_free == free - fewer
    assert found.identified
    assert f"{free - fewer} free parameters" in model(*texts).describe()
