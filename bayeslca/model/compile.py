"""From a model and responses to the arrays that engines read."""

from __future__ import annotations

from itertools import product
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.joint_answers import given_jointly, joint_codes, joints
from bayeslca.model.places import ConditionalVector, Place, ResponseVector
from bayeslca.model.table import Table, UnitTable
from bayeslca.model.table_builder import Cell, TableBuilder
from bayeslca.responses.units import MISSING, Units

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def compile_table(model: LatentClassModel) -> Table:
    """Compile a model: rows of every response group, item and class, made of blocks.

    What nothing is stated about has a block of its own. Groups share the rows of items that are
    not free by group.
    """
    assumed = model.response_assumptions
    builder = TableBuilder(
        [item.n_categories for item in model.items],
        model.n_classes,
        range(model.n_groups) if model.free_items else (0,) * model.n_groups,
    )
    for block in assumed.tied.blocks:
        builder.block(block)
    groups = range(model.n_response_groups)
    for one in model.item_sets:
        builder.answered_together(*one.items)
    for (s, one), g in product(enumerate(model.item_sets), groups):
        for k in sorted(one.classes):
            builder.set_joint(g, s, k, _joint_cells(model, s, g, k))
    sums = {(j, k) for one in model.item_sets for j in one.others for k in one.classes}
    for g, j, k in product(groups, range(len(model.items)), range(model.n_classes)):
        if (j, k) in sums:
            continue
        vector = ResponseVector(g if j in model.free_items else 0, j, k)
        for category in range(model.items[j].n_categories):
            form = assumed.tied.forms[Place(vector, category)]
            builder.set_row(g, j, category, k, [(form.constant, form.elements)])
    for bound in assumed.bounds.bounds:
        builder.bound(bound.element, bound.lower, bound.upper)
    for order in dict.fromkeys((order.above, order.below) for order in assumed.bounds.orders):
        builder.order(*order)
    return builder.build()


def _joint_cells(
    model: LatentClassModel, item_set: int, group: int, latent_class: int
) -> list[Cell]:
    """Return the joint answers of a set: the first item's answer, times the others' given it."""
    one, forms = model.item_sets[item_set], model.response_assumptions.tied.forms
    g = group if one.first in model.free_items else 0
    first = ResponseVector(g, one.first, latent_class)
    out: list[Cell] = []
    for a in range(one.sizes[0]):
        margin = forms[Place(first, a)]
        others = ConditionalVector(g, item_set, latent_class, a)
        for at in range(len(one.rest)):
            given = forms[Place(others, at)]
            constant = margin.constant * given.constant
            out.append((constant, (*margin.elements, *given.elements)))
    return out


def compile_units(table: Table, units: Units, log_weight: Floats | None = None) -> UnitTable:
    """Find the rows of each unit's answers.

    A missing answer has no row. Of items that are answered together, two answers or more are one
    joint row, and a single answer is its own row.

    Parameters
    ----------
    table : Table
    units : Units
    log_weight : ndarray, shape (U, K), optional
        Extra log weight of each unit in each class; see ``split_units``.
    """
    group = np.asarray(units.group, dtype=np.int64)
    response_group = table.response_group[group]
    rows = np.full(units.pattern.shape, -1, dtype=np.int64)
    for j in range(table.n_items):
        code = units.pattern[:, j].astype(np.int64)
        at = np.flatnonzero(code != MISSING)
        rows[at, j] = table.response_row[response_group[at], table.item_start[j] + code[at]]
    answered = units.pattern != MISSING
    for joint in joints(table):
        at = np.flatnonzero(given_jointly(joint, answered))
        column = joint.start + joint_codes(joint, units.pattern[at])
        rows[at[:, None], np.asarray(joint.items)] = -1
        rows[at, joint.items[0]] = table.joint_row[response_group[at], column]
    has_row = rows >= 0
    return UnitTable(
        row_start=np.concatenate([[0], np.cumsum(has_row.sum(axis=1))]).astype(np.int64),
        row=rows[has_row],
        count=np.asarray(units.count, dtype=np.int64),
        prevalence_row=group,
        log_weight=np.zeros((0, table.n_classes)) if log_weight is None else log_weight,
    )


def pool_groups(units: Units) -> Units:
    """Join units that differ in their group only, for a model without groups."""
    pattern, joined = np.unique(units.pattern, axis=0, return_inverse=True)
    joined = joined.reshape(-1)
    unit_of_row = np.where(units.unit_of_row >= 0, joined[units.unit_of_row], -1)
    return Units(
        pattern=pattern,
        group=np.zeros(len(pattern), dtype=np.int32),
        count=np.bincount(joined, weights=units.count, minlength=len(pattern)).astype(np.int64),
        unit_of_row=unit_of_row,
    )


def verified_log_weight(verified: Ints, n_classes: int) -> Floats:
    """Return the extra log weight (row, K) of rows whose class is known.

    Parameters
    ----------
    verified : ndarray of int, shape (row,)
        The class of each row, -1 where it is not known.
    n_classes : int
    """
    classes = np.arange(n_classes)
    may_be = (verified[:, None] < 0) | (verified[:, None] == classes)
    return np.where(may_be, 0.0, -np.inf)


def split_units(units: Units, counts: Ints, log_weight: Floats) -> tuple[Units, Floats]:
    """Split units whose rows differ in their extra log weight.

    Parameters
    ----------
    units : Units
    counts : ndarray of int, shape (row,)
        Cases per row of the responses.
    log_weight : ndarray, shape (row, K)

    Returns
    -------
    Units
        Distinct combinations of unit and log weight.
    ndarray, shape (U, K)
        Their log weight, for ``compile_units``.
    """
    used = np.flatnonzero(units.unit_of_row >= 0)
    parent = units.unit_of_row[used]
    key = np.column_stack([parent.astype(np.float64), log_weight[used]])
    _, first, split = np.unique(key, axis=0, return_index=True, return_inverse=True)
    split = split.reshape(-1)
    unit_of_row = np.full(units.unit_of_row.shape, -1, dtype=np.int64)
    unit_of_row[used] = split
    count = np.zeros(first.size, dtype=np.int64)
    np.add.at(count, split, counts[used])
    out = Units(
        pattern=units.pattern[parent[first]],
        group=units.group[parent[first]],
        count=count,
        unit_of_row=unit_of_row,
    )
    return out, log_weight[used][first]
