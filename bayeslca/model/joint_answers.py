"""Sets of items that are answered together: the joint answers a case can give.

Of a set of items a case may have answered all or some. Every way to answer two or more of them
has joint answers of its own in the table, whose rows are sums of cells where others of the set
are missing; a single one has the item's own rows.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import prod

import numpy as np

from bayeslca._typing import Bools, Ints
from bayeslca.model.table import Table


@dataclass(frozen=True, slots=True)
class Joint:
    """Joint answers of some items of a set.

    Attributes
    ----------
    items : tuple of int
        The items that are answered, in the set's order.
    others : tuple of int
        The set's other items, which are missing here.
    sizes : tuple of int
        Categories of each answered item; the last item's category changes fastest.
    start : int
        Joint answers are columns ``start:start + n`` of the table's ``joint_row``.
    """

    items: tuple[int, ...]
    others: tuple[int, ...]
    sizes: tuple[int, ...]
    start: int

    @property
    def n(self) -> int:
        """Number of joint answers."""
        return prod(self.sizes)

    @property
    def columns(self) -> slice:
        """Columns of the table's ``joint_row``."""
        return slice(self.start, self.start + self.n)

    @property
    def is_whole(self) -> bool:
        """True when every item of the set is answered."""
        return not self.others


@lru_cache(maxsize=32)
def joints(table: Table) -> tuple[Joint, ...]:
    """Return the joint answers of a table, in the order of its ``joint_item``."""
    sizes = np.diff(table.item_start)
    items = [tuple(int(j) for j in row if j >= 0) for row in table.joint_item]
    whole: dict[int, tuple[int, ...]] = {}
    for members, of_set in zip(items, table.joint_set.tolist(), strict=True):
        whole[of_set] = max(whole.get(of_set, ()), members, key=len)
    return tuple(
        Joint(
            items=members,
            others=tuple(j for j in whole[of_set] if j not in members),
            sizes=tuple(int(sizes[j]) for j in members),
            start=int(start),
        )
        for members, of_set, start in zip(
            items, table.joint_set.tolist(), table.joint_start[:-1], strict=True
        )
    )


def joint_of(table: Table, items: frozenset[int] | set[int]) -> Joint | None:
    """Return the joint answers of exactly these items; None where they are not one set's."""
    return next((joint for joint in joints(table) if set(joint.items) == set(items)), None)


def given_jointly(joint: Joint, answered: Bools) -> Bools:
    """Tell which cases (n,) answered (n, J) a joint's items and none of the set's others."""
    all_of_these = answered[:, list(joint.items)].all(axis=1)
    return np.asarray(all_of_these & ~answered[:, list(joint.others)].any(axis=1))


def joint_codes(joint: Joint, codes: Ints) -> Ints:
    """Return the joint answer (n,) that codes (n, J) of a joint's items make."""
    each = tuple(codes[:, j].astype(np.int64) for j in joint.items)
    return np.asarray(np.ravel_multi_index(each, joint.sizes), dtype=np.int64)
