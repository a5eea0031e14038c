"""An outcome as a step of the joint sampler, in one chain."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TypeAlias

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import SamplingError
from bayeslca.sampling.outcome_forms import OutcomeData

BY_CLASS, SHARED = "outcome_by_class", "outcome_shared"
"""Names of the parameters that a chain keeps."""

LogPrior: TypeAlias = Callable[[Floats, Floats], float]


class OutcomeGibbs:
    """What follows from class: `bayeslca.sampling.steps.OutcomeStep` for every form of outcome.

    Parameters
    ----------
    data : OutcomeData
        Units in the order of the unit table; each is one case.
    log_prior : callable
        Normalised log prior density of (by_class, shared).
    by_class : ndarray of float64, shape (K, M)
    shared : ndarray of float64, shape (S,)
        Where to start; copied.
    """

    def __init__(
        self, data: OutcomeData, log_prior: LogPrior, by_class: Floats, shared: Floats
    ) -> None:
        self.data = data
        self.by_class = np.array(by_class, dtype=np.float64, order="C")
        self.shared = np.array(shared, dtype=np.float64)
        self._log_prior = log_prior

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Current values by name."""
        return {BY_CLASS: self.by_class, SHARED: self.shared}

    def log_weight(self, out: Floats) -> None:
        """Write the log density (unit, K) of each unit's outcome in each class."""
        from bayeslca.sampling.outcome_density import fill_log_density

        fill_log_density(self.data, self.by_class, self.shared, out)

    def draw(self, unit_count: Ints, rng: np.random.Generator) -> None:
        """Draw the parameters given which class each unit (unit, K) is in."""
        from bayeslca.sampling.outcome_draws import draw_outcome

        if unit_count.size and int(unit_count.sum()) != unit_count.shape[0]:
            msg = "with an outcome, every unit must be one case."
            raise SamplingError(msg)
        classes = unit_count.argmax(axis=1)
        draw_outcome(self.data, classes, self.by_class, self.shared, rng)

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        self.by_class = np.ascontiguousarray(self.by_class[permutation])

    def log_prior(self) -> float:
        """Return the normalised log prior density of the current parameters."""
        return self._log_prior(self.by_class, self.shared)
