"""How the slope of class on a covariate is found, by every way: bias and coverage in simulations.

Two classes, log odds 1 per standard deviation of a covariate, six yes/no items; 50, 118 and 500
cases; response probabilities 0.7/0.3 (low separation), 0.8/0.2 and 0.9/0.1. For each study the
slope by the true classes (what chance did to the data), by the modal class, by classes imputed
from the answers alone, and by every way of `class_predictors`. Results are added to a file, so
that it can be stopped and run on:

    python tests/benchmarks/predictors_simulated.py results.csv --studies 100 --seconds 240
    python tests/benchmarks/predictors_simulated.py results.csv --show
"""

from __future__ import annotations

import argparse
import time
from pathlib import Path

import numpy as np
import pandas as pd

import bayeslca as lca
from bayeslca.exceptions import ModelError
from bayeslca.relate.error_matrix import error_matrix
from bayeslca.relate.predictors.three_steps import three_step_regression

CLASSES, SLOPE = ("high", "low"), 1.0
CASES = (50, 118, 500)
SEPARATION = {"low": (0.7, 0.3), "middling": (0.8, 0.2), "high": (0.9, 0.1)}
CONTRAST = np.array([0.0, 1.0, 0.0, -1.0])


def of_known(design: np.ndarray, classes: np.ndarray) -> tuple[float, float, float]:
    """Slope and interval when classes are taken as known."""
    try:
        errors = error_matrix(np.eye(2)[classes])
        found = three_step_regression(design, errors, np.ones(len(design)))
    except ModelError:
        return np.nan, np.nan, np.nan
    slope = float(CONTRAST @ found.coefficients.ravel())
    reach = 1.96 * float(np.sqrt(CONTRAST @ found.covariance @ CONTRAST))
    return slope, slope - reach, slope + reach


def one_study(n: int, separation: str, number: int) -> list[dict[str, object]]:
    """Simulate a study, fit it, and relate class to the covariate by every way."""
    rng = np.random.default_rng([n, list(SEPARATION).index(separation), number])
    x = rng.normal(size=n)
    x = (x - x.mean()) / x.std()
    is_low = rng.random(n) > 1 / (1 + np.exp(-SLOPE * x))
    chance = np.where(is_low, SEPARATION[separation][1], SEPARATION[separation][0])
    yes = rng.random((n, 6)) < chance[:, None]
    frame = pd.DataFrame(np.where(yes, "yes", "no"), columns=[f"i{j}" for j in range(6)])
    responses = lca.Responses.from_frame(
        frame,
        items=[lca.ItemSpec(i, categories=("no", "yes"), yes="yes") for i in frame.columns],
    )
    model = lca.LatentClassModel(
        responses.items,
        list(CLASSES),
        statements=[f"P(i{j}=yes | high) > P(i{j}=yes | low)" for j in range(6)],
    )
    posterior = model.sample(
        responses, seed=number, progress=False, draws=250, ess=200, r_hat=1.05, max_sweeps=8000,
        threads=1,
    )  # fmt: skip
    membership = posterior.membership()
    share = membership["probability_high"].to_numpy()
    design = np.column_stack([np.ones(n), x])
    rows = {
        "classes known": of_known(design, is_low.astype(int)),
        "modal class": of_known(design, (share < 0.5).astype(int)),
        "imputed without x": of_known(design, (rng.random(n) > share).astype(int)),
    }
    frame["x"] = x
    for correction in ("fixed_error_likelihood", "inverse_error_matrix"):
        ways = ("joint", "cut", "three_steps") if correction[0] == "f" else ("three_steps",)
        try:
            found = lca.class_predictors(
                posterior, frame, "x", ways=ways, correction=correction, seed=number, draws=200,
                ess=150, threads=1,
            )  # fmt: skip
        except ModelError:
            rows[correction] = (np.nan, np.nan, np.nan)
            continue
        table = found.odds_ratios(against="low").query("covariate == 'x'").set_index("way")
        for way in ways:
            name = correction if way == "three_steps" else way
            if way in table.index:
                rows[name] = tuple(table.loc[way, ["median", "lower", "upper"]])
            else:
                rows[name] = (np.nan, np.nan, np.nan)
    return [
        {"cases": n, "separation": separation, "study": number, "way": way, "slope": slope,
         "lower": lower, "upper": upper}
        for way, (slope, lower, upper) in rows.items()
    ]  # fmt: skip


def show(path: Path) -> pd.DataFrame:
    """Return the median slope, the share of intervals that hold the truth, and failures."""
    table = pd.read_csv(path)
    covers = (table["lower"] <= SLOPE) & (table["upper"] >= SLOPE)
    table["covers"] = covers.astype(float).where(table["slope"].notna())
    grouped = table.groupby(["cases", "separation", "way"], sort=False)
    return grouped.agg(
        studies=("slope", "size"),
        median=("slope", "median"),
        covers=("covers", "mean"),
        failed=("slope", lambda slope: int(slope.isna().sum())),
    ).round(2)


def main() -> None:
    """Run studies until the time is up, or show what there is."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("path", type=Path)
    parser.add_argument("--studies", type=int, default=100)
    parser.add_argument("--seconds", type=float, default=240.0)
    parser.add_argument("--show", action="store_true")
    said = parser.parse_args()
    if said.show:
        print(show(said.path).to_string())
        return
    done = set()
    if said.path.exists():
        before = pd.read_csv(said.path)
        done = set(zip(before["cases"], before["separation"], before["study"], strict=True))
    end = time.monotonic() + said.seconds
    for number in range(said.studies):
        for n in CASES:
            for separation in SEPARATION:
                if time.monotonic() > end:
                    return
                if (n, separation, number) in done:
                    continue
                rows = pd.DataFrame(one_study(n, separation, number))
                rows.to_csv(said.path, mode="a", index=False, header=not said.path.exists())


if __name__ == "__main__":
    main()
