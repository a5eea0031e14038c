"""From relations to links: what each statement asks of single probabilities.

A statement without a group means every group, ``.`` means every class (each on its own), and a
chain means all its links; here they are written out.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeAlias

from bayeslca.model.answered_together import ItemSet
from bayeslca.model.joint_zeros import joint_zero_links
from bayeslca.model.places import Link, LinkSign, Place, PrevalenceVector, ResponseVector, Side
from bayeslca.model.statements.notation import statement_error
from bayeslca.model.statements.resolved import PrevalenceTerm, ResolvedRelations, ResponseTerm
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.syntax import (
    Absolute,
    BinaryOperation,
    Comparison,
    Expression,
    Negative,
    Number,
    Probability,
    probabilities,
)
from bayeslca.model.statements.vocabulary import Vocabulary


@dataclass(frozen=True, slots=True)
class _Part:
    """One side of a comparison: a number, or a probability (or one minus it)."""

    value: float | None = None
    term: PrevalenceTerm | ResponseTerm | None = None
    category: int = 0
    complement: bool = False


_Known: TypeAlias = "tuple[Side, bool]"


def read_links(
    relations: Sequence[ResolvedRelations],
    vocabulary: Vocabulary,
    free_items: Collection[int] = (),
    item_sets: Sequence[ItemSet] = (),
) -> tuple[Link, ...]:
    """Write out the comparisons of single probabilities that statements make.

    Parameters
    ----------
    relations : sequence of ResolvedRelations
    vocabulary : Vocabulary
    free_items : collection of int
        Items whose response probabilities are free by group.
    item_sets : sequence of ItemSet
        Items that are answered together: their joint answers can be held at 0.

    Raises
    ------
    StatementError
        Where a statement can be a hypothesis or a quantity but not a constraint.
    """
    found: dict[Link, None] = {}
    for resolved in relations:
        try:
            found.update(dict.fromkeys(_links(resolved, vocabulary, free_items, item_sets)))
        except Refusal as refusal:
            raise statement_error(refusal, resolved.text) from None
    return tuple(found)


def _links(
    resolved: ResolvedRelations,
    vocabulary: Vocabulary,
    free_items: Collection[int],
    item_sets: Sequence[ItemSet],
) -> Iterator[Link]:
    for relation in resolved.relations:
        for left, sign, right in relation.links():
            joint = _joint_zero(left, sign, right, resolved)
            if joint is not None:
                yield from joint_zero_links(joint, vocabulary, free_items, item_sets, resolved.text)
                continue
            one, two = _part(left, resolved, vocabulary), _part(right, resolved, vocabulary)
            _refuse_mixed(one, two, right)
            for position in (left, right):
                _refuse_shared_group(position, resolved, vocabulary, free_items)
            for group in _groups(one, two, vocabulary):
                for latent_class in _classes(one, two, vocabulary):
                    sides = [_side(part, group, latent_class, free_items) for part in (one, two)]
                    yield from _link(sides[0], sign, sides[1], resolved.text, right)


def _part(expression: Expression, resolved: ResolvedRelations, vocabulary: Vocabulary) -> _Part:
    if not isinstance(expression, Probability):
        if any(True for _ in probabilities(expression)):
            msg = "a constraint compares probabilities themselves, not sums or differences of them"
            remedy = "Write P(a) > P(b), or test the difference as a hypothesis of the posterior."
            raise Refusal(msg, expression.position, remedy)
        return _Part(value=_number(expression))
    term = resolved.terms[expression]
    if isinstance(term, PrevalenceTerm):
        if term.group == "overall":
            msg = "the overall prevalence is a mean over groups and cannot be constrained"
            remedy = "Constrain a group's prevalence, or every group's (leave out 'overall')."
            raise Refusal(msg, expression.position, remedy)
        return _Part(term=term)
    assert isinstance(term, ResponseTerm)
    if len(term.answers) > 1:
        msg = "the joint probability of several answers cannot be constrained, but for = 0"
        raise Refusal(msg, expression.position, "Constrain each answer's own probability.")
    item, categories = term.answers[0]
    if len(categories) == 1:
        return _Part(term=term, category=categories[0])
    others = [c for c in range(vocabulary.items[item].n_categories) if c not in categories]
    if len(others) > 1:
        msg = "the probability of several answers together cannot be constrained"
        remedy = "Constrain single answers, or test it as a hypothesis of the posterior."
        raise Refusal(msg, expression.position, remedy)
    return _Part(term=term, category=others[0], complement=True)


def _joint_zero(
    left: Expression, sign: Comparison, right: Expression, resolved: ResolvedRelations
) -> ResponseTerm | None:
    """Return the joint answers of ``P(fees=yes, accounts=yes | managed) = 0``; None for others."""
    for one, other in ((left, right), (right, left)):
        term = resolved.terms[one] if isinstance(one, Probability) else None
        if isinstance(term, ResponseTerm) and len(term.answers) > 1 and sign == "=":
            if not any(True for _ in probabilities(other)) and _number(other) == 0.0:
                return term
    return None


def _number(expression: Expression) -> float:
    """Work out an expression without probabilities."""
    match expression:
        case Number(value):
            return value
        case Negative(operand):
            return -_number(operand)
        case Absolute(operand):
            return abs(_number(operand))
        case BinaryOperation(sign, left, right):
            a, b = _number(left), _number(right)
            if sign == "/" and b == 0.0:
                msg = "this divides by 0"
                raise Refusal(msg, expression.position, "Write the number itself.")
            return {"+": a + b, "-": a - b, "*": a * b, "/": a / (b or 1.0)}[sign]
    raise AssertionError(expression)


def _refuse_mixed(one: _Part, two: _Part, at: Expression) -> None:
    """Refuse what no exact sampler is written for, by name."""
    kinds = {type(part.term) for part in (one, two) if part.term is not None}
    if len(kinds) > 1:
        msg = "a prevalence and a response probability cannot be constrained against each other"
        remedy = "Compare prevalences with prevalences; or test it as a hypothesis."
        raise Refusal(msg, at.position, remedy)
    if kinds and one.term and two.term and one.complement != two.complement:
        msg = "several answers together cannot be compared with a single answer in a constraint"
        raise Refusal(msg, at.position, "Compare single answers, or test it as a hypothesis.")


def _refuse_shared_group(
    expression: Expression,
    resolved: ResolvedRelations,
    vocabulary: Vocabulary,
    free_items: Collection[int],
) -> None:
    """Refuse a group of an item that all groups share."""
    if not isinstance(expression, Probability):
        return
    term = resolved.terms[expression]
    if not isinstance(term, ResponseTerm) or not isinstance(term.group, int):
        return
    item = term.answers[0][0]
    if item not in free_items:
        name = vocabulary.items[item].name
        msg = f"all groups share the response probabilities of '{name}'"
        remedy = f"Leave the group out, or let the item differ: free_by_group=['{name}']."
        raise Refusal(msg, expression.position, remedy)


def _groups(one: _Part, two: _Part, vocabulary: Vocabulary) -> range:
    every = any(part.term is not None and part.term.group == "every" for part in (one, two))
    return range(vocabulary.n_groups if every else 1)


def _classes(one: _Part, two: _Part, vocabulary: Vocabulary) -> range:
    every = any(part.term is not None and part.term.latent_class is None for part in (one, two))
    return range(vocabulary.n_classes if every else 1)


def _side(part: _Part, group: int, latent_class: int, free_items: Collection[int]) -> _Known:
    if part.term is None:
        assert part.value is not None
        return part.value, False
    term = part.term
    g = term.group if isinstance(term.group, int) else group
    k = latent_class if term.latent_class is None else term.latent_class
    if isinstance(term, PrevalenceTerm):
        return Place(PrevalenceVector(g), k), False
    item = term.answers[0][0]
    vector = ResponseVector(g if item in free_items else 0, item, k)
    return Place(vector, part.category), part.complement


def _link(
    left: _Known, sign: Comparison, right: _Known, text: str, at: Expression
) -> Iterator[Link]:
    """Turn a comparison so that it reads > or >=, and complements away."""
    if sign in ("<", "<="):
        left, right = right, left
    (one, flip_one), (two, flip_two) = left, right
    turned: LinkSign = ">" if sign in ("<", ">") else ">=" if sign in ("<=", ">=") else "="
    if isinstance(one, float) and isinstance(two, float):
        if not {"=": one == two, ">": one > two, ">=": one >= two}[turned]:
            msg = "this compares two numbers, and it is not true"
            raise Refusal(msg, at.position, "Check the order of the chain.")
        return
    if flip_one or flip_two:  # 1 - p > 1 - q is q > p, and 1 - p > v is 1 - v > p
        one, two = _complement(two, flip_two), _complement(one, flip_one)
    yield Link(one, turned, two, text)


def _complement(side: Side, flipped: bool) -> Side:
    """Return one minus a side."""
    if isinstance(side, float):
        return 1.0 - side
    assert flipped
    return side
