"""A point well inside all bounds and orders of some blocks, by a linear program."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.blocks import Blocks, constrained_elements
from bayeslca.model.contradictions import LinearProgram


def inside_point(blocks: Blocks) -> Floats | None:
    """Return elements (E,) well inside the bounds; None when the bounds leave no room.

    Blocks without bounds are divided evenly.
    """
    used = constrained_elements(blocks)
    point = np.empty(blocks.element_prior.size)
    bounded: list[tuple[int, int]] = []
    for first, last in pairwise(blocks.block_start.tolist()):
        point[first:last] = 1.0 / (last - first)
        if used[first:last].any():
            bounded.append((first, last))
    if not bounded:
        return point
    elements = [e for first, last in bounded for e in range(first, last)]
    at = {e: i for i, e in enumerate(elements)}
    program = LinearProgram(len(at))
    for first, last in bounded:
        program.equal({at[e]: 1.0 for e in range(first, last)}, 1.0)
    for e in elements:
        program.above({at[e]: 1.0}, float(blocks.element_lower[e]))
        program.above({at[e]: -1.0}, -float(blocks.element_upper[e]), strict=used[e])
    for above, below in zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True):
        program.above({at[above]: 1.0, at[below]: -1.0}, 0.0)
    found = program.solve()
    if found is None:
        return None
    point[elements] = found
    return point
