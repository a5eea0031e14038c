"""Statements with their names looked up: what each asks of this model."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from bayeslca.exceptions import StatementError
from bayeslca.model.naming import check_naming_rules
from bayeslca.model.statements.notation import parse, statement_error
from bayeslca.model.statements.own_examples import with_own_names
from bayeslca.model.statements.resolve_priors import resolve_prior
from bayeslca.model.statements.resolved import (
    MembershipTerm,
    PrevalencePrior,
    Resolved,
    ResolvedNamingRule,
    ResolvedQuantity,
    ResolvedRelations,
    ResponsePrior,
    Term,
)
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.syntax import (
    AllClasses,
    Conjunction,
    Expression,
    NamingRule,
    Number,
    Prior,
    Probability,
    Relation,
    Statement,
    probabilities,
)
from bayeslca.model.statements.vocabulary import Vocabulary

Kind = Literal["prior", "naming_rule", "relation", "quantity"]


def kind_of(statement: Statement) -> Kind:
    """Tell what a statement is: a relation is a constraint in a model, a hypothesis elsewhere."""
    if isinstance(statement, Prior):
        return "prior"
    if isinstance(statement, NamingRule):
        return "naming_rule"
    if isinstance(statement, Relation | Conjunction):
        return "relation"
    return "quantity"


def resolve(text: str, vocabulary: Vocabulary) -> Resolved:
    """Read a statement and look up its names.

    Parameters
    ----------
    text : str
    vocabulary : Vocabulary

    Returns
    -------
    Resolved
        A prior, a naming rule, relations or a quantity, with indices in the place of names.

    Raises
    ------
    StatementError
        When it cannot be read, or a name or a probability means nothing in this model.
    """
    try:
        return _resolved(parse(text), vocabulary, text)
    except Refusal as refusal:
        error = statement_error(refusal, text)
    except StatementError as unreadable:
        error = unreadable
    raise with_own_names(error, vocabulary) from None


def _resolved(statement: Statement, vocabulary: Vocabulary, text: str) -> Resolved:
    match statement:
        case Prior():
            return resolve_prior(statement, vocabulary, text)
        case NamingRule():
            return _naming_rule(statement, vocabulary, text)
        case Relation():
            return ResolvedRelations((statement,), _relation_terms(statement, vocabulary), text)
        case Conjunction(parts):
            return ResolvedRelations(parts, _relation_terms(statement, vocabulary), text)
        case _:
            return ResolvedQuantity(statement, _terms(statement, vocabulary), text)


def _naming_rule(rule: NamingRule, vocabulary: Vocabulary, text: str) -> ResolvedNamingRule:
    if vocabulary.exploratory:
        msg = "the model gives a number of classes, so there is no name for a rule to give"
        raise Refusal(msg, rule.position, 'Give the classes names: classes = ["managed", ...].')
    latent_class = vocabulary.class_index(rule.latent_class)
    if rule.probability is None:
        return ResolvedNamingRule(latent_class, None, rule.extreme, text)
    events = rule.probability.events
    form = "Write it as: managed is where P(fees=yes) is highest."
    if rule.probability.given:
        msg = "the probability in a naming rule has no bar: it is compared between the classes"
        raise Refusal(msg, rule.probability.given[0].position, form)
    first = events[0]
    if len(events) > 1 or isinstance(first, AllClasses):
        msg = "a naming rule compares the probability of one answer"
        raise Refusal(msg, first.position, form)
    if vocabulary.kind(first.name) == "class":
        msg = "a naming rule compares the classes by an answer or by their prevalence"
        remedy = (
            "Write managed is where P(fees=yes) is highest, or ... where prevalence is highest."
        )
        raise Refusal(msg, first.position, remedy)
    return ResolvedNamingRule(latent_class, vocabulary.answer(first), rule.extreme, text)


def _terms(statement: Statement, vocabulary: Vocabulary) -> dict[Probability, Term]:
    terms = {p: vocabulary.term(p) for p in probabilities(statement)}
    if not terms:
        msg = "this speaks of no probability of the model"
        raise Refusal(msg, statement.position, "Write P(fees=yes | managed), for example.")
    return terms


def _relation_terms(
    statement: Relation | Conjunction, vocabulary: Vocabulary
) -> dict[Probability, Term]:
    parts = statement.parts if isinstance(statement, Conjunction) else (statement,)
    terms: dict[Probability, Term] = {}
    for part in parts:
        terms.update(_terms(part, vocabulary))
        for left, _, right in part.links():
            _check_bound(left, right)
            _check_bound(right, left)
    return terms


def _check_bound(left: Expression, right: Expression) -> None:
    """Refuse a bare probability compared with what no probability can be."""
    if isinstance(left, Probability) and isinstance(right, Number) and right.value > 1.0:
        msg = f"a probability is never compared with {right.value:g}: it lies between 0 and 1"
        remedy = "Write a number from 0 to 1"
        share = right.value / 100
        remedy += f", such as {share:g} for {right.value:g} percent." if share <= 1 else "."
        raise Refusal(msg, right.position, remedy)


@dataclass(frozen=True, slots=True)
class ModelStatements:
    """The statements of a model, by what they do.

    Attributes
    ----------
    priors : tuple of PrevalencePrior or ResponsePrior
    naming_rules : tuple of ResolvedNamingRule
        In the order of the statements, which is the order they are applied in.
    constraints : tuple of ResolvedRelations
    """

    priors: tuple[PrevalencePrior | ResponsePrior, ...] = ()
    naming_rules: tuple[ResolvedNamingRule, ...] = ()
    constraints: tuple[ResolvedRelations, ...] = ()


def read_statements(texts: Sequence[str], vocabulary: Vocabulary) -> ModelStatements:
    """Read the statements of a model.

    Raises
    ------
    StatementError
        For the first statement that cannot be used.
    """
    priors: list[PrevalencePrior | ResponsePrior] = []
    rules: list[ResolvedNamingRule] = []
    constraints: list[ResolvedRelations] = []
    for text in texts:
        resolved = resolve(text, vocabulary)
        match resolved:
            case PrevalencePrior() | ResponsePrior():
                priors.append(resolved)
            case ResolvedNamingRule():
                rules.append(resolved)
            case ResolvedRelations():
                _refuse_memberships(resolved)
                constraints.append(resolved)
            case ResolvedQuantity():
                msg = "a model assumes statements; this computes something"
                remedy = "Give it a comparison or a prior, or ask for it as a quantity."
                raise statement_error(Refusal(msg, resolved.expression.position, remedy), text)
    check_naming_rules(rules, vocabulary)
    return ModelStatements(tuple(priors), tuple(rules), tuple(constraints))


def _refuse_memberships(resolved: ResolvedRelations) -> None:
    """Refuse a constraint on a class given answers: it depends on everything at once."""
    for probability, term in resolved.terms.items():
        if isinstance(term, MembershipTerm):
            msg = "the probability of a class given answers cannot be constrained"
            remedy = (
                "Test it as a hypothesis after the fit, or constrain the probabilities that it is "
                "made of."
            )
            raise statement_error(Refusal(msg, probability.position, remedy), resolved.text)
