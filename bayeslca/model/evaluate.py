"""What expressions and relations are worth at given parameters, draw by draw.

A statement without a group means every group, and ``.`` means every class; an *instance* is one
group and class of these. A relation holds in a draw when all its links hold in all instances.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import product

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.model.joint_answers import joints
from bayeslca.model.probabilities import response_probability, row_probability
from bayeslca.model.statements.resolved import (
    Answer,
    GroupIndex,
    MembershipTerm,
    PrevalenceTerm,
    ResolvedQuantity,
    ResolvedRelations,
    ResponseTerm,
    Term,
)
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
from bayeslca.model.table import Table


@dataclass(frozen=True, slots=True)
class Instance:
    """The group that "every group" stands for, and the class that ``.`` stands for."""

    group: int = 0
    latent_class: int = 0


@dataclass(frozen=True, eq=False)
class ParameterDraws:
    """Draws of all parameters, S of them end to end.

    Attributes
    ----------
    table : Table
    elements : ndarray, shape (S, E)
    prevalence : ndarray, shape (S, groups, K)
    group_share : ndarray, shape (groups,)
        Share of the cases in each group: what "overall" is weighted by.
    """

    table: Table
    elements: Floats
    prevalence: Floats
    group_share: Floats

    @cached_property
    def response_probability(self) -> Floats:
        """P(answer | class), shape (S, groups of cases, K, A)."""
        found = response_probability(self.table, self.elements)
        return np.asarray(found[:, self.table.response_group])

    def term(self, term: Term, at: Instance) -> Floats:
        """Return the draws (S,) of what a ``P(...)`` stands for."""
        match term:
            case PrevalenceTerm(latent_class, group):
                k = at.latent_class if latent_class is None else latent_class
                if group == "overall":
                    return np.asarray(self.prevalence[:, :, k] @ self.group_share)
                return np.asarray(self.prevalence[:, _group(group, at), k])
            case ResponseTerm(answers, latent_class, group):
                k = at.latent_class if latent_class is None else latent_class
                return np.asarray(self._joint(answers, _group(group, at))[:, k])
            case MembershipTerm(latent_class, answers, group):
                joint = self._with_answers(answers, group, at)
                return np.asarray(joint[:, latent_class] / joint.sum(axis=1))

    def _with_answers(self, answers: Sequence[Answer], group: GroupIndex, at: Instance) -> Floats:
        """Return P(class and answers), shape (S, K); overall, a case's group is drawn by size."""
        if group != "overall":
            g = _group(group, at)
            return self.prevalence[:, g] * self._joint(answers, g)
        return sum(
            (
                share * self.prevalence[:, g] * self._joint(answers, g)
                for g, share in enumerate(self.group_share)
            ),
            start=np.zeros(self.prevalence[:, 0].shape),
        )

    def _joint(self, answers: Sequence[Answer], group: int) -> Floats:
        """Return the probability (S, K) of answers given together.

        Given the class a product, but for items that are answered together.
        """
        out = np.ones(self.prevalence[:, group].shape)
        chosen = dict(answers)
        for joint in joints(self.table):
            if chosen.keys() & (set(joint.items) | set(joint.others)) == set(joint.items):
                ways = product(*(chosen.pop(item) for item in joint.items))
                codes = np.array(list(ways), dtype=np.int64)
                at = joint.start + np.ravel_multi_index(tuple(codes.T), joint.sizes)
                rows = self.table.joint_row[self.table.response_group[group], at]
                out *= row_probability(self.table, self.elements)[:, rows].sum(axis=1)
        for item, categories in chosen.items():
            columns = [int(self.table.item_start[item]) + c for c in categories]
            out *= self.response_probability[:, group][:, :, columns].sum(axis=-1)
        return out

    def expression(
        self, expression: Expression, terms: Mapping[Probability, Term], at: Instance
    ) -> Floats:
        """Return the draws (S,) of an expression; 1 / 0 is infinite, 0 / 0 is nan."""
        match expression:
            case Number(value):
                return np.full(self.prevalence.shape[0], value)
            case Probability():
                return self.term(terms[expression], at)
            case Negative(operand):
                return -self.expression(operand, terms, at)
            case Absolute(operand):
                return np.abs(self.expression(operand, terms, at))
            case BinaryOperation(sign, left, right):
                a = self.expression(left, terms, at)
                b = self.expression(right, terms, at)
                if sign == "/":
                    with np.errstate(divide="ignore", invalid="ignore"):
                        return np.asarray(a / b)
                return np.asarray({"+": np.add, "-": np.subtract, "*": np.multiply}[sign](a, b))

    def differences(self, resolved: ResolvedRelations) -> list[tuple[Comparison, Floats]]:
        """Return for every link its sign and left minus right, shape (S, instances)."""
        out: list[tuple[Comparison, Floats]] = []
        for relation in resolved.relations:
            terms = [resolved.terms[p] for p in probabilities(relation)]
            every = instances(terms, self.table)
            for left, sign, right in relation.links():
                columns = [
                    self.expression(left, resolved.terms, at)
                    - self.expression(right, resolved.terms, at)
                    for at in every
                ]
                out.append((sign, np.stack(columns, axis=1)))
        return out

    def holds(self, resolved: ResolvedRelations) -> Bools:
        """Tell in which draws (S,) all relations hold, in every group and class meant."""
        out = np.ones(self.prevalence.shape[0], dtype=bool)
        for sign, difference in self.differences(resolved):
            compare = {
                ">": difference > 0,
                ">=": difference >= 0,
                "<": difference < 0,
                "<=": difference <= 0,
                "=": difference == 0,
            }
            out &= compare[sign].all(axis=1)
        return out


def _group(group: GroupIndex, at: Instance) -> int:
    return group if isinstance(group, int) else at.group


def instances(terms: Sequence[Term], table: Table) -> tuple[Instance, ...]:
    """Return the groups and classes that terms without a group, or with ``.``, stand for.

    One group stands for all where nothing in the terms differs by group.
    """
    groups = range(table.n_prevalence_rows if varies_by_group(terms, table) else 1)
    classes = range(table.n_classes if means_every_class(terms) else 1)
    return tuple(Instance(g, k) for g in groups for k in classes)


def varies_by_group(terms: Sequence[Term], table: Table) -> bool:
    """Tell whether terms mean every group, and groups differ in them."""
    return table.n_prevalence_rows > 1 and any(
        term.group == "every" and (not isinstance(term, ResponseTerm) or _is_free(term, table))
        for term in terms
    )


def means_every_class(terms: Sequence[Term]) -> bool:
    """Tell whether terms speak of every class, each on its own."""
    return any(term.latent_class is None for term in terms)


def _is_free(term: ResponseTerm, table: Table) -> bool:
    """Tell whether groups differ in the rows of a term's items."""
    rows = [
        table.response_row[table.response_group, table.item_start[item] + c]
        for item, categories in term.answers
        for c in categories
    ]
    return any(np.unique(row).size > 1 for row in rows)


def terms_of(resolved: ResolvedQuantity | ResolvedRelations) -> tuple[Term, ...]:
    """Return what the probabilities of a statement stand for."""
    return tuple(resolved.terms.values())
