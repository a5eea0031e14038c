"""The likelihood of a latent class model as a PyMC distribution, the class summed out.

The observed variable holds the answers' codes (-1: no answer), one line for each unit. Its log
density is the unit's count times log p(answers), so that the model's density is that of all
cases; its random draws are the answers of ONE new case per unit, in a class of its own, with the
unit's missing answers left out.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.joint_answers import joints
from bayeslca.model.table import Table
from bayeslca.responses.units import MISSING

SIGNATURE = "(k),(g,c,k),(),(),(k),(j)->(j)"
"""Of one unit: prevalences, answers' probabilities, response group, count, extra log weight,
which items were answered -> codes."""


@dataclass(frozen=True, eq=False)
class Answers:
    """All answers of a table, end to end: those to single items, then the joint ones of sets.

    Attributes
    ----------
    table : Table
    """

    table: Table

    @cached_property
    def row(self) -> Ints:
        """Row of each answer (G, C) in each response group."""
        return np.concatenate([self.table.response_row, self.table.joint_row], axis=1)

    @cached_property
    def never(self) -> Bools:
        """Answers (G, C, K) that have probability 0 whatever the blocks hold."""
        n_cells = np.diff(self.table.cell_start).reshape(-1, self.table.n_classes)
        return np.asarray((n_cells == 0)[self.row])

    def given(self, codes: Any) -> Any:
        """Return which answers (U, C) the codes (U, J) hold, as 0.0 and 1.0; symbolic.

        Answers to several items of a set are one joint answer, and not single ones.
        """
        import pytensor.tensor as pt

        table = self.table
        sizes = np.diff(table.item_start)
        item = np.repeat(np.arange(table.n_items), sizes)
        code = np.arange(item.size) - table.item_start[item]
        single = pt.eq(codes[:, item], code).astype("float64")
        found = joints(table)
        if not found:
            return single
        columns = [_columns(table, j) for j in range(table.n_items)]
        missing = [1.0 - single[:, at].sum(axis=1) for at in columns]
        alone = [pt.ones_like(missing[0])] * table.n_items
        together = []
        for joint in found:
            given = pt.ones_like(single[:, :1])
            for j in joint.items:
                given = (given[:, :, None] * single[:, None, columns[j]]).reshape(
                    (codes.shape[0], -1)
                )
            for j in joint.others:
                given = given * missing[j][:, None]
            together.append(given)
            for j in joint.items:
                alone[j] = alone[j] - given.sum(axis=1)
        kept = pt.stack(alone, axis=1)[:, item]
        return pt.concatenate([single * kept, *together], axis=1)


def make_log_density(answers: Answers) -> Callable[..., Any]:
    """Return the log density of the observed codes, a number for each unit.

    Exact zeros never enter a log: such answers are counted apart, and a class in which a unit
    gave one gets weight 0 by a constant.
    """
    never = answers.never
    n_groups = never.shape[0]

    def log_density(
        codes: Any,
        prevalence: Any,
        probability: Any,
        response_group: Any,
        count: Any,
        log_weight: Any,
        answered: Any,
    ) -> Any:
        import pytensor.tensor as pt

        probability = probability[(0,) * (probability.ndim - 3)]
        log_probability = pt.log(pt.switch(never, 1.0, probability))
        given = answers.given(codes)
        log_unit: Any = 0.0
        forbidden: Any = 0.0
        for g in range(n_groups):
            mine = 1.0 if n_groups == 1 else pt.eq(response_group, g)[:, None]
            log_unit = log_unit + mine * pt.dot(given, log_probability[g])
            if never.any():
                forbidden = forbidden + mine * pt.dot(given, never[g].astype(np.float64))
        joint = log_unit + pt.log(prevalence) + log_weight
        if never.any():
            joint = pt.switch(forbidden > 0.5, -np.inf, joint)
        return count * pt.logsumexp(joint, axis=-1)

    return log_density


def make_random(answers: Answers) -> Callable[..., Ints]:
    """Return the function that draws codes: one new case for each unit."""
    table = answers.table

    def random(
        prevalence: Floats,
        probability: Floats,
        response_group: Ints,
        count: Ints,
        log_weight: Floats,
        answered: Ints,
        rng: np.random.Generator | None = None,
        size: tuple[int, ...] | None = None,
    ) -> Ints:
        if rng is None:  # PyMC looks whether this can be done symbolically
            msg = "codes are drawn by NumPy"
            raise TypeError(msg)
        shape = tuple(size) if size is not None else np.shape(answered)[:-1]
        probability = probability[(0,) * (probability.ndim - 3)]
        group = np.broadcast_to(response_group, shape)
        weight = np.broadcast_to(prevalence * np.exp(log_weight), (*shape, table.n_classes))
        latent_class = _draw_index(weight, rng)
        codes = np.empty((*shape, table.n_items), dtype=np.int64)
        whole = [joint for joint in joints(table) if joint.is_whole]
        in_set = {j for joint in whole for j in joint.items}
        for j in range(table.n_items):
            if j not in in_set:
                columns = probability[:, _columns(table, j), :]
                codes[..., j] = _draw_index(columns[group, :, latent_class], rng)
        n_single = int(table.item_start[-1])
        for joint in whole:
            at = slice(n_single + joint.start, n_single + joint.start + joint.n)
            answer = _draw_index(probability[:, at, :][group, :, latent_class], rng)
            for j, code in zip(joint.items, np.unravel_index(answer, joint.sizes), strict=True):
                codes[..., j] = code
        return np.where(np.broadcast_to(answered, codes.shape) > 0, codes, MISSING)

    return random


def _columns(table: Table, item: int) -> slice:
    return slice(int(table.item_start[item]), int(table.item_start[item + 1]))


def _draw_index(weight: Floats, rng: np.random.Generator) -> Ints:
    """Draw an index along the last axis, in proportion to the weights."""
    cumulative = np.cumsum(weight, axis=-1)
    point = rng.random(weight.shape[:-1]) * cumulative[..., -1]
    return np.asarray((point[..., None] >= cumulative[..., :-1]).sum(axis=-1))
