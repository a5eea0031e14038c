"""The notation: reading and writing are inverse, and every slip is told how to put it right."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bayeslca.exceptions import StatementError
from bayeslca.model.statements.notation import DEEPEST, parse, to_text
from bayeslca.model.statements.syntax import (
    Absolute,
    AllClasses,
    Beta,
    BinaryOperation,
    Conjunction,
    Dirichlet,
    ElicitedBeta,
    Event,
    Name,
    NamingRule,
    Negative,
    Number,
    Overall,
    Prior,
    Probability,
    Relation,
    probabilities,
)

# --- what is read --------------------------------------------------------------------------------


def event(name, sign="", *categories):
    return Event(Name(name), sign, tuple(Name(c) for c in categories))


FEES_MANAGED = Probability((event("fees", "=", "yes"),), (event("managed"),))

READ = {
    "P(managed)": Probability((event("managed"),)),
    "P(managed | district=north)": Probability(
        (event("managed"),), (event("district", "=", "north"),)
    ),
    "P(managed | overall)": Probability((event("managed"),), (Overall(),)),
    "P(fees=yes|managed)": FEES_MANAGED,
    "P ( fees = yes | managed )": FEES_MANAGED,
    "P(\n  fees=yes\n  | managed)": FEES_MANAGED,
    "P('fees'=\"yes\" | managed)": FEES_MANAGED,
    "P(fees | .)": Probability((event("fees"),), (AllClasses(),)),
    "P(trust>=agree | open)": Probability((event("trust", ">=", "agree"),), (event("open"),)),
    "P(trust in {a, 'b c'} | open)": Probability(
        (event("trust", "in", "a", "b c"),), (event("open"),)
    ),
    "P(fees=yes, accounts=no | managed, district=north)": Probability(
        (event("fees", "=", "yes"), event("accounts", "=", "no")),
        (event("managed"), event("district", "=", "north")),
    ),
    "P(q1=3 | 2.b-c)": Probability((event("q1", "=", "3"),), (event("2.b-c"),)),
    "P(größe=ja | zürich)": Probability((event("größe", "=", "ja"),), (event("zürich"),)),
    "P('it''s')": Probability((event("it's"),)),
    "P('overall' | overall)": Probability((event("overall"),), (Overall(),)),
    "P(P=P | abs)": Probability((event("P", "=", "P"),), (event("abs"),)),
    "P(a) > .5 >= 1e-3": Relation(
        (Probability((event("a"),)), Number(0.5), Number(0.001)), (">", ">=")
    ),
    "P(a) = 0 and P(a) < 1": Conjunction(
        (
            Relation((Probability((event("a"),)), Number(0.0)), ("=",)),
            Relation((Probability((event("a"),)), Number(1.0)), ("<",)),
        )
    ),
    "1 - 2 - 3": BinaryOperation("-", BinaryOperation("-", Number(1), Number(2)), Number(3)),
    "1 - (2 - 3)": BinaryOperation("-", Number(1), BinaryOperation("-", Number(2), Number(3))),
    "1 + 2 * -3": BinaryOperation(
        "+", Number(1), BinaryOperation("*", Number(2), Negative(Number(3)))
    ),
    "abs(1 / 2)": Absolute(BinaryOperation("/", Number(1), Number(2))),
    "P(fees=yes | managed) ~ Beta(9, 0.5)": Prior(FEES_MANAGED, Beta(9, 0.5)),
    "P(fees=yes | managed) ~ Beta(sure=0.95, below=0.9, most_likely=0.8)": Prior(
        FEES_MANAGED, ElicitedBeta(0.8, "below", 0.9, 0.95)
    ),
    "P(t=a, b | m) ~ Dirichlet(1, 2)": Prior(
        Probability((event("t", "=", "a"), event("b")), (event("m"),)), Dirichlet((1, 2))
    ),
    "m is where P(fees=yes) is highest": NamingRule(
        Name("m"), Probability((event("fees", "=", "yes"),)), "highest"
    ),
    "m is where prevalence is lowest": NamingRule(Name("m"), None, "lowest"),
}


@pytest.mark.parametrize("text", READ)
def test_a_statement_is_read_as_it_is_meant(text):
    assert parse(text) == READ[text]


def test_positions_point_into_the_text():
    text = "P(a) > P(fees = yes | 'm')"
    relation = parse(text)
    right = relation.terms[1]
    assert text[right.position :].startswith("P(fees")
    assert text[right.events[0].categories[0].position :].startswith("yes")
    assert text[right.given[0].position :].startswith("'m'")


def test_probabilities_come_from_left_to_right():
    names = [p.events[0].name.text for p in probabilities(parse("abs(P(a) - 2*P(b)) < P(c)"))]
    assert names == ["a", "b", "c"]
    assert len(list(probabilities(parse("P(a) > P(b) and P(c) > P(a)")))) == 4


# --- reading and writing are inverse --------------------------------------------------------------

plain_names = st.from_regex(r"\w[\w.\-]{0,5}", fullmatch=True)
odd_names = st.text(st.characters(exclude_categories=("Cs",)), min_size=1, max_size=8)
reserved = st.sampled_from(
    ['it\'s "so"', "'\"", "overall", "and", "in", "where", "P", "abs", "prevalence", "1", "1e5"]
)
names = st.builds(Name, st.one_of(plain_names, odd_names, reserved))
single = st.tuples(names)
events = st.one_of(
    st.builds(Event, names),
    st.builds(Event, names, st.sampled_from(["=", ">", "<", ">=", "<="]), single),
    st.builds(Event, names, st.just("in"), st.lists(names, min_size=1, max_size=3).map(tuple)),
    st.just(AllClasses()),
)
conditions = st.one_of(
    st.builds(Event, names),
    st.builds(Event, names, st.just("="), single),
    st.just(AllClasses()),
    st.just(Overall()),
)
probability_trees = st.builds(
    Probability,
    st.lists(events, min_size=1, max_size=3).map(tuple),
    st.lists(conditions, max_size=3).map(tuple),
)
amounts = st.floats(0, 1e300, allow_nan=False)
positive = st.floats(1e-300, 1e300, allow_nan=False)
numbers = st.builds(Number, amounts)
expressions = st.recursive(
    st.one_of(numbers, probability_trees),
    lambda inner: st.one_of(
        st.builds(Negative, inner),
        st.builds(Absolute, inner),
        st.builds(BinaryOperation, st.sampled_from("+-*/"), inner, inner),
    ),
    max_leaves=6,
)
signs = st.sampled_from([">", "<", ">=", "<=", "="])
relations = st.lists(st.tuples(signs, expressions), min_size=1, max_size=3).flatmap(
    lambda links: expressions.map(
        lambda first: Relation((first, *(t for _, t in links)), tuple(s for s, _ in links))
    )
)
distributions = st.one_of(
    st.builds(Beta, positive, positive),
    st.builds(ElicitedBeta, amounts, st.sampled_from(["above", "below"]), amounts, amounts),
    st.builds(Dirichlet, st.lists(positive, min_size=1, max_size=4).map(tuple)),
)
statements = st.one_of(
    expressions,
    relations,
    st.lists(relations, min_size=2, max_size=3).map(lambda parts: Conjunction(tuple(parts))),
    st.builds(Prior, probability_trees, distributions),
    st.builds(
        NamingRule,
        names,
        st.none() | probability_trees,
        st.sampled_from(["highest", "lowest"]),
    ),
)


@settings(max_examples=500, deadline=None)
@given(statements)
def test_what_is_written_is_read_back(statement):
    assert parse(to_text(statement)) == statement


@settings(max_examples=200, deadline=None)
@given(statements)
def test_writing_what_was_read_changes_nothing_more(statement):
    text = to_text(statement)
    assert to_text(parse(text)) == text


pieces = st.sampled_from(
    [
        *"P( P() | ~ = > < >= <= + - * / ( ) { } , . ; % ' \" and or not in is where".split(),
        *"overall fees yes managed 0.5 0,5 == => Beta Dirichlet( abs( highest ≥ \n".split(" "),
        "prevalence",
        "Beta(most_likely=0.8, above=0.6, sure=0.9)",
        "P(fees=yes | managed)",
    ]
)


def refusal(text):
    """Return the error that a text gives; None when it is read."""
    try:
        parse(text)
    except StatementError as error:
        return error
    return None


@settings(max_examples=800, deadline=None)
@given(
    st.one_of(st.text(), st.lists(pieces, max_size=12).map(" ".join), st.lists(pieces).map("".join))
)
def test_any_text_gives_a_tree_or_a_statement_error(text):
    error = refusal(text)
    if error is not None:
        assert 0 <= error.position <= len(text)
        assert error.problem
        assert error.remedy
        assert "\n" not in error.statement
        assert str(error)


@settings(max_examples=300, deadline=None)
@given(statements, st.data())
def test_a_damaged_statement_gives_a_tree_or_a_statement_error(statement, data):
    text = to_text(statement)
    at = data.draw(st.integers(0, len(text)))
    width = data.draw(st.integers(0, 3))
    damaged = text[:at] + data.draw(st.text(max_size=2)) + text[at + width :]
    error = refusal(damaged)
    assert error is None or 0 <= error.position <= len(damaged)


# --- what is refused ------------------------------------------------------------------------------

# statement, text at the caret, part of the problem, part of the remedy
REFUSED = [
    ("", "", "empty", "P(fees=yes | managed)"),
    ("  \n ", " ", "empty", "P(fees=yes | managed)"),
    ("P(a | b) == 0.5", "==", "'=='", "one equals sign"),
    ("P(fees==yes | b) > 0.5", "==", "'=='", "one equals sign"),
    ("P(a | b) => 0.5", "=>", "'=>'", ">="),
    ("P(a | b) =< 0.5", "=<", "'=<'", "<="),
    ("P(a | b) ≥ 0.5", "≥", "'≥'", ">="),
    ("P(trust≥agree | b) > 0.5", "≥", "'≥'", ">="),
    ("P(a | b) ≤ 0.5", "≤", "'≤'", "<="),
    ("P(a) ≈ P(b)", "≈", "'≈'", "abs(a - b) < 0.1"),
    ("P(a | b) > 20%", "%", "percentages", "Write 0.2."),
    ("P(a | b) > 2.5 % and P(a) > P(b)", "%", "percentages", "Write 0.025."),
    ("P(a | b) > 0,5", ",5", "point", "Write 0.5."),
    ("P(a) > 0,25 and P(b) > 0.1", ",25", "point", "Write 0.25."),
    ("P(a) > P(b) or P(b) > P(c)", "or", "'or'", "rivals"),
    ("P(a or b) > 0.5", "or", "'or'", "rivals"),
    ("not P(a) > P(b)", "not", "'not'", "a <= b"),
    ("P(a) > not P(b)", "not", "'not'", "a <= b"),
    ("P(not a) > 0.5", "not", "'not'", "a <= b"),
    ("P(a) != P(b)", "!=", "'!='", "abs(a - b) > 0.1"),
    ("P(a) <> P(b)", "<>", "'<>'", "abs(a - b) > 0.1"),
    ("P(a) ≠ P(b)", "≠", "'≠'", "abs(a - b) > 0.1"),
    ("P(a) && P(b)", "&&", "'&&'", "the word and"),
    ("P(a) AND P(b) > 0.5", "AND", "'AND'", "Write and"),
    ("P(a) >> P(b)", ">>", "'>>'", "Write >"),
    ("P(a) – P(b) > 0.1", "–", "dash", "hyphen"),
    ("P(a) × P(b)", "×", "'×'", "a * b"),
    ("P(a)^2 > 0.1", "^", "'^'", "a * a"),
    ("P(a)**2 > 0.1", "**", "'**'", "a * a"),
    ("P(fees=yes | managed > 0.5", "P(fees", "not closed", "parenthesis"),
    ("P(a) > P(fees=yes | managed", "P(fees", "not closed", "parenthesis"),
    ("P(fees=yes | managed ~ Beta(1, 1)", "P(fees", "not closed", "parenthesis"),
    ("(P(a) > 0.5", "> 0.5", "closing parenthesis", "P(fees=yes | managed)"),
    ("(P(a) - P(b)", "", "closing parenthesis", "Close every"),
    ("P(a) > 0.5)", ")", "closes nothing", "Leave it out"),
    ("P(fees=yes managed) > 0.5", "managed", "bar '|' is missing", "P(fees=yes | managed)"),
    ("P(pays fees=yes | managed) > 0.5", "fees", "no quotes", "'pays fees'"),
    ("P(fees=yes | water board) > 0.5", "board", "no quotes", "P(fees=yes | managed"),
    ("P(a | b > 0.5)", "> 0.5", "comparison stands after the bar", "district=north"),
    ("P(a | b | c)", "| c", "found '|'", "P(fees=yes | managed)"),
    ("P(a) > 0.5 P(b)", "P(b)", "complete before", "'and'"),
    ("P(a) > 0.5; P(b) > 0.2", ";", "complete before ';'", "by itself"),
    ("P(a) > 0.5.", ".", "complete before '.'", "by itself"),
    ("p(a) > 0.5", "p(", "'p('", "capital P"),
    ("Pr(a) > 0.5", "Pr(", "'Pr('", "capital P"),
    ("0.5 < prob (a)", "prob", "'prob ('", "capital P"),
    ("P[a] > 0.5", "[", "round parentheses", "P(fees=yes | managed)"),
    ("P('a) > 0.5", "'a", "never closed", "Close it"),
    ("P(a | l'eau) > 0.5", "'eau", "never closed", '" quotes'),
    ("P(“a”) > 0.5", "“", "not a quote", "straight quotes"),
    ('P("" | a) > 0.5', '""', "missing between these quotes", "name of a class"),
    ("P(a) ~ Gamma(1, 2)", "Gamma", "no distribution 'Gamma'", "Beta(9, 2)"),
    ("P(a) ~ beta(1, 2)", "beta", "near names: 'Beta'", "Beta(9, 2)"),
    ("P(a) ~ 0.5", "0.5", "a distribution", "Beta(9, 2)"),
    ("P(a) ~ Beta", "", "opening parenthesis", "Beta(9, 2)"),
    ("P(a) ~ Beta()", "Beta", "not 0", "Beta(9, 2)"),
    ("P(a) ~ Beta(1)", "Beta", "not 1", "Beta(9, 2)"),
    ("P(a) ~ Beta(0,5, 2)", "Beta", "not 3", "a point: 0.5"),
    ("P(a) ~ Beta(0, 2)", "0, 2", "larger than 0", "Jeffreys"),
    ("P(a) ~ Beta(2, -1)", "-1", "found -1", "Jeffreys"),
    ("P(a) ~ Beta(2, 1e999)", "1e999", "too large", "finite"),
    ("P(a) ~ Beta(a=1, b=2)", "a=1", "no keyword 'a'", "most_likely=0.8"),
    (
        "P(a) ~ Beta(most_likly=0.8, above=0.6, sure=0.9)",
        "most_likly",
        "'most_likely'",
        "sure=0.95",
    ),
    ("P(a) ~ Beta(most_likely=0.8, sure=0.9)", "Beta", "one bound", "above=0.6"),
    ("P(a) ~ Beta(most_likely=0.8, above=0.6)", "Beta", "and sure", "above=0.6"),
    ("P(a) ~ Beta(most_likely=.8, above=.6, below=.9, sure=.9)", "Beta", "one bound", "above=0.6"),
    ("P(a) ~ Beta(most_likely=.8, above=.6, above=.6, sure=.9)", "above=.6, sure", "twice", "once"),
    ("P(a) ~ Beta(0.8, above=.6, sure=.9)", "0.8", "not both", "Beta(9, 2)"),
    ("P(a) ~ Dirichlet()", "Dirichlet", "a number for each name", "Dirichlet(2, 2, 2)"),
    ("P(a) ~ Dirichlet(alpha=1)", "alpha", "no keyword 'alpha'", "Dirichlet(2, 2, 2)"),
    ("P(a) ~ Dirichlet(1, 0)", "0)", "larger than 0", "Jeffreys"),
    ("P(a) + P(b) ~ Beta(1, 1)", "+ P(b)", "one probability", "~ Beta(9, 2)"),
    ("P(a) > 0.5 ~ Beta(1, 1)", "~", "stands alone", "of its own"),
    ("P(a) ~ Beta(1, 1) and P(b) > 0.5", "and", "stands alone", "of its own"),
    ("managed > lapsed", "managed", "not with a name", "Write P(managed)"),
    ("fees=yes > 0.5", "fees", "not with a name", "Write P(fees)"),
    ("P(managed) > lapsed", "lapsed", "'lapsed' stands where", "P(lapsed)"),
    ("managed is where P(fees=yes) is high", "high", "'highest' or 'lowest'", "is highest"),
    ("managed is where fees is highest", "fees", "'fees' stands where", "P(fees)"),
    ("managed is P(fees=yes)", "P(", "'where' was expected", "managed is where"),
    ("P(fees=yes) is highest", "is", "begins with the class", "managed is where"),
    ("P()", ")", "a name", "P(fees=yes | managed)"),
    ("P(a | )", ")", "a name", "P(fees=yes | managed)"),
    ("P(fees= | a)", "| a", "a name", "P(fees=yes | managed)"),
    ("P(a) >", "", "ends too early", "P(fees=yes | managed)"),
    ("> 0.5", "> 0.5", "a probability such as", "P(fees=yes | managed)"),
    ("|P(a) - P(b)| < 0.1", "|P", "between bars", "abs(a - b)"),
    ("P(a) and P(b) > 0.5", "P(a)", "compares nothing", "needs a comparison"),
    ("P(and) > 0.5", "and", "word of the notation", "'and'"),
    ("P(overall) > 0.5", "overall", "word of the notation", "'overall'"),
    ("where is where P(a) is highest", "where", "word of the notation", "'where'"),
    ("P(trust in agree | a)", "agree", "opening brace", "in {agree"),
    ("P(trust in {a | b)", "| b", "closing brace", "in {agree"),
    ("-" * 200 + "1", "-", "levels deep", "several statements"),
    ("1" + "+1" * 200, "1+", "levels deep", "several statements"),
]


@pytest.mark.parametrize(("text", "at", "problem", "remedy"), REFUSED)
def test_a_slip_is_shown_with_its_remedy(text, at, problem, remedy):
    with pytest.raises(StatementError) as caught:
        parse(text)
    assert text[caught.value.position :].startswith(at)
    assert (at != "") or caught.value.position == len(text)
    assert problem in caught.value.problem
    assert remedy in caught.value.remedy
    for terminal in ("PROBABILITY", "WORD", "QUOTED", "$END", "CLOSE", "Token"):
        assert terminal not in str(caught.value)


def test_the_caret_stands_under_the_slip():
    with pytest.raises(StatementError) as caught:
        parse("P(a)\n > 0.2 or P(b) > 1")
    _, statement, caret, _ = str(caught.value).split("\n")
    assert statement[caret.index("^") :].startswith("or P(b)")


def test_a_statement_is_a_text():
    with pytest.raises(StatementError, match="not float"):
        parse(0.5)  # type: ignore[arg-type]


def test_what_is_nested_up_to_the_limit_is_read():
    text = "-" * DEEPEST + "1"
    assert to_text(parse(text)) == text
