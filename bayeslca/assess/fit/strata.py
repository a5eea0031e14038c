"""Strata: cases of one group that answered the same items, which is where tables are compared.

A replicate of the data keeps each case's group and which items it answered; everything else is
drawn anew. Groups are those declared for the responses, also where the model pools them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.compile import compile_units
from bayeslca.model.joint_answers import given_jointly, joint_of, joints
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.table import Table, UnitTable
from bayeslca.responses.item import Item
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units


@dataclass(frozen=True, eq=False)
class Fields:
    """What a case can be asked: an item, or items that are answered together.

    Attributes
    ----------
    start : ndarray of int64, shape (F + 1,)
        Answers of field f are ``row[start[f]:start[f + 1]]``.
    row : ndarray of int64
        The row of the model's table of each answer.
    item : ndarray of int64, shape (F, widest)
        The field's items, -1 beyond.
    size : ndarray of int64, shape (F, widest)
        Categories of each item, 1 beyond; the last item's category changes fastest.
    """

    start: Ints
    row: Ints
    item: Ints
    size: Ints


@dataclass(frozen=True, eq=False)
class Strata:
    """The strata of some responses, as replicates and discrepancies read them.

    Attributes
    ----------
    items : tuple of Item
    group_names : tuple of str
        Of the declared groups; one empty name when there are none.
    units : Units
        The distinct answers within declared groups.
    unit_table : UnitTable
        The same as the model sees them.
    stratum_of_unit : ndarray of int64, shape (U,)
    size : ndarray of int64, shape (S,)
        Cases of each stratum.
    group, prevalence_row : ndarray of int64, shape (S,)
        Declared group of each stratum, and the row of its prevalences in the model.
    fields : Fields
    field_start, field : ndarray of int64
        Fields of stratum s are ``field[field_start[s]:field_start[s + 1]]``.
    """

    items: tuple[Item, ...]
    group_names: tuple[str, ...]
    units: Units
    unit_table: UnitTable
    stratum_of_unit: Ints
    size: Ints
    group: Ints
    prevalence_row: Ints
    fields: Fields
    field_start: Ints
    field: Ints

    @property
    def n_groups(self) -> int:
        """Number of declared groups; 1 when there are none."""
        return len(self.group_names)

    @cached_property
    def answered(self) -> Ints:
        """Cases that answered each item, shape (groups, J)."""
        out = np.zeros((self.n_groups, len(self.items)), dtype=np.int64)
        np.add.at(out, self.units.group, (self.units.pattern >= 0) * self.units.count[:, None])
        return out

    @cached_property
    def group_row(self) -> Ints:
        """Row of the prevalences of each declared group, shape (groups,)."""
        one_row = self.prevalence_row.max(initial=0) == 0
        return np.zeros(self.n_groups, dtype=np.int64) if one_row else np.arange(self.n_groups)


def strata_of(model: LatentClassModel, responses: Responses) -> Strata:
    """Find the strata of responses.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    """
    units, table = responses.units, model.table
    group = np.asarray(units.group, dtype=np.int64)
    row = group if model.groups is not None else np.zeros_like(group)
    key = np.column_stack([group, units.pattern >= 0])
    distinct, stratum = np.unique(key, axis=0, return_inverse=True)
    stratum = stratum.reshape(-1)
    of_group = np.ascontiguousarray(distinct[:, 0])
    stratum_row = of_group if model.groups is not None else np.zeros_like(of_group)
    fields, field_start, field = _fields(table, stratum_row, distinct[:, 1:])
    return Strata(
        items=model.items,
        group_names=responses.groups.levels if responses.groups is not None else ("",),
        units=units,
        unit_table=compile_units(table, replace(units, group=row.astype(np.int32))),
        stratum_of_unit=stratum,
        size=np.bincount(stratum, weights=units.count).astype(np.int64),
        group=of_group,
        prevalence_row=stratum_row,
        fields=fields,
        field_start=field_start,
        field=field,
    )


def _fields(table: Table, rows: Ints, masks: Ints) -> tuple[Fields, Ints, Ints]:
    """Return all fields, and those of each stratum (its row of prevalences and mask given)."""
    known: dict[tuple[int, tuple[int, ...]], int] = {}
    listed: list[tuple[Ints, tuple[int, ...]]] = []
    of_stratum: list[list[int]] = []
    for row, mask in zip(rows.tolist(), masks, strict=True):
        response_group = int(table.response_group[row])
        mine = []
        for items in _asked(table, mask > 0):
            at = (response_group, items)
            if at not in known:
                known[at] = len(listed)
                listed.append((_field_rows(table, *at), items))
            mine.append(known[at])
        of_stratum.append(mine)
    widest = max(len(items) for _, items in listed)
    sizes = np.diff(table.item_start)
    fields = Fields(
        start=_starts([len(found) for found, _ in listed]),
        row=np.concatenate([found for found, _ in listed]).astype(np.int64),
        item=np.array([_padded(items, widest, -1) for _, items in listed], dtype=np.int64),
        size=np.array(
            [_padded(sizes[list(items)].tolist(), widest, 1) for _, items in listed],
            dtype=np.int64,
        ),
    )
    starts = _starts([len(mine) for mine in of_stratum])
    return fields, starts, np.array([f for mine in of_stratum for f in mine], dtype=np.int64)


def _asked(table: Table, mask: Bools) -> list[tuple[int, ...]]:
    """Return the items, or sets of items, that a case with this mask answers."""
    given = [joint.items for joint in joints(table) if given_jointly(joint, mask[None]).all()]
    in_set = {j for items in given for j in items}
    return given + [(int(j),) for j in np.flatnonzero(mask) if int(j) not in in_set]


def _field_rows(table: Table, response_group: int, items: tuple[int, ...]) -> Ints:
    joint = joint_of(table, set(items))
    if joint is not None:
        return table.joint_row[response_group, joint.columns]
    (item,) = items
    return table.response_row[response_group, table.item_start[item] : table.item_start[item + 1]]


def _padded(values: Sequence[int], length: int, filling: int) -> list[int]:
    return [*values, *[filling] * (length - len(values))]


def _starts(sizes: Sequence[int]) -> Ints:
    return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)


def stratum_sizes(strata: Strata) -> Floats:
    """Return the cases of the stratum of each unit, shape (U,)."""
    return strata.size[strata.stratum_of_unit].astype(np.float64)
