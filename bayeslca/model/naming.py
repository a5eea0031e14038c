"""Naming rules: which class of a draw gets which name."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import StatementError
from bayeslca.model.permutations import PermutationGroup
from bayeslca.model.probabilities import response_probability
from bayeslca.model.statements.resolved import Answer, ResolvedNamingRule
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.model.table import Table


def check_naming_rules(rules: Sequence[ResolvedNamingRule], vocabulary: Vocabulary) -> None:
    """Refuse rules that cannot all hold.

    Raises
    ------
    StatementError
        When a class has two rules, or two classes have the same rule.
    """
    for at, rule in enumerate(rules):
        name = vocabulary.classes[rule.latent_class]
        for earlier in rules[:at]:
            if earlier.latent_class == rule.latent_class:
                problem = f"class '{name}' already has a naming rule: {earlier.text}"
                remedy = "Keep one of them; one rule names one class."
            elif _meaning(earlier, vocabulary) == _meaning(rule, vocabulary):
                other = vocabulary.classes[earlier.latent_class]
                problem = f"this rule names '{name}' and '{other}' alike: {earlier.text}"
                remedy = f"Name '{name}' by another answer, or by the other extreme."
            else:
                continue
            raise StatementError(problem, statement=rule.text, position=0, remedy=remedy)


def _meaning(rule: ResolvedNamingRule, vocabulary: Vocabulary) -> tuple[Answer | None, bool]:
    """Return a rule so that 'fees=no is lowest' equals 'fees=yes is highest'."""
    highest = rule.extreme == "highest"
    if rule.answer is None or 0 not in rule.answer[1]:
        return rule.answer, highest
    item, categories = rule.answer
    every = range(vocabulary.items[item].n_categories)
    return (item, tuple(c for c in every if c not in categories)), not highest


def classes_named(rules: Sequence[ResolvedNamingRule], n_classes: int) -> frozenset[int]:
    """Return the classes that the rules tell from all others.

    Rules for all classes but one name that one too.
    """
    named = frozenset(rule.latent_class for rule in rules)
    return frozenset(range(n_classes)) if len(named) >= n_classes - 1 else named


def permutations_by_rules(
    table: Table,
    elements: Floats,
    prevalence: Floats,
    rules: Sequence[ResolvedNamingRule],
    exchangeable: PermutationGroup,
    group_share: Floats | None = None,
) -> Ints:
    """Find in each draw, and in each group, the classes that the rules name.

    Where groups share nothing, the classes of one can change places while those of another do
    not, and a mean over groups would name them at random: there the rules hold in each group.

    Parameters
    ----------
    table : Table
    elements : ndarray, shape (S, E)
    prevalence : ndarray, shape (S, groups, K)
    rules : sequence of ResolvedNamingRule
    exchangeable : PermutationGroup
        What priors and table leave open, rules aside.
    group_share : ndarray, shape (groups,), optional
        Share of the cases in each group; equal when left out.

    Returns
    -------
    ndarray of int64, shape (S, groups, K)
        permutation[s, g, k] is the old position that becomes class k of group g.
    """
    response = response_probability(table, elements)
    out = np.empty(prevalence.shape, dtype=np.int64)
    for groups in exchangeable.group_sets:
        at = list(groups)
        share = None if group_share is None or not group_share[at].sum() else group_share[at]
        of_groups = np.unique(table.response_group[at])
        found = apply_naming_rules(
            response[:, of_groups], prevalence[:, at], rules, table.item_start, share
        )
        out[:, at] = found[:, None, :]
    return out


def apply_naming_rules(
    response_probability: Floats,
    prevalence: Floats,
    rules: Sequence[ResolvedNamingRule],
    item_start: Ints,
    group_share: Floats | None = None,
) -> Ints:
    """Find in each draw the classes that the rules name.

    The rules are applied in their order: the first picks its class among all, the next among
    those that are left, and so on. The classes left at the end keep their order.

    Parameters
    ----------
    response_probability : ndarray, shape (S, G, K, A)
        Draws; the mean over the G response groups is compared.
    prevalence : ndarray, shape (S, groups, K)
        Draws; the mean over groups, weighted by ``group_share``, is compared.
    rules : sequence of ResolvedNamingRule
    item_start : ndarray of int, shape (J + 1,)
        Response columns of item j are item_start[j]:item_start[j + 1].
    group_share : ndarray, shape (groups,), optional
        Share of the cases in each group; equal when left out.

    Returns
    -------
    ndarray of int64, shape (S, K)
        permutation[s, k] is the old position that becomes class k.
    """
    n_draws, n_classes = prevalence.shape[0], prevalence.shape[-1]
    taken = np.zeros((n_draws, n_classes), dtype=bool)
    permutation = np.empty((n_draws, n_classes), dtype=np.int64)
    draws = np.arange(n_draws)
    for rule in rules:
        if rule.answer is None:
            compared = np.average(prevalence, axis=1, weights=group_share)
        else:
            compared = _answer_probability(rule.answer, response_probability, item_start)
        score = compared if rule.extreme == "highest" else -compared
        chosen = np.argmax(np.where(taken, -np.inf, score), axis=1)
        permutation[:, rule.latent_class] = chosen
        taken[draws, chosen] = True
    ruled = {rule.latent_class for rule in rules}
    left_names = [k for k in range(n_classes) if k not in ruled]
    # A stable sort puts the positions that are not taken first, in their old order.
    left = np.argsort(taken, axis=1, kind="stable")[:, : len(left_names)]
    permutation[:, left_names] = left
    return permutation


def _answer_probability(answer: Answer, response_probability: Floats, item_start: Ints) -> Floats:
    """Return the probability of an answer in each draw and class, shape (S, K)."""
    item, categories = answer
    columns = [int(item_start[item]) + c for c in categories]
    return np.asarray(response_probability[..., columns].sum(axis=-1).mean(axis=1))
