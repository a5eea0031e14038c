"""Simulation-based calibration of an engine (Talts et al. 2018, arXiv 1804.06788).

Parameters are drawn from the prior and data from the model; among the parameters and L draws of
the posterior of these data, the rank of any quantity is uniform. Quantities may depend on the
data, and the data's log likelihood must be among them (Modrák et al. 2023, Bayesian Analysis,
doi 10.1214/23-BA1404). Models whose labels are exchangeable are judged by quantities that no
relabelling changes.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from threading import Event

import numpy as np
from rank_uniformity import p_value

from bayeslca.model.answered_together import AnsweredTogether
from bayeslca.model.compile import compile_units, split_units, verified_log_weight
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prevalence import DirichletPrevalence, PrevalenceSource
from bayeslca.model.probabilities import log_unit_likelihood, membership
from bayeslca.model.simulate import Parameters, draw_answers, draw_classes, draw_parameters
from bayeslca.model.symmetry import symmetry
from bayeslca.model.table import Table, UnitTable
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.units import MISSING, Units, collapse
from bayeslca.sampling.chain import Task, make_task
from bayeslca.sampling.run import WARMUP, sample_table
from bayeslca.sampling.starting_points import SHORT_RUNS, find_starting_points

DRAWS = 99
THIN = 100
"""Sweeps between draws: these small posteriors are crossed in far fewer, which leaves the draws
nearly independent."""
THREADS = 2


@dataclass(frozen=True, eq=False)
class Experiment:
    """A model and the design of its data."""

    table: Table
    source: PrevalenceSource
    group: np.ndarray  # (case,)
    answered: np.ndarray  # (case, item), bool
    verified: np.ndarray  # (case,), bool: the class is known
    labelled: bool  # priors tell all classes apart: labelled quantities are ranked too

    @property
    def n_categories(self) -> tuple[int, ...]:
        return tuple(np.diff(self.table.item_start).tolist())


@dataclass(frozen=True, eq=False)
class Data:
    """Answers of cases, and the class of those for which it is known (-1 elsewhere)."""

    codes: np.ndarray
    group: np.ndarray
    verified: np.ndarray

    def without(self, case: int) -> Data:
        kept = np.arange(self.group.size) != case
        return Data(self.codes[kept], self.group[kept], self.verified[kept])


Engine = Callable[[Experiment, Data, np.random.SeedSequence], Parameters]
"""Draws of the posterior: elements (S, E) and prevalence (S, groups, K), unordered."""


def simulate(experiment: Experiment, rng: np.random.Generator) -> tuple[Parameters, Data]:
    parameters = draw_parameters(experiment.table, experiment.source, rng)
    latent_class = draw_classes(parameters.prevalence, experiment.group, rng)
    codes = draw_answers(experiment.table, parameters.elements, latent_class, experiment.group, rng)
    codes = np.where(experiment.answered, codes, MISSING).astype(np.int16)
    verified = np.where(experiment.verified, latent_class, -1)
    return parameters, Data(codes, experiment.group, verified)


def units_of(experiment: Experiment, data: Data) -> tuple[Units, UnitTable]:
    counts = np.ones(data.group.size, dtype=np.int64)
    units = collapse(data.codes, data.group.astype(np.int32), counts, experiment.n_categories)
    if not np.any(data.verified >= 0):
        return units, compile_units(experiment.table, units)
    log_weight = verified_log_weight(data.verified, experiment.table.n_classes)
    units, log_weight = split_units(units, counts, log_weight)
    return units, compile_units(experiment.table, units, log_weight)


def gibbs(experiment: Experiment, data: Data, seed: np.random.SeedSequence) -> Parameters:
    """Run one chain of the engine, as `sample_table` does, for a fixed number of sweeps."""
    _, units = units_of(experiment, data)
    table, source = experiment.table, experiment.source
    return run_chain(make_task(table, units, source, symmetry(table, source, units)), seed)


def run_chain(task: Task, seed: np.random.SeedSequence, starts: int = SHORT_RUNS) -> Parameters:
    _, (chain,) = find_starting_points(task, seed, chains=1, threads=1, stop=Event(), runs=starts)
    chain.run(1, WARMUP)
    kept = chain.run(DRAWS, THIN)
    return Parameters(kept.elements, kept.prevalence)


def front_door(experiment: Experiment, data: Data, seed: np.random.SeedSequence) -> Parameters:
    """Let `sample_table` decide how long four chains run, and spread the kept draws out."""
    _, units = units_of(experiment, data)
    table, source = experiment.table, experiment.source
    labels = symmetry(table, source, units)
    draws = sample_table(table, units, source, labels, seed=seed, draws=200, ess=400, threads=1)
    assert not draws.limit_reached
    n_draws = draws.n_chains * draws.n_draws
    at = np.linspace(0, n_draws - 1, DRAWS).astype(int)
    return Parameters(
        draws.elements.reshape(n_draws, -1)[at],
        draws.prevalence.reshape(n_draws, *draws.prevalence.shape[2:])[at],
    )


def quantities(experiment: Experiment, data: Data, draws: Parameters) -> dict[str, np.ndarray]:
    """Return what is ranked, (S,) each; label-free unless the model is labelled."""
    table, (elements, prevalence) = experiment.table, (draws.elements, draws.prevalence)
    units, unit_table = units_of(experiment, data)
    log_likelihood = log_unit_likelihood(table, unit_table, elements, prevalence)
    shares = membership(table, unit_table, elements, prevalence)
    one, two = (shares[:, units.unit_of_row[case]] for case in np.flatnonzero(answers(data))[:2])
    first = (np.zeros((1, table.n_items), dtype=np.int16), np.zeros(1, dtype=np.int32))
    pattern = compile_units(table, collapse(*first, np.ones(1, np.int64), experiment.n_categories))
    out = {
        "log likelihood": log_likelihood @ unit_table.count,
        "two cases in one class": np.sum(one * two, axis=-1),
        "a pattern": log_unit_likelihood(table, pattern, elements, prevalence)[:, 0],
    }
    for g in range(prevalence.shape[1]):
        out[f"sum of squared prevalences {g}"] = np.sum(prevalence[:, g] ** 2, axis=-1)
        ordered = np.sort(prevalence[:, g], axis=-1)
        for k in range(1, prevalence.shape[2]):
            out[f"sorted prevalence {g} {k}"] = ordered[:, k]
    if experiment.labelled:
        for g, k in np.ndindex(prevalence.shape[1], prevalence.shape[2] - 1):
            out[f"prevalence {g} {k}"] = prevalence[:, g, k]
        last = set((table.block_start[1:] - 1).tolist())
        for e in range(table.n_elements):
            if e not in last:
                out[f"element {e}"] = elements[:, e]
    return out


def answers(data: Data) -> np.ndarray:
    """Which cases gave an answer at all."""
    return np.asarray((data.codes != MISSING).any(axis=1))


def p_values(
    experiment: Experiment, seed: int, replicates: int, engine: Engine = gibbs
) -> dict[str, float]:
    """Probability of ranks as far from uniform as these, for every quantity."""
    with ThreadPoolExecutor(THREADS) as pool:
        streams = np.random.SeedSequence(seed).spawn(replicates)
        ranks = list(pool.map(lambda stream: _ranks(experiment, stream, engine), streams))
    return {name: p_value(np.array([one[name] for one in ranks]), DRAWS + 1) for name in ranks[0]}


def smallest(found: dict[str, float]) -> float:
    """Return the smallest p-value times their number."""
    return min(found.values()) * len(found)


def _ranks(
    experiment: Experiment, stream: np.random.SeedSequence, engine: Engine
) -> dict[str, int]:
    simulation, fit, ties = stream.spawn(3)
    truth, data = simulate(experiment, np.random.default_rng(simulation))
    draws = engine(experiment, data, fit)
    both = Parameters(
        np.concatenate([truth.elements[None], draws.elements]),
        np.concatenate([truth.prevalence[None], draws.prevalence]),
    )
    rng = np.random.default_rng(ties)
    out = {}
    for name, values in quantities(experiment, data, both).items():
        tied = int(np.sum(values[1:] == values[0]))
        out[name] = int(np.sum(values[1:] < values[0])) + int(rng.integers(tied + 1))
    return out


def of_model(model: LatentClassModel, sizes: list[int], *, labelled: bool) -> Experiment:
    """All cases answer everything, no class is known."""
    group = np.repeat(np.arange(len(sizes)), sizes)
    shape = (group.size, len(model.items))
    return Experiment(
        table=model.table,
        source=model.prevalence_source,
        group=group,
        answered=np.ones(shape, dtype=bool),
        verified=np.zeros(group.size, dtype=bool),
        labelled=labelled,
    )


def yes_no(n: int) -> tuple[Item, ...]:
    return tuple(Item(f"item_{j + 1}", ("no", "yes"), yes="yes") for j in range(n))


def exploratory(n_classes: int, n_cases: int = 30, n_items: int = 5) -> Experiment:
    model = LatentClassModel(yes_no(n_items), n_classes)
    return of_model(model, [n_cases], labelled=False)


def many_categories_some_missing() -> Experiment:
    """Two exchangeable classes; a third of the answers missing, two cases without any."""
    items = tuple(
        Item(f"item_{n}_{j}", tuple("abcd"[:n])) for j, n in enumerate((3, 4, 2, 3), start=1)
    )
    experiment = of_model(LatentClassModel(items, 2), [24], labelled=False)
    answered = np.arange(24 * 4).reshape(24, 4) % 3 != 0
    answered[[5, 11]] = False
    return replace(experiment, answered=answered)


def two_groups() -> Experiment:
    """Exchangeable classes with prevalences per group."""
    model = LatentClassModel(yes_no(4), 2, groups=Groups("district", ("north", "south")))
    return of_model(model, [12, 20], labelled=False)


def named_two_groups() -> Experiment:
    """Two named classes told apart by weak priors, so that labellings share the posterior."""
    model = LatentClassModel(
        yes_no(3),
        ("managed", "informal"),
        statements=(
            "P(item_1=yes | managed) ~ Beta(4, 1)",
            "P(item_1=yes | informal) ~ Beta(1, 3)",
            "P(item_2=yes | managed) ~ Beta(2, 2)",
        ),
        groups=Groups("district", ("north", "south")),
    )
    return of_model(model, [15, 20], labelled=True)


def named_nearly_alike() -> Experiment:
    """One weak prior tells the classes apart; many answers: labellings are far from each other."""
    model = LatentClassModel(
        yes_no(10), ("managed", "informal"), statements=("P(item_1=yes | managed) ~ Beta(3, 1)",)
    )
    return of_model(model, [80], labelled=True)


def bounded() -> Experiment:
    """Three named classes told apart by orders; bounds, an equality, ordered prevalences."""
    model = LatentClassModel(
        (*yes_no(3), Item("often", ("never", "some", "always"))),
        ("managed", "informal", "lapsed"),
        statements=(
            "P(item_1=yes | managed) > P(item_1=yes | informal) > P(item_1=yes | lapsed)",
            "P(item_2=yes | managed) > 0.4",
            "P(item_2=yes | lapsed) < 0.7",
            "P(item_3=yes | managed) = P(item_3=yes | informal)",
            "P(often=always | managed) > 0.2",
            "P(often=never | lapsed) > P(often=never | informal)",
            "P(managed) < P(informal)",
        ),
    )
    return of_model(model, [25], labelled=True)


def together_in_all_classes() -> Experiment:
    """Let a pair go together in both of two named classes, with numbers for each; halves missing.

    Priors tell the classes apart only weakly, so that labellings share the posterior.
    """
    model = LatentClassModel(
        yes_no(4),
        ("managed", "informal"),
        statements=(
            "P(item_3=yes | managed) ~ Beta(4, 1)",
            "P(item_4=yes | informal) ~ Beta(1, 3)",
        ),
        answered_together=[
            AnsweredTogether(["item_1", "item_2"], ["managed"], prior=[2.0, 0.5, 1.0, 3.0]),
            AnsweredTogether(["item_1", "item_2"], ["informal"]),
        ],
    )
    return with_missing_halves(of_model(model, [30], labelled=True))


def together_in_one_class() -> Experiment:
    """Let three items go together in one class of two; a prior, and a joint answer ruled out."""
    model = LatentClassModel(
        (*yes_no(3), Item("often", ("never", "some", "always"))),
        ("managed", "informal"),
        statements=(
            "P(item_1=yes | managed) ~ Beta(3, 2)",
            "P(item_1=no, item_2=yes, often=always | managed) = 0",
        ),
        answered_together=[AnsweredTogether(["item_1", "item_2", "often"], ["managed"])],
    )
    return with_missing_halves(of_model(model, [25], labelled=True))


def with_missing_halves(experiment: Experiment) -> Experiment:
    """Leave out the first item of some cases, the second of others, or the last."""
    answered = experiment.answered.copy()
    answered[:6, 0], answered[6:12, 1], answered[10:16, -1] = False, False, False
    return replace(experiment, answered=answered)


def rich() -> Experiment:
    """Blocks shared, a constant, a tie across 3 and 2 categories, a pair, verified cases."""
    builder = TableBuilder([2, 3, 2, 2], 2, (0,))
    pair = builder.answered_together(2, 3)
    shared = builder.block([2.0, 1.0])
    builder.set_item(0, 0, 0, shared)
    builder.set_item(0, 1, 0, builder.block([1.0, 2.0, 0.8]))
    builder.set_joint(0, pair, 0, builder.block([1.0, 0.7, 1.2, 2.0]))
    builder.set_split(0, 1, 1, 1, shared, builder.block([1.0, 1.2]))
    builder.set_known(0, 0, 1, {1: 0.2})
    tied = builder.block([1.5, 0.8])
    builder.set_item(0, 2, 1, tied)
    builder.set_item(0, 3, 1, tied[::-1])
    table = builder.build()
    answered = np.ones((20, 4), dtype=bool)
    answered[:7, 2], answered[7:14, 3], answered[12:16, 1] = False, False, False
    return Experiment(
        table=table,
        source=DirichletPrevalence(np.array([[1.0, 1.5]])),
        group=np.zeros(20, dtype=np.int64),
        answered=answered,
        verified=np.arange(20) % 5 == 0,
        labelled=True,
    )
