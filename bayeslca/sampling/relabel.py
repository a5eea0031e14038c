"""Relabelling: make classes mean the same in every draw, all chains together.

Labels of classes may change from draw to draw wherever the model leaves them open. Naming rules
are applied first, draw by draw. What they leave open is settled by Stephens' (2000) criterion on
the membership probabilities of the response patterns, weighted by their counts, and only within
the permutations that leave the model unchanged.

References
----------
Stephens, M. (2000). Dealing with label switching in mixture models. Journal of the Royal
Statistical Society B 62, 795-809, section 4 and algorithm 2.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy.optimize import linear_sum_assignment

from bayeslca._typing import Floats, Ints
from bayeslca.findings import Finding
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.permutations import PermutationGroup, compose, identity
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.symmetry import Symmetry, element_map, symmetry
from bayeslca.model.table import Table, UnitTable
from bayeslca.sampling.draws import Draws

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel

FIT_DRAWS = 500
"""Draws on which the reference memberships are fitted; all draws are then matched to them."""
FIT_NUMBERS = 20_000_000
"""Numbers held while fitting (160 MB); fewer draws are used when units are many."""
MOST_ROUNDS = 100
FLOOR = 1e-10
"""Least reference membership: the first reference is a single draw and may hold zeros."""
SETTLED = 0.99
"""Names that are less settled than this are a finding."""

Memberships = Iterator[tuple[slice, Floats]]
"""Pieces of draws with P(class | answers), shape (K, U, draws)."""


@dataclass(frozen=True, eq=False)
class Relabelled:
    """Draws whose classes mean the same throughout.

    Attributes
    ----------
    draws : Draws
    permutations : ndarray of int64, shape (chain, draw, group, K)
        ``permutations[c, d, g, k]`` is the sampled class that became class k.
    names_settled : float
        Posterior mass of the commonest labelling; see `share_per_labelling`. 1 when the model
        leaves all labels open, for then no labelling differs from another.
    share_per_labelling : tuple of float
        Posterior mass of each labelling, the commonest first; they sum to 1. Two draws are of
        one labelling when the permutations of the table that match them to one reference differ
        only by a permutation that leaves the model unchanged.
    findings : tuple of Finding
    """

    draws: Draws
    permutations: Ints
    names_settled: float = 1.0
    share_per_labelling: tuple[float, ...] = (1.0,)
    findings: tuple[Finding, ...] = ()


def relabel(model: LatentClassModel, unit_table: UnitTable, draws: Draws) -> Relabelled:
    """Relabel the draws of all chains jointly.

    Parameters
    ----------
    model : LatentClassModel
    unit_table : UnitTable
    draws : Draws
        As they were sampled. Their ``log_prior`` is kept: no permutation that is applied here
        changes the prior.

    Returns
    -------
    Relabelled

    Notes
    -----
    How settled the names are is found apart from this: all draws are matched to one reference
    within L, the permutations that leave the table (but not the priors) unchanged. A draw that
    needs another member of L than most, up to what the model leaves open, was sampled (or named
    by a rule) under another labelling.
    """
    table, n_classes = model.table, model.n_classes
    labels = _symmetry(model, unit_table)
    flat = _Flat.of(draws)
    start = identity(table.n_prevalence_rows, n_classes)
    permutations = np.tile(start, (flat.n_draws, 1, 1))
    if model.naming_rules:
        permutations = permutations_by_rules(
            table,
            flat.elements,
            flat.prevalence,
            model.naming_rules,
            labels.prior_group,
            _group_sizes(unit_table, table.n_prevalence_rows),
        )
        flat = flat.permuted(table, permutations)
    if not labels.named_group.is_identity:
        found = stephens(table, unit_table, flat, labels.named_group)
        if model.exploratory:
            found = compose(found, _by_prevalence(flat, found, labels.named_group, unit_table))
        permutations = compose(permutations, found)
        flat = flat.permuted(table, found)
    shares, moved = _labellings(table, unit_table, flat, labels)
    return Relabelled(
        draws=flat.put_into(draws),
        permutations=permutations.reshape(draws.n_chains, draws.n_draws, *start.shape),
        names_settled=shares[0],
        share_per_labelling=shares,
        findings=_findings(model, shares, moved),
    )


@dataclass(frozen=True, eq=False)
class _Flat:
    """Draws of all chains end to end: elements (S, E), prevalence (S, group, K).

    Of pooled units also concentration (S, K), whose classes are those of every group.
    """

    elements: Floats
    prevalence: Floats
    log_posterior: Floats
    concentration: Floats | None = None

    @classmethod
    def of(cls, draws: Draws) -> _Flat:
        return cls(
            draws.flat_elements,
            draws.flat_prevalence,
            (draws.log_likelihood + draws.log_prior).reshape(-1),
            None
            if draws.concentration is None
            else draws.concentration.reshape(-1, draws.n_classes),
        )

    @property
    def n_draws(self) -> int:
        return int(self.log_posterior.size)

    def permuted(self, table: Table, permutations: Ints) -> _Flat:
        """Apply a permutation (S, group, K) of its own to each draw."""
        elements = self.elements.copy()
        distinct, which = np.unique(permutations, axis=0, return_inverse=True)
        for at, permutation in enumerate(distinct):
            mine = np.flatnonzero(which.reshape(-1) == at)
            elements[mine] = self.elements[np.ix_(mine, element_map(table, permutation))]
        prevalence = np.take_along_axis(self.prevalence, permutations, axis=-1)
        concentration = self.concentration
        if concentration is not None:
            concentration = np.take_along_axis(concentration, permutations[:, 0], axis=-1)
        return replace(self, elements=elements, prevalence=prevalence, concentration=concentration)

    def put_into(self, draws: Draws) -> Draws:
        return replace(
            draws,
            elements=self.elements.reshape(draws.elements.shape),
            prevalence=self.prevalence.reshape(draws.prevalence.shape),
            concentration=None
            if self.concentration is None or draws.concentration is None
            else self.concentration.reshape(draws.concentration.shape),
        )


def _symmetry(model: LatentClassModel, unit_table: UnitTable) -> Symmetry:
    """Return the model's symmetry; verified classes take part of it away."""
    if not unit_table.log_weight.size:
        return model.symmetry
    named = {rule.latent_class for rule in model.naming_rules}
    return symmetry(model.table, model.prevalence_source, unit_table, named)


