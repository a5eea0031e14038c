"""Constraints in words: what each statement holds to be true."""

from __future__ import annotations

from bayeslca.model.statements.resolved import PrevalenceTerm, ResolvedRelations, ResponseTerm, Term
from bayeslca.model.statements.syntax import Comparison, Expression, Number, Probability
from bayeslca.model.statements.vocabulary import Vocabulary

TURNED: dict[Comparison, Comparison] = {"<": ">", ">": "<", "<=": ">=", ">=": "<=", "=": "="}
MORE: dict[Comparison, str] = {
    ">": "more likely than",
    ">=": "at least as likely as",
    "<": "less likely than",
    "<=": "at most as likely as",
    "=": "as likely as",
}
SAME_ANSWER: dict[Comparison, str] = {
    ">": "is more likely in {} than in {}",
    ">=": "is at least as likely in {} as in {}",
    "<": "is less likely in {} than in {}",
    "<=": "is at most as likely in {} as in {}",
    "=": "is as likely in {} as in {}",
}
LIMIT: dict[Comparison, str] = {">": "above", ">=": "at least", "<": "below", "<=": "at most"}


def in_words(resolved: ResolvedRelations, vocabulary: Vocabulary) -> str:
    """Return what a constraint holds to be true, as a sentence without its full stop."""
    return "; ".join(
        _link(left, sign, right, resolved, vocabulary)
        for relation in resolved.relations
        for left, sign, right in relation.links()
    )


def _link(
    left: Expression,
    sign: Comparison,
    right: Expression,
    resolved: ResolvedRelations,
    vocabulary: Vocabulary,
) -> str:
    if not isinstance(left, Probability):
        left, sign, right = right, TURNED[sign], left
    if not isinstance(left, Probability):
        return "two numbers are compared"
    one = resolved.terms[left]
    if not isinstance(right, Probability):
        value = right.value if isinstance(right, Number) else None
        return f"{_phrase(one, vocabulary)} {_against_number(sign, value)}"
    two = resolved.terms[right]
    if isinstance(one, ResponseTerm) and isinstance(two, ResponseTerm):
        if one.answers == two.answers:
            where = SAME_ANSWER[sign].format(_where(one, vocabulary), _where(two, vocabulary))
            return f"{_answer(one, vocabulary)} {where}"
    more = MORE[sign]
    if isinstance(one, PrevalenceTerm):
        more = more.replace("likely", "common")
    return f"{_phrase(one, vocabulary)} is {more} {_phrase(two, vocabulary)}"


def _against_number(sign: Comparison, value: float | None) -> str:
    if value is None:
        return "is compared with a number"
    if sign != "=":
        return f"has a probability {LIMIT[sign]} {value:.4g}"
    if value in (0.0, 1.0):
        return "is impossible" if value == 0.0 else "is certain"
    return f"has the known probability {value:.4g}"


def _phrase(term: Term, vocabulary: Vocabulary) -> str:
    if isinstance(term, PrevalenceTerm):
        name = "each class" if term.latent_class is None else vocabulary.classes[term.latent_class]
        return f"{name}{_in_group(term.group, vocabulary)}"
    assert isinstance(term, ResponseTerm)
    return f"{_answer(term, vocabulary)} in {_where(term, vocabulary)}"


def _answer(term: ResponseTerm, vocabulary: Vocabulary) -> str:
    said = []
    for item, categories in term.answers:
        names = [vocabulary.items[item].categories[c] for c in categories]
        said.append(f"{vocabulary.items[item].name}={' or '.join(names)}")
    return " together with ".join(said)


def _where(term: ResponseTerm, vocabulary: Vocabulary) -> str:
    name = "each class" if term.latent_class is None else vocabulary.classes[term.latent_class]
    return f"{name}{_in_group(term.group, vocabulary)}"


def _in_group(group: int | str, vocabulary: Vocabulary) -> str:
    if isinstance(group, int) and vocabulary.groups is not None:
        return f" of {vocabulary.groups.name} {vocabulary.groups.levels[group]}"
    return ""
