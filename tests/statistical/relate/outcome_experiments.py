"""Simulation-based calibration of the joint model of answers and an outcome.

Talts et al. (2018), arXiv 1804.06788; the data's log likelihood is ranked too (Modrák et al. 2023,
doi 10.1214/23-BA1404). Two classes that priors tell apart, no relabelling (rule 25).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from rank_uniformity import p_value

from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_joint
from bayeslca.model.simulate import draw_answers, draw_classes, draw_parameters
from bayeslca.model.table import UnitTable
from bayeslca.relate.outcomes.model import OutcomeModel, OutcomePrior
from bayeslca.relate.outcomes.quantities import class_means, simulate_outcome
from bayeslca.responses.item import Item
from bayeslca.responses.units import Units
from bayeslca.sampling.joint_chain import JointChain, joint_task
from bayeslca.sampling.outcome_density import fill_log_density
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    LOG_NEGATIVE_BINOMIAL,
    LOG_POISSON,
    LOGISTIC,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
)
from bayeslca.sampling.outcome_step import BY_CLASS, SHARED, OutcomeGibbs
from bayeslca.sampling.steps import DirichletStep

CASES, DRAWS, THIN, WARMUP = 25, 63, 12, 150

MODEL = LatentClassModel(
    [Item(f"i{j}", ("no", "yes"), yes="yes") for j in range(3)],
    ["high", "low"],
    statements=["P(i0=yes | high) ~ Beta(6, 2)", "P(i0=yes | low) ~ Beta(2, 6)"],
)

FORMS = {
    "normal": NORMAL,
    "bernoulli": BERNOULLI,
    "poisson": POISSON,
    "negative binomial": NEGATIVE_BINOMIAL,
    "categorical": CATEGORICAL,
    "normal, adjusted": NORMAL,
    "logistic": LOGISTIC,
    "log poisson": LOG_POISSON,
    "log negative binomial": LOG_NEGATIVE_BINOMIAL,
    "cumulative": CUMULATIVE,
}


def outcome_of(name: str, rng: np.random.Generator) -> OutcomeModel:
    """Return a model of an outcome with priors that do not depend on data, values left empty."""
    form = FORMS[name]
    is_adjusted = form >= LOGISTIC or "adjusted" in name
    x = rng.normal(size=(CASES, 1 if is_adjusted else 0))
    is_ordered = form in (CATEGORICAL, CUMULATIVE)
    by_form = {
        NORMAL: OutcomePrior((1.0, 2.0), (4.0, 1.5)),
        BERNOULLI: OutcomePrior(pseudo=(2.0, 1.0)),
        POISSON: OutcomePrior(pseudo=(2.0, 0.5)),
        NEGATIVE_BINOMIAL: OutcomePrior(spread=(0.5, 0.7), pseudo=(2.0, 0.5)),
        CATEGORICAL: OutcomePrior(pseudo=(0.8, 1.0)),
        CUMULATIVE: OutcomePrior((0.0, 1.2), threshold=np.array([-1.0, 1.0])),
    }
    prior = by_form.get(form, OutcomePrior((0.5, 0.8), (0.5, 0.7)))
    return OutcomeModel(
        form=form,
        n_classes=2,
        value=np.zeros(CASES),
        seen=np.arange(CASES) % 9 != 0,  # some outcomes are missing
        prior=replace(prior, slope_sd=np.full(x.shape[1], 0.5)),
        covariate=x,
        n_levels=3 if is_ordered else 0,
    )


def quantities(
    model: OutcomeModel,
    units: UnitTable,
    elements: np.ndarray,
    prevalence: np.ndarray,
    by_class: np.ndarray,
    shared: np.ndarray,
) -> dict[str, float]:
    """Return what is ranked: means, spreads, slopes, a prevalence and the log likelihood."""
    density = np.empty((CASES, 2))
    fill_log_density(model.data(), np.ascontiguousarray(by_class), shared, density)
    _, joint = next(iter(log_joint(MODEL.table, units, elements[None], prevalence[None])))
    total = np.logaddexp.reduce(joint[:, :, 0].T + density, axis=1).sum()
    means = class_means(model, by_class, shared)
    out = {"mean 1": means[0], "mean 2": means[1], "log likelihood": total}
    out["prevalence"] = prevalence[0, 0]
    if model.has_spread:
        out |= {"spread 1": by_class[0, 1], "spread 2": by_class[1, 1]}
    if shared.size:
        out["shared"] = shared[0]
    return {name: float(value) for name, value in out.items()}


def one_replicate(name: str, seed: np.random.SeedSequence) -> dict[str, int]:
    """Return the rank of every quantity of the prior's draw among draws of the posterior."""
    rng = np.random.default_rng(seed)
    empty = outcome_of(name, rng)
    truth = draw_parameters(MODEL.table, MODEL.prevalence_source, rng)
    by_class, shared = empty.draw_prior(rng)
    group = np.zeros(CASES, dtype=np.int64)
    classes = draw_classes(truth.prevalence, group, rng)
    codes = draw_answers(MODEL.table, truth.elements, classes, group, rng)
    outcome = replace(empty, value=simulate_outcome(empty, by_class, shared, classes, rng))
    units = compile_units(
        MODEL.table,
        Units(codes, group.astype(np.int32), np.ones(CASES, dtype=np.int64), np.arange(CASES)),
    )
    task = joint_task(
        MODEL.table,
        units,
        1,
        lambda own: DirichletStep(MODEL.prevalence_source.concentration, own),
        lambda own: OutcomeGibbs(
            outcome.data(),
            outcome.log_prior,
            *outcome.start(own.integers(2, size=CASES), own),
        ),
    )
    chain = JointChain(
        task, draw_parameters(MODEL.table, MODEL.prevalence_source, rng).elements, rng
    )
    chain.run(1, WARMUP)
    kept = chain.run(DRAWS, THIN)
    known = quantities(outcome, units, truth.elements, truth.prevalence, by_class, shared)
    rank = dict.fromkeys(known, 0)
    for s in range(DRAWS):
        drawn = quantities(
            outcome,
            units,
            kept.elements[s],
            kept.prevalence[s],
            kept.parameters[BY_CLASS][s],
            kept.parameters[SHARED][s],
        )
        for key, value in known.items():
            rank[key] += drawn[key] < value
    return rank


def p_values(name: str, replicates: int, seed: int) -> dict[str, float]:
    """Return the p-value of the uniformity of each quantity's ranks."""
    ranks = [one_replicate(name, s) for s in np.random.SeedSequence(seed).spawn(replicates)]
    return {key: p_value(np.array([one[key] for one in ranks]), DRAWS + 1) for key in ranks[0]}