def _group_sizes(unit_table: UnitTable, n_groups: int) -> Floats:
    sizes = np.bincount(unit_table.prevalence_row, weights=unit_table.count, minlength=n_groups)
    return np.asarray(sizes, dtype=np.float64)


def stephens(table: Table, unit_table: UnitTable, draws: _Flat, group: PermutationGroup) -> Ints:
    """Match every draw to one reference by Stephens' criterion.

    Parameters
    ----------
    table : Table
    unit_table : UnitTable
    draws : draws of all chains, end to end
    group : PermutationGroup
        The permutations that are searched.

    Returns
    -------
    ndarray of int64, shape (S, group, K)

    Notes
    -----
    The reference is fitted on some draws only, starting from the one with the highest posterior
    density; then all draws pass by once, so that memory stays bounded.
    """
    chosen = _fit_draws(draws, unit_table.n_units * table.n_classes)
    fitted = [
        shares
        for _, shares in _memberships(
            table, unit_table, draws.elements[chosen], draws.prevalence[chosen]
        )
    ]
    reference = fit_reference(np.concatenate(fitted, axis=2), unit_table, group)
    out = np.empty((draws.n_draws, group.n_groups, group.n_classes), dtype=np.int64)
    for piece, shares in _memberships(table, unit_table, draws.elements, draws.prevalence):
        out[piece] = best_members(
            matching_costs(shares, reference, unit_table, group.n_groups), group
        )
    return out


