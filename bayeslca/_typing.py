"""Array types used in signatures; shapes stand in the docstrings."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

Floats: TypeAlias = NDArray[np.float64]
Ints: TypeAlias = NDArray[np.integer[Any]]
Bools: TypeAlias = NDArray[np.bool_]
Seed: TypeAlias = "int | np.random.Generator | np.random.SeedSequence | None"
