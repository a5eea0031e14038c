"""A chain of a joint model: classes and blocks by the kernel, then the model's own steps."""

from __future__ import annotations

import math
import threading
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from itertools import combinations
from typing import cast

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError, SamplingError
from bayeslca.model.blocks import inside_blocks, log_block_densities
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import Table, UnitTable
from bayeslca.sampling.bounds_layout import Bounded, bounded
from bayeslca.sampling.chain import MOVES_EVERY, Stopped
from bayeslca.sampling.layout import Layout, arrange, workspace
from bayeslca.sampling.steps import OutcomeStep, SourceStep, WholeSweeps

MakeSource = Callable[[np.random.Generator], SourceStep]
MakeOutcome = Callable[[np.random.Generator], OutcomeStep]

LOOK_SECONDS = 0.05
"""A chain looks at the stop flag about so often."""
MOST_AT_ONCE = 50
"""Sweeps of one call into compiled code, at most."""


@dataclass(frozen=True, eq=False)
class JointTask:
    """What the chains of a joint model sample; see `joint_task`.

    Attributes
    ----------
    table : Table
    units : UnitTable
        ``prevalence_row`` points to the source's rows.
    n_rows : int
        Prevalence rows of the source.
    share_of_row : ndarray of float64, shape (G, row)
        Weights that make the mean prevalence of each group from those of the rows.
    make_source, make_outcome : callables
        Make one chain's steps; no outcome when None.
    layout : Layout
    bounds : Bounded
    permutations : ndarray of int64, shape (M, K)
        Permutation moves: swaps of two classes that leave the table, but not its priors, alike.
    element_maps : ndarray of int64, shape (M, E)
    """

    table: Table
    units: UnitTable
    n_rows: int
    share_of_row: Floats
    make_source: MakeSource
    make_outcome: MakeOutcome | None
    layout: Layout
    bounds: Bounded
    permutations: Ints
    element_maps: Ints


def joint_task(
    table: Table,
    units: UnitTable,
    n_rows: int,
    make_source: MakeSource,
    make_outcome: MakeOutcome | None = None,
    group_of_row: Ints | None = None,
) -> JointTask:
    """Collect what the chains of a joint model need.

    Parameters
    ----------
    table : Table
    units : UnitTable
        With ``prevalence_row`` pointing to the source's rows; extra log weights that stay as
        they are (verified classes) may be in it.
    n_rows : int
        Prevalence rows of the source.
    make_source, make_outcome : callables
        Make one chain's steps from its generator.
    group_of_row : ndarray of int, shape (row,), optional
        The table's group of each prevalence row; all of the first group when left out.
    """
    group = np.zeros(n_rows, dtype=np.int64) if group_of_row is None else group_of_row
    cases = np.bincount(units.prevalence_row, weights=units.count, minlength=n_rows)
    share = np.zeros((table.n_prevalence_rows, n_rows))
    share[group, np.arange(n_rows)] = cases
    total = share.sum(axis=1, keepdims=True)
    share /= np.where(total > 0, total, 1.0)
    permutations, maps = _moves(table, units)
    return JointTask(
        table=table,
        units=units,
        n_rows=n_rows,
        share_of_row=share,
        make_source=make_source,
        make_outcome=make_outcome,
        layout=arrange(table, units, n_rows),
        bounds=bounded(table),
        permutations=permutations,
        element_maps=maps,
    )


def _moves(table: Table, units: UnitTable) -> tuple[Ints, Ints]:
    """Find the swaps of two classes that change priors of blocks but not the likelihood."""
    permutations, maps = [], []
    for a, b in combinations(range(table.n_classes), 2):
        swap = np.arange(table.n_classes)
        swap[[a, b]] = [b, a]
        try:
            mapped = element_map(table, np.tile(swap, (table.n_prevalence_rows, 1)))
        except ModelError:
            continue
        weights = units.log_weight
        if weights.size and not np.array_equal(weights[:, swap], weights):
            continue
        if _keeps_prior(table, mapped):
            continue
        permutations.append(swap)
        maps.append(mapped)
    return (
        np.asarray(permutations, dtype=np.int64).reshape(-1, table.n_classes),
        np.asarray(maps, dtype=np.int64).reshape(len(maps), table.n_elements),
    )