def _fit_draws(draws: _Flat, size: int) -> Ints:
    """Choose the draws of the fit: the one with the highest posterior first."""
    most = int(np.clip(FIT_NUMBERS // max(size, 1), 50, FIT_DRAWS))
    spread = np.unique(np.linspace(0, draws.n_draws - 1, min(most, draws.n_draws)).astype(int))
    return np.concatenate([[np.argmax(draws.log_posterior)], spread])


def _memberships(
    table: Table, unit_table: UnitTable, elements: Floats, prevalence: Floats
) -> Memberships:
    for piece, joint in log_joint(table, unit_table, elements, prevalence):
        yield piece, class_shares(joint)


def fit_reference(shares: Floats, unit_table: UnitTable, group: PermutationGroup) -> Floats:
    """Find the memberships that the relabelled draws have on average.

    Parameters
    ----------
    shares : ndarray, shape (K, U, S)
        P(class | answers) of each unit; the first draw is where the search starts.
    unit_table : UnitTable
    group : PermutationGroup

    Returns
    -------
    ndarray, shape (U, K)
    """
    reference = shares[:, :, 0].T
    before = None
    for _ in range(MOST_ROUNDS):
        found = best_members(matching_costs(shares, reference, unit_table, group.n_groups), group)
        if before is not None and np.array_equal(found, before):
            break
        before = found
        of_unit = found[:, unit_table.prevalence_row].transpose(2, 1, 0)  # (K, U, S)
        reference = np.take_along_axis(shares, of_unit, axis=0).mean(axis=2).T
    return reference


def matching_costs(
    shares: Floats, reference: Floats, unit_table: UnitTable, n_groups: int
) -> Floats:
    """Return the cost (S, group, old class, new class) of making an old class a new one.

    Minus the sum over cases of P(old class | answers) log reference(new class); what Stephens'
    divergence adds to it is the same for every permutation.
    """
    weights = -unit_table.count[:, None] * np.log(np.maximum(reference, FLOOR))  # (U, K)
    groups = (unit_table.prevalence_row == g for g in range(n_groups))
    within = [(shares, weights)] if n_groups == 1 else [(shares[:, g], weights[g]) for g in groups]
    costs = [np.matmul(weight.T, share).transpose(2, 0, 1) for share, weight in within]
    return np.stack(costs, axis=1)


def best_members(costs: Floats, group: PermutationGroup) -> Ints:
    """Return for each draw the member of a group that costs least.

    Parameters
    ----------
    costs : ndarray, shape (S, group, old class, new class)
    group : PermutationGroup

    Returns
    -------
    ndarray of int64, shape (S, group, K)
    """
    g, k = np.ogrid[: group.n_groups, : group.n_classes]
    if group.permutations is not None:
        totals = np.stack(
            [costs[:, g, member, k].sum(axis=(1, 2)) for member in group.permutations], axis=1
        )
        return np.asarray(group.permutations[np.argmin(totals, axis=1)])
    assert group.factors is not None  # a group is a list or a product
    out = np.tile(identity(group.n_groups, group.n_classes), (costs.shape[0], 1, 1))
    for factor in group.factors:
        groups, classes = np.asarray(factor.groups), np.asarray(factor.classes)
        within = costs[:, groups][:, :, classes[:, None], classes].sum(axis=1)
        for s, cost in enumerate(within):
            old, new = linear_sum_assignment(cost)
            out[s][np.ix_(groups, classes[new])] = classes[old]
    return out


def _by_prevalence(
    flat: _Flat, found: Ints, group: PermutationGroup, unit_table: UnitTable
) -> Ints:
    """Return the permutation (group, K) that puts classes in order of falling prevalence."""
    mean = np.take_along_axis(flat.prevalence, found, axis=-1).mean(axis=0)
    sizes = _group_sizes(unit_table, group.n_groups)
    out = identity(group.n_groups, group.n_classes)
    for factor in group.factors or ():
        groups, classes = np.asarray(factor.groups), np.asarray(factor.classes)
        overall = sizes[groups] @ mean[groups][:, classes]
        out[np.ix_(groups, classes)] = classes[np.argsort(-overall, kind="stable")]
    return np.broadcast_to(out, found.shape)


def _labellings(
    table: Table, unit_table: UnitTable, flat: _Flat, labels: Symmetry
) -> tuple[tuple[float, ...], frozenset[int]]:
    """Return the posterior mass of each labelling, and the classes that others exchange."""
    if labels.table_group.n_members == labels.named_group.n_members:
        return (1.0,), frozenset()
    matched = stephens(table, unit_table, flat, labels.table_group)
    distinct, times = np.unique(matched, axis=0, return_counts=True)
    same = _same_labelling(labels.named_group)
    mass: dict[bytes, int] = {}
    example: dict[bytes, Ints] = {}
    for permutation, n in zip(distinct, times, strict=True):
        key = same(permutation)
        mass[key] = mass.get(key, 0) + int(n)
        example.setdefault(key, permutation)
    order = sorted(mass, key=lambda key: -mass[key])
    main = example[order[0]]
    moved = {int(main[g, k]) for key in order[1:] for g, k in np.argwhere(example[key] != main)}
    return tuple(mass[key] / flat.n_draws for key in order), frozenset(moved)


def _same_labelling(group: PermutationGroup) -> Callable[[Ints], bytes]:
    """Return a function that is equal for permutations that differ by a member of a group."""

    def by_factor(permutation: Ints) -> bytes:
        # Number the classes of each factor by where they first appear.
        out = permutation.copy()
        for factor in group.factors or ():
            order: dict[int, int] = {}
            for g in factor.groups:
                for k, old in enumerate(permutation[g].tolist()):
                    if old in factor.classes:
                        out[g, k] = order.setdefault(old, factor.classes[len(order)])
        return out.tobytes()

    def by_member(permutation: Ints) -> bytes:
        assert group.permutations is not None
        moved = (compose(member, permutation).tobytes() for member in group.permutations)
        return min(moved)

    return by_member if group.factors is None else by_factor


def _findings(
    model: LatentClassModel, shares: tuple[float, ...], moved: frozenset[int]
) -> tuple[Finding, ...]:
    if shares[0] >= SETTLED:
        return ()
    names = tuple(model.class_names[k] for k in sorted(moved))
    return (
        Finding(
            kind="names_not_settled",
            level="warning",
            message=(
                f"The names are {100 * shares[0]:.0f} % settled: in the rest of the posterior, "
                f"{' and '.join(names)} have changed places."
            ),
            remedy=(
                "State more that tells these classes apart (a prior, or a naming rule on an "
                "answer in which they differ clearly), or read their rows as one."
            ),
            about=names,
            value=shares[0],
        ),
    )
