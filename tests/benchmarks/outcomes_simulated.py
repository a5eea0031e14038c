"""How outcomes by class are found, by every way: bias and coverage in simulated studies.

Two classes (0.6 and 0.4), six binary items, a numeric outcome one standard deviation apart; 50, 118
and 500 cases; response probabilities 0.7/0.3 (low separation), 0.8/0.2 and 0.9/0.1. For each study
the gap between the class means, by: the modal class, classes imputed from the answers alone, and
every way of `class_outcomes`. Results are added to a file, so that it can be stopped and run on:

    python tests/benchmarks/outcomes_simulated.py results.csv --studies 100 --seconds 240
    python tests/benchmarks/outcomes_simulated.py results.csv --show
"""

from __future__ import annotations

import argparse
import time
from pathlib import Path

import numpy as np
import pandas as pd

import bayeslca as lca
from bayeslca.model.probabilities import membership
from bayeslca.model.simulate import parameters_from

CLASSES, GAP = ("high", "low"), 1.0
CASES = (50, 118, 500)
SEPARATION = {"low": (0.7, 0.3), "middling": (0.8, 0.2), "high": (0.9, 0.1)}


def naive(y: np.ndarray, classes: np.ndarray) -> tuple[float, float]:
    """Gap and its standard error when classes are taken as known."""
    groups = [y[classes == k] for k in range(2)]
    if min(map(len, groups)) < 2:
        return np.nan, np.nan
    gap = groups[1].mean() - groups[0].mean()
    return float(gap), float(np.sqrt(sum(g.var(ddof=1) / g.size for g in groups)))


def one_study(n: int, separation: str, number: int) -> list[dict[str, object]]:
    """Simulate a study, fit it, and relate the outcome to class by every way."""
    rng = np.random.default_rng([n, list(SEPARATION).index(separation), number])
    yes = SEPARATION[separation]
    model = lca.LatentClassModel(
        [lca.Item(f"i{j}", ("no", "yes"), yes="yes") for j in range(6)],
        list(CLASSES),
        statements=[f"P(i{j}=yes | high) > P(i{j}=yes | low)" for j in range(6)],
    )
    truth = parameters_from(
        model, (0.6, 0.4), {item.name: dict(zip(CLASSES, yes, strict=True)) for item in model.items}
    )
    drawn = model.simulate(n, seed=int(rng.integers(2**31)), parameters=truth)
    y = rng.normal(GAP * drawn.latent_class, 1.0)
    posterior = model.sample(
        drawn.responses, seed=number, progress=False, draws=250, ess=200, r_hat=1.05,
        max_sweeps=8000, threads=1,
    )  # fmt: skip
    found = lca.class_outcomes(
        posterior, pd.DataFrame({"y": y}), "y", kind="numeric", spread="equal", seed=number,
        draws=200, ess=150, held=400, max_sweeps=2500, threads=1,
    )  # fmt: skip
    rows = []
    for row in found.differences().to_dict("records"):
        inside = row["lower"] <= -GAP <= row["upper"]
        if np.isfinite(row["mean"]):
            rows.append({"way": row["way"], "gap": -row["mean"], "covered": inside})
    flat = posterior.draws.elements.reshape(-1, posterior.table.n_elements)[::50]
    shares = posterior.draws.prevalence.reshape(-1, 1, 2)[::50]
    share = membership(posterior.table, posterior.unit_table, flat, shares)
    share = share[:, posterior.units.unit_of_row]
    gap, error = naive(y, share.mean(axis=0).argmax(axis=1))
    rows.append({"way": "modal class", "gap": gap, "covered": abs(gap - GAP) < 1.96 * error})
    imputed = np.array([naive(y, (rng.random(n) < s[:, 1]).astype(int)) for s in share])
    gap = np.nanmean(imputed[:, 0])
    total = np.sqrt(np.nanmean(imputed[:, 1] ** 2) + np.nanvar(imputed[:, 0]))
    rows.append({"way": "imputed without y", "gap": gap, "covered": abs(gap - GAP) < 1.96 * total})
    return [{"cases": n, "separation": separation, "study": number, **row} for row in rows]


def show(results: pd.DataFrame) -> pd.DataFrame:
    """Bias in standard deviations of the outcome, and coverage of nominal 95 % intervals."""
    grouped = results.groupby(["separation", "cases", "way"], sort=False)
    table = grouped.agg(studies=("gap", "size"), bias=("gap", lambda gap: gap.mean() - GAP),
                        spread=("gap", "std"), coverage=("covered", "mean"))  # fmt: skip
    return table.round(2)


def main() -> None:
    """Run studies until the time is up."""
    parser = argparse.ArgumentParser()
    parser.add_argument("file", type=Path)
    parser.add_argument("--studies", type=int, default=100)
    parser.add_argument("--seconds", type=float, default=240.0)
    parser.add_argument("--show", action="store_true")
    said = parser.parse_args()
    known = pd.read_csv(said.file) if said.file.exists() else pd.DataFrame()
    if said.show:
        print(show(known).to_string())
        return
    have = set(zip(*(known.get(c, []) for c in ("cases", "separation", "study")), strict=True))
    begin = time.process_time()
    for number in range(said.studies):
        for n in CASES:
            for separation in SEPARATION:
                if time.process_time() - begin > said.seconds:
                    return
                if (n, separation, number) not in have:
                    rows = pd.DataFrame(one_study(n, separation, number))
                    rows.to_csv(said.file, mode="a", header=not said.file.exists(), index=False)


if __name__ == "__main__":
    main()
