"""Stand-ins for what the rooms below hand over: made up, quick, and of any shape."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.comparison.comparison import Comparison
from bayeslca.assess.comparison.words import verdict_in_words
from bayeslca.findings import Finding
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.report.content import ReportContent
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled
from bayeslca.sampling.starting_points import StartingPoints

CHAINS, DRAWS = 4, 100


def told_of_sampling(posterior: Posterior, **told: Any) -> Posterior:
    """Give a posterior a made-up verdict in place of the one that its draws would get."""
    rows = [
        {"quantity": "prevalence", "latent_class": name, "note": "", "mcse": 0.001,
         "ess_bulk": 1200.0, "ess_tail": 1100.0, "r_hat": 1.001}
        for name in posterior.model.class_names
    ]  # fmt: skip
    verdict = "The chains agree (largest R-hat 1.003, smallest effective sample size 1,100)."
    given = {"findings": (), "verdict": verdict, "trustworthy": True, "table": pd.DataFrame(rows)}
    posterior.__dict__["_diagnostics"] = SimpleNamespace(**{**given, **told})
    return posterior


def make_items(n_items: int, **special: Item) -> tuple[Item, ...]:
    items = [
        Item(f"item_{j + 1}", ("no", "yes"), label=f"Does thing number {j + 1}", yes="yes")
        for j in range(n_items)
    ]
    return (*items, *special.values())


def one_mode() -> StartingPoints:
    every = np.zeros(16, dtype=int)
    return StartingPoints(np.full(16, -420.0), every, 1, np.arange(4), (), -420.0)


def make_posterior(
    items: tuple[Item, ...],
    classes: int | tuple[str, ...],
    *,
    n_cases: int = 118,
    groups: Groups | None = None,
    statements: tuple[str, ...] = (),
    seed: int = 1,
    **more: Any,
) -> Posterior:
    """Make a posterior around made-up parameters, with answers simulated from them."""
    rng = np.random.default_rng(seed)
    model = LatentClassModel(items, classes, statements=statements, groups=groups)
    k, n_groups = model.n_classes, model.n_groups
    prevalence = rng.dirichlet(np.full(k, 6.0), size=n_groups)
    blocks = [rng.dirichlet(np.full(i.n_categories, 0.6)) for i in items for _ in range(k)]
    group = rng.integers(n_groups, size=n_cases)
    z = np.array([rng.choice(k, p=prevalence[g]) for g in group])
    codes = np.stack(
        [[rng.choice(i.n_categories, p=blocks[j * k + c]) for c in z] for j, i in enumerate(items)],
        axis=1,
    ).astype(np.int16)
    codes[rng.random(codes.shape) < 0.01] = -1
    size = (CHAINS, DRAWS)
    draws = Draws(
        elements=np.concatenate([rng.dirichlet(40 * b + 0.5, size=size) for b in blocks], axis=2),
        prevalence=np.stack([rng.dirichlet(90 * p, size=size) for p in prevalence], axis=2),
        log_likelihood=-400 + rng.normal(size=size),
        log_prior=np.zeros(size),
        seed=7,
        sweeps=1500,
        warmup=500,
        seconds=0.8,
        starts=one_mode(),
    )  # fmt: skip
    ids = tuple(f"WP{n + 1:03d}" for n in range(n_cases))
    responses = Responses(
        items=items,
        codes=codes,
        counts=np.ones(n_cases, dtype=np.int64),
        case_ids=ids,
        case_name="committee",
        groups=groups,
        group_codes=group.astype(np.int32),
        source="committees.csv",
    )
    same = np.broadcast_to(np.arange(k), (*size, n_groups, k))
    return told_of_sampling(Posterior(model, responses, Relabelled(draws, same)), **more)


def make_comparison(
    counts: range = range(1, 7), best: int = 2, findings: tuple[Finding, ...] = ()
) -> Comparison:
    """Make a comparison in which models predict worse the further they are from the best."""
    rows = []
    for n in counts:
        behind = -1.7 * abs(n - best) ** 1.5
        rows.append(
            {"elpd": -430 + behind, "elpd_se": 12.0, "elpd_mcse": 0.1, "p_loo": 3.0 * n,
             "elpd_diff": behind, "elpd_diff_se": 0.0 if n == best else 2.5, "tied": behind > -4,
             "weight": 1.0 if n == best else 0.0, "pareto_k_high": 0, "waic": -431 + behind,
             "waic_se": 12.0, "p_waic": 3.0 * n, "smallest_class": 1 / n / 1.3,
             "smallest_lower": 0.5 / n, "smallest_upper": 0.9 / n, "smallest_cases": 90 / n,
             "separation": np.nan if n == 1 else 0.85, "trustworthy": True}
        )  # fmt: skip
    table = pd.DataFrame(rows, index=pd.Index(list(counts), name="classes"))
    verdict = verdict_in_words(table, best)
    return Comparison(table, {}, {}, {}, verdict, findings, best)


@pytest.fixture(scope="session")
def small() -> Posterior:
    """Seven yes/no items, three named classes."""
    rules = (
        "managed is where P(item_1=yes) is highest",
        "lapsed is where P(item_2=yes) is lowest",
    )
    return make_posterior(make_items(7), ("managed", "informal", "lapsed"), statements=rules)


@pytest.fixture(scope="session")
def mixed() -> Posterior:
    """Yes/no, ordered and unordered items, groups, and a label that is mark-up."""
    scale = ("strongly disagree", "disagree", "neither", "agree", "strongly agree")
    items = (
        Item("<script>alert(1)</script>", ("no", "yes"), yes="yes"),
        Item("cost", ("no", "yes"), label="Costs $5 or $10 & more", yes="yes"),
        Item("trust", scale, label="Trusts the committee", ordered=True),
        Item("type", ("hand pump", "well", "spring", "tap"), label="Type of point"),
    )
    return make_posterior(
        items, 2, n_cases=240, groups=Groups("district", ("north", "south")), seed=3
    )


@pytest.fixture(scope="session")
def content(small: Posterior) -> ReportContent:
    return make_content(small)


def make_content(posterior: Posterior, **more: Any) -> ReportContent:
    given: dict[str, Any] = {
        "responses": posterior.responses,
        "posterior": posterior,
        "title": "Water-point committees",
        "question": "What kinds of committees look after the water points?",
        "chosen_because": "three kinds were expected from the programme's design",
        "comparison": make_comparison(),
        "study_row": posterior.model.n_classes,
        "seed": 2026,
        "command": "bayeslca run study.toml -o results",
        "study_text": '[study]\ntitle = "Water-point committees"\n',
    }
    return ReportContent(**{**given, **more})


@pytest.fixture(scope="session")
def made() -> SimpleNamespace:
    """Return the makers above: test modules cannot import this file."""
    return SimpleNamespace(
        items=make_items,
        posterior=make_posterior,
        comparison=make_comparison,
        content=make_content,
    )
