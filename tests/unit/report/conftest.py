"""Stand-ins for what the rooms below hand over: made up, quick, and of any shape."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from types import SimpleNamespace
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bayeslca.findings import Finding
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import membership, response_probability
from bayeslca.report.content import ReportContent
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.starting_points import StartingPoints

CHAINS, DRAWS = 4, 100


def summary(draws: np.ndarray, interval: float) -> dict[str, Any]:
    """Statistics over (chain, draw) for draws of shape (chain, draw, ...)."""
    flat = draws.reshape(-1, *draws.shape[2:])
    tail = (1 - interval) / 2
    lower, median, upper = np.quantile(flat, [tail, 0.5, 1 - tail], axis=0)
    sd = flat.std(axis=0, ddof=1)
    ones = np.ones_like(median)
    return {
        "median": median, "mean": flat.mean(axis=0), "sd": sd, "lower": lower, "upper": upper,
        "mcse": sd / 30, "ess_bulk": 1200 * ones, "ess_tail": 1100 * ones, "r_hat": 1.001 * ones,
    }  # fmt: skip


@dataclass
class StandInPosterior:
    model: LatentClassModel
    responses: Responses
    draws: Draws
    trustworthy: bool = True
    verdict: str = "The chains agree (largest R-hat 1.003, smallest effective sample size 1,100)."
    findings: tuple[Finding, ...] = field(default=())

    @cached_property
    def table(self) -> Any:
        return self.model.table

    @cached_property
    def unit_table(self) -> Any:
        return compile_units(self.table, self.responses.units)

    @property
    def prevalence_draws(self) -> np.ndarray:
        return self.draws.prevalence

    @cached_property
    def response_probability_draws(self) -> np.ndarray:
        return response_probability(self.table, self.draws.elements)

    @cached_property
    def membership_draws(self) -> np.ndarray:
        return membership(self.table, self.unit_table, self.draws.elements, self.draws.prevalence)

    def prevalence(self, interval: float = 0.95) -> pd.DataFrame:
        names, groups = self.model.class_names, self.model.groups
        levels = groups.levels if groups else ("",)
        keys = pd.DataFrame(
            [{"group": level, "latent_class": name} for level in levels for name in names]
        )
        table = summary(self.prevalence_draws, interval)
        frame = keys.assign(**{name: values.ravel() for name, values in table.items()})
        return frame if groups else frame.drop(columns="group")

    def response_probabilities(self, interval: float = 0.95) -> pd.DataFrame:
        keys = [
            {"latent_class": name, "item": item.name, "category": category}
            for name in self.model.class_names
            for item in self.model.items
            for category in item.categories
        ]
        table = summary(self.response_probability_draws[:, :, 0], interval)
        return pd.DataFrame(keys).assign(**{k: values.ravel() for k, values in table.items()})

    def assignment_error(self, interval: float = 0.95) -> pd.DataFrame:
        names = self.model.class_names
        keys = [{"latent_class": a, "assigned_class": b} for a in names for b in names]
        modal = self.membership_draws.mean(axis=(0, 1)).argmax(axis=1)
        weight = self.membership_draws * self.responses.units.count[:, None]
        shares = np.stack([weight[:, :, modal == k].sum(axis=2) for k in range(len(names))], axis=3)
        shares = shares / shares.sum(axis=3, keepdims=True)
        table = summary(shares, interval)
        return pd.DataFrame(keys).assign(**{k: values.ravel() for k, values in table.items()})

    def separation(self, interval: float = 0.95) -> pd.DataFrame:
        values = np.random.default_rng(1).uniform(0.8, 0.9, (CHAINS, DRAWS))
        table = summary(values, interval)
        return pd.DataFrame([{"quantity": "separation", **table}])

    def membership(
        self, responses: Any = None, interval: float = 0.95, rows: str = "cases"
    ) -> pd.DataFrame:
        means = self.membership_draws.mean(axis=(0, 1))
        frame = pd.DataFrame(means, columns=list(self.model.class_names))
        if rows == "patterns":
            return frame
        frame = frame.iloc[self.responses.units.unit_of_row].reset_index(drop=True)
        frame.insert(0, "case", self.responses.case_ids)
        return frame

    def diagnostics(self) -> Any:
        rows = [
            {"quantity": f"prevalence of {name}", "mcse": 0.001, "ess_bulk": 1200.0,
             "ess_tail": 1100.0, "r_hat": 1.001}
            for name in self.model.class_names
        ]  # fmt: skip
        return SimpleNamespace(
            findings=self.findings,
            table=pd.DataFrame(rows),
            verdict=self.verdict,
            trustworthy=self.trustworthy,
        )


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
) -> StandInPosterior:
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
    return StandInPosterior(model, responses, draws, **more)


def make_comparison(counts: range = range(1, 7), best: int = 2) -> Any:
    rows = []
    for n in counts:
        behind = -1.7 * abs(n - best) ** 1.5
        rows.append(
            {"elpd": -430 + behind, "elpd_se": 12.0, "elpd_diff": behind,
             "elpd_diff_se": 0.0 if n == best else 2.5, "waic": -431 + behind, "p_loo": 3.0 * n,
             "pareto_k_high": 0, "weight": 1.0 if n == best else 0.0, "smallest_class": 1 / n / 1.3,
             "separation": np.nan if n == 1 else 0.85, "trustworthy": True,
             "tied": behind > -4}
        )  # fmt: skip
    frame = pd.DataFrame(rows, index=pd.Index(list(counts), name="classes"))
    verdict = "1 to 3 classes predict equally well within their errors: a tie."
    return SimpleNamespace(table=frame, verdict=verdict, posteriors={})


@pytest.fixture(scope="session")
def small() -> StandInPosterior:
    """Seven yes/no items, three named classes."""
    rules = (
        "managed is where P(item_1=yes) is highest",
        "lapsed is where P(item_2=yes) is lowest",
    )
    return make_posterior(make_items(7), ("managed", "informal", "lapsed"), statements=rules)


@pytest.fixture(scope="session")
def mixed() -> StandInPosterior:
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
def content(small: StandInPosterior) -> ReportContent:
    return make_content(small)


def make_content(posterior: StandInPosterior, **more: Any) -> ReportContent:
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