def _keeps_prior(table: Table, mapped: Ints) -> bool:
    arrays = (table.element_prior, table.element_lower, table.element_upper)
    orders = set(zip(table.order_above.tolist(), table.order_below.tolist(), strict=True))
    moved = {(int(mapped[a]), int(mapped[b])) for a, b in orders}
    return moved == orders and all(np.array_equal(one[mapped], one) for one in arrays)


@dataclass(frozen=True, eq=False)
class JointKept:
    """Kept draws of one chain; see `bayeslca.sampling.joint_draws.JointDraws`."""

    elements: Floats
    prevalence: Floats
    log_likelihood: Floats
    log_prior: Floats
    swaps: Floats
    parameters: Mapping[str, Floats]

    def arrays(self) -> dict[str, Floats]:
        """Return all arrays but the parameters by name."""
        return {
            "elements": self.elements,
            "prevalence": self.prevalence,
            "log_likelihood": self.log_likelihood,
            "log_prior": self.log_prior,
            "swaps": self.swaps,
        }


class JointChain:
    """One chain: everything that changes while it runs belongs to it alone.

    Parameters
    ----------
    task : JointTask
    elements : ndarray, shape (E,)
    rng : numpy.random.Generator
    """

    def __init__(self, task: JointTask, elements: Floats, rng: np.random.Generator) -> None:
        self.task = task
        self.rng = rng
        self.elements = np.array(elements, dtype=np.float64)
        self.source = task.make_source(rng)
        self.outcome = None if task.make_outcome is None else task.make_outcome(rng)
        alone = self.outcome is None and isinstance(self.source, WholeSweeps)
        self._whole = cast(WholeSweeps, self.source) if alone else None
        self.prevalence = np.empty((task.n_rows, task.table.n_classes))
        self.source.prevalence(self.prevalence)
        self.sweeps = 0
        self._layout = task.layout
        self._log_weight = np.zeros((task.units.n_units, task.table.n_classes))
        self._owed = 0.0
        if self.outcome is not None:
            self._layout = _with_own_weights(task.layout, self._log_weight.shape)
        self._work = workspace(self._layout, keep_units=self.outcome is not None)
        self._unit_count = np.zeros(self._log_weight.shape, dtype=np.int64)
        self._is_bounded = bool(task.bounds.block.shape[0])

    def run(
        self,
        draws: int,
        thin: int,
        stop: threading.Event | None = None,
        report: Callable[[int], None] | None = None,
        held: Floats | None = None,
    ) -> JointKept:
        """Go on for draws x thin sweeps and keep every thin-th state.

        Parameters
        ----------
        draws, thin : int
        stop : threading.Event, optional
        report : callable, optional
            Given numbers of sweeps as they are done.
        held : ndarray, shape (draw, E), optional
            Elements that are held during the sweeps of each draw, instead of being drawn.

        Raises
        ------
        Stopped
            When the stop flag was set.
        SamplingError
            When a unit has probability 0 in every class.
        """
        kept = self._room(draws)
        looked, since = time.perf_counter(), 0
        for draw in range(draws):
            swaps = 0
            if held is not None:
                self.elements[:] = held[draw]
            swaps += self._sweeps(thin - 1, held is not None)
            self._keep(kept, draw, held is None)
            swaps += self._sweeps(1, held is not None)
            kept.log_likelihood[draw] = self._log_likelihood
            kept.swaps[draw] = swaps
            since += thin
            if time.perf_counter() - looked > LOOK_SECONDS:
                if stop is not None and stop.is_set():
                    raise Stopped
                if report is not None:
                    report(since)
                looked, since = time.perf_counter(), 0
        if report is not None and since:
            report(since)
        return kept

    def _sweeps(self, n: int, is_held: bool) -> int:
        """Do n sweeps; return how many label moves were accepted."""
        swaps = 0
        while n > 0:
            moves = not is_held and self.task.permutations.shape[0] > 0
            if moves and self.sweeps % MOVES_EVERY == 0:
                swaps += self._swap_labels()
            if self._whole is None:
                done = 1
                found = self._sweep(is_held)
            else:
                # No further than to the next move, or to where the stop flag is looked at.
                done = min(n, MOVES_EVERY - self.sweeps % MOVES_EVERY if moves else MOST_AT_ONCE)
                state = (self.elements, self.prevalence)
                found = self._whole.sweeps(
                    self._layout, self._work, self.task.bounds, is_held, *state, done, self.rng
                )
            if math.isnan(found):
                msg = (
                    "some answers have probability 0 in every class; check the fixed probabilities."
                )
                raise SamplingError(msg)
            self._log_likelihood = found
            self.sweeps += done
            n -= done
        return swaps

    def _sweep(self, is_held: bool) -> float:
        from bayeslca.sampling import joint_kernel as kernel

        if self.outcome is not None:
            self._renew_weights(self.outcome)
        state = (self.elements, self.prevalence, self.rng)
        if is_held:
            found = kernel.classes_only(self._layout, self._work, *state)
        elif self._is_bounded:
            found = kernel.classes_and_bounded_blocks(
                self._layout, self._work, self.task.bounds, *state
            )
        else:
            found = kernel.classes_and_blocks(self._layout, self._work, *state)
        if math.isnan(found):
            return found
        self.source.draw(self._work.class_count, self.prevalence, self.rng)
        if self.outcome is not None:
            self._unit_count[self._layout.unit] = self._work.unit_count
            self.outcome.draw(self._unit_count, self.rng)
        return found + self._owed

    def _renew_weights(self, outcome: OutcomeStep) -> None:
        from bayeslca.sampling.joint_kernel import renew_weights

        layout = self._layout
        outcome.log_weight(self._log_weight)
        if self.task.units.log_weight.size:
            self._log_weight += self.task.units.log_weight
        self._owed = renew_weights(
            layout.unit,
            layout.cases,
            self._log_weight,
            layout.log_weight,
            layout.weight,
            layout.shift,
        )

    def _swap_labels(self) -> int:
        """Propose to swap two classes; accept with the ratio of the priors."""
        task = self.task
        move = int(self.rng.integers(task.permutations.shape[0]))
        swap, mapped = task.permutations[move], task.element_maps[move]
        moved = self.elements[mapped]
        if not inside_blocks(task.table, moved):
            return 0
        before = self._log_prior(True)
        self._permute(swap)
        old, self.elements = self.elements, moved
        if math.log1p(-self.rng.random()) < self._log_prior(True) - before:
            self.source.prevalence(self.prevalence)
            return 1
        self.elements = old
        self._permute(swap)  # a swap undoes itself
        return 0

    def _permute(self, permutation: Ints) -> None:
        self.source.permute(permutation)
        if self.outcome is not None:
            self.outcome.permute(permutation)

    def _log_prior(self, with_elements: bool) -> float:
        total = self.source.log_prior()
        if self.outcome is not None:
            total += self.outcome.log_prior()
        if with_elements:
            total += float(log_block_densities(self.task.table, self.elements).sum())
        return total

    def _parameters(self) -> dict[str, Floats]:
        found = dict(self.source.parameters)
        if self.outcome is not None:
            found.update(self.outcome.parameters)
        return found

    def _room(self, draws: int) -> JointKept:
        parameters = self._parameters()
        return JointKept(
            elements=np.empty((draws, self.elements.size)),
            prevalence=np.empty((draws, self.task.table.n_prevalence_rows, self._n_classes)),
            log_likelihood=np.empty(draws),
            log_prior=np.empty(draws),
            swaps=np.empty(draws),
            parameters={
                name: np.empty((draws, *np.shape(value))) for name, value in parameters.items()
            },
        )

    @property
    def _n_classes(self) -> int:
        return self.task.table.n_classes

    def _keep(self, kept: JointKept, draw: int, with_elements: bool) -> None:
        kept.elements[draw] = self.elements
        kept.prevalence[draw] = self.task.share_of_row @ self.prevalence
        kept.log_prior[draw] = self._log_prior(with_elements)
        for name, value in self._parameters().items():
            kept.parameters[name][draw] = value


def _with_own_weights(layout: Layout, shape: tuple[int, ...]) -> Layout:
    """Return the layout with weights of one chain's own, to be renewed in place."""
    return layout._replace(
        log_weight=np.zeros(shape), weight=np.ones(shape), shift=np.zeros(shape[0]), log_shift=0.0
    )
