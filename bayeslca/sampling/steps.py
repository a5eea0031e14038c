"""Steps: what a joint model adds to the Gibbs sweep, as the driver knows it.

A step belongs to one chain. It holds the current values of its own parameters and draws them anew
given the classes: a `SourceStep` those behind the prevalences (coefficients, unit effects), an
`OutcomeStep` those of what follows from class. `bayeslca.sampling.joint_gibbs` drives them.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Protocol, runtime_checkable

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.layout import Layout, Workspace


class SourceStep(Protocol):
    """Where prevalences come from, in one chain. Priors are exchangeable over all classes.

    A prevalence row is what `bayeslca.model.table.UnitTable.prevalence_row` points to: a group, a
    unit, a distinct line of covariates.
    """

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Current values by name; the driver copies them when a draw is kept."""
        ...

    def prevalence(self, out: Floats) -> None:
        """Write the prevalences (row, K) that follow from the current parameters."""
        ...

    def draw(self, class_count: Ints, prevalence: Floats, rng: np.random.Generator) -> None:
        """Draw the parameters given the cases in each class.

        Parameters
        ----------
        class_count : ndarray of int64, shape (row, K)
            Cases of each prevalence row in each class.
        prevalence : ndarray of float64, shape (row, K)
            The current prevalences; overwritten with those of the new parameters.
        rng : numpy.random.Generator
        """
        ...

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        ...

    def log_prior(self) -> float:
        """Return the normalised log prior density of the current parameters."""
        ...


@runtime_checkable
class WholeSweeps(Protocol):
    """What a `SourceStep` may offer besides: whole sweeps in compiled code, several at a time.

    The driver takes them where there is no outcome: threads then meet less often.
    """

    def sweeps(
        self,
        layout: Layout,
        work: Workspace,
        bounds: Bounded,
        is_held: bool,
        elements: Floats,
        prevalence: Floats,
        n: int,
        rng: np.random.Generator,
    ) -> float:
        """Do n sweeps in place: classes, blocks unless they are held, the source's parameters.

        Returns
        -------
        float
            Log likelihood of the state before the last sweep; nan when a unit is impossible.
        """
        ...


class OutcomeStep(Protocol):
    """What follows from class, in one chain."""

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Current values by name; the driver copies them when a draw is kept."""
        ...

    def log_weight(self, out: Floats) -> None:
        """Write the log density (unit, K) of one case of each unit, in each class.

        Units stand in the order of the unit table that the driver was given. A class that is
        impossible for a unit gets minus infinity.
        """
        ...

    def draw(self, unit_count: Ints, rng: np.random.Generator) -> None:
        """Draw the parameters given how many cases of each unit are in each class (unit, K)."""
        ...

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        ...

    def log_prior(self) -> float:
        """Return the normalised log prior density of the current parameters."""
        ...


class DirichletStep:
    """Dirichlet prevalences as a step: for models that only add outcomes.

    Parameters
    ----------
    concentration : ndarray of float64, shape (row, K)
    rng : numpy.random.Generator
        Draws the values to begin with, from the prior.
    """

    def __init__(self, concentration: Floats, rng: np.random.Generator) -> None:
        self.concentration = np.array(concentration, dtype=np.float64)
        self._value = np.stack([rng.dirichlet(a) for a in self.concentration])

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Nothing beside the prevalences, which the driver keeps itself."""
        return {}

    def prevalence(self, out: Floats) -> None:
        """Write the current prevalences (row, K)."""
        out[:] = self._value

    def draw(self, class_count: Ints, prevalence: Floats, rng: np.random.Generator) -> None:
        """Draw each row from its Dirichlet given the cases (row, K) in each class."""
        gammas = np.maximum(rng.standard_gamma(self.concentration + class_count), 1e-300)
        self._value = gammas / gammas.sum(axis=1, keepdims=True)
        prevalence[:] = self._value

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        self._value = np.ascontiguousarray(self._value[:, permutation])

    def log_prior(self) -> float:
        """Return the log density of the current prevalences."""
        from bayeslca.model.prevalence import DirichletPrevalence

        return float(DirichletPrevalence(self.concentration).log_density(self._value))
