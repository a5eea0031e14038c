"""Seeds of the rows of a comparison: each depends on the whole's seed and the row's name alone."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence

import numpy as np

from bayeslca._typing import Seed
from bayeslca.assess.comparison.words import Name


def seed_of_row(entropy: int | Sequence[int], name: Name) -> int:
    """Return the seed of one row: it depends on the whole's seed and the row's name alone."""
    key = name
    if not isinstance(key, int):
        key = int.from_bytes(hashlib.sha256(str(name).encode()).digest()[:4], "little") + 2**31
    child = np.random.SeedSequence(entropy, spawn_key=(key,))
    return int(child.generate_state(1, np.uint64)[0] >> np.uint64(1))


def entropy_of(seed: Seed) -> int | Sequence[int]:
    """Return the entropy that the seeds of all rows follow from."""
    if isinstance(seed, np.random.Generator):
        return [int(part) for part in seed.integers(2**63, size=4)]
    sequence = seed if isinstance(seed, np.random.SeedSequence) else np.random.SeedSequence(seed)
    return [int(part) for part in sequence.generate_state(4)]
