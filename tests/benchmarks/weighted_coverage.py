"""Bias and coverage of weighted figures, by simulation; resumable.

    python tests/benchmarks/weighted_coverage.py FILE.jsonl REPLICATES [SCENARIO ...]

Each line of the file is one replicate: a sample drawn from a large population with known shares
and response probabilities, fitted in several ways. What is there already is not done again; the
table at the end summarises the whole file. Results stand in docs/complex-samples.md.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path

import numpy as np
import pandas as pd

import bayeslca as lca
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.relate.weighted.design_variance import replicate_factors
from bayeslca.relate.weighted.pseudo_samples import rounded
from bayeslca.relate.weighted.sample_weighted import fit_counts
from bayeslca.relate.weighted.weighted_score import WeightedUnits

SEED = 20_261_201
ITEMS = ["fees", "accounts", "spare_parts", "mechanic", "fenced", "meets"]
SCENARIOS = {
    "weights, clear classes": {"n": 300, "high": 0.9, "kind": "weights"},
    "weights, middling classes": {"n": 300, "high": 0.8, "kind": "weights"},
    "weights, few cases": {"n": 118, "high": 0.8, "kind": "weights"},
    "clusters and strata": {"n": 400, "high": 0.85, "kind": "clusters"},
}
SHARE = 0.35
"""Share of the first class in the population."""


def sample(scenario: dict, rng: np.random.Generator) -> tuple[pd.DataFrame, dict, float]:
    """Draw a sample, with the columns that describe its design, and the population's share."""
    n, high = scenario["n"], scenario["high"]
    if scenario["kind"] == "weights":
        population = 20_000
        first = rng.random(population) < SHARE
        size = np.where(first, 3.0, 1.0) * rng.lognormal(0.0, 0.4, population)
        chosen = rng.choice(population, n, p=size / size.sum())
        frame, columns = pd.DataFrame({"w": 1.0 / size[chosen]}), {"weight": "w"}
        member, share = first[chosen], SHARE
    else:
        shares = np.array([0.6, 0.4, 0.25, 0.15])
        sizes, per = np.array([1.0, 2.0, 3.0, 4.0]) / 10.0, n // 40
        rows = []
        for stratum, centre in enumerate(shares):
            for cluster in range(10):
                p = rng.beta(centre * 4.0, (1.0 - centre) * 4.0)
                for _ in range(per):
                    rows.append((stratum, f"{stratum}-{cluster}", rng.random() < p))
        frame = pd.DataFrame(rows, columns=["s", "c", "member"])
        frame["w"] = sizes[frame["s"]]
        member, share = frame.pop("member").to_numpy(), float(sizes @ shares)
        columns = {"weight": "w", "cluster": "c", "stratum": "s"}
    p = np.where(member, high, 1.0 - high)[:, None]
    answers = rng.random((n, len(ITEMS))) < p
    frame[ITEMS] = np.where(answers, "yes", "no")
    return frame, columns, share


def replicate(name: str, number: int) -> dict:
    """Draw one sample and fit it in every way."""
    scenario = SCENARIOS[name]
    entropy = [SEED, sorted(SCENARIOS).index(name), number]
    rng = np.random.default_rng(np.random.SeedSequence(entropy))
    frame, columns, share = sample(scenario, rng)
    responses = lca.Responses.from_frame(frame, items=ITEMS, **columns)
    model = lca.LatentClassModel(
        responses.items,
        ["first", "second"],
        statements=["first is where P(fees=yes) is highest"],
    )
    unweighted = model.sample(responses, seed=number, progress=False, ess=300, chains=2)
    weighted = lca.sample_weighted(
        model, responses, seed=number, unweighted=unweighted, progress=False
    )
    units = WeightedUnits.of(model, responses)
    order, seeds = np.arange(units.counts.size), np.random.SeedSequence(entropy).spawn(2)
    alone = np.stack([rounded(units.counts, order, rng) for _ in range(100)])
    urn = np.stack([polya(units, rng) for _ in range(100)])
    fits = {
        "unweighted": (unweighted.draws.prevalence, unweighted.draws.elements),
        "weighted": (weighted.draws.prevalence, weighted.draws.elements),
    }
    for way, counts, seed in (("counts alone", alone, seeds[0]), ("urn", urn, seeds[1])):
        kept = fit_counts(unweighted, units, counts, 40, seed, None, False)
        fits[way] = (kept.prevalence, kept.elements)
    high = scenario["high"]
    at, truth = _yes_elements(model), np.repeat([high, 1.0 - high], len(ITEMS))
    out = {"scenario": name, "replicate": number}
    for way, (prevalence, elements) in fits.items():
        draws = prevalence.reshape(-1, 2)[:, 0]
        answers = elements.reshape(-1, model.table.n_elements)[:, at]
        out[way] = _judged(draws[:, None], np.array([share])) | {
            f"answers_{key}": value for key, value in _judged(answers, truth).items()
        }
    row = weighted.likelihood.prevalence.iloc[0]
    ends = row["estimate"] + np.array([-1.96, 1.96]) * row["standard_error"]
    out["likelihood"] = {
        "error": float(row["estimate"] - share),
        "covers": float(ends[0] <= share <= ends[1]),
        "width": float(ends[1] - ends[0]),
    }
    return out


def polya(units: WeightedUnits, rng: np.random.Generator) -> np.ndarray:
    """Draw clusters anew within strata, then cases at random by their weights: for comparison."""
    factor = replicate_factors(units.design, rng)[units.design.cluster]
    weight = units.row_weight * factor
    counts = np.bincount(units.unit_of_row, weight, minlength=units.counts.size)
    return rng.multinomial(units.unit_of_row.size, counts / counts.sum())


def _yes_elements(model: lca.LatentClassModel) -> np.ndarray:
    table = AllBlocks.of(model).model.table
    yes = [table.response_row[0, table.item_start[j] + 1] for j in range(table.n_items)]
    return table.direct_element[yes].T.ravel()


def _judged(draws: np.ndarray, truth: np.ndarray) -> dict[str, float]:
    lower, upper = np.quantile(draws, [0.025, 0.975], axis=0)
    return {
        "error": float((draws.mean(axis=0) - truth).mean()),
        "covers": float(((lower <= truth) & (truth <= upper)).mean()),
        "width": float((upper - lower).mean()),
    }


def table(lines: list[dict]) -> str:
    """Summarise all replicates of a file."""
    out = []
    for name in SCENARIOS:
        mine = [line for line in lines if line["scenario"] == name]
        if not mine:
            continue
        out.append(f"\n{name} ({len(mine)} samples)")
        for way in ("unweighted", "weighted", "counts alone", "urn", "likelihood"):
            found = pd.DataFrame([line[way] for line in mine])
            shown = [f"bias {found['error'].mean():+.3f}, sd {found['error'].std():.3f}"]
            shown.append(f"covers {found['covers'].mean():.1%}, width {found['width'].mean():.3f}")
            if "answers_covers" in found:
                shown.append(
                    f"answers: covers {found['answers_covers'].mean():.1%}, "
                    f"width {found['answers_width'].mean():.3f}"
                )
            out.append(f"  {way:<13} " + "; ".join(shown))
    return "\n".join(out)


def main() -> None:
    """Do what is missing, then print the table."""
    path, wanted = Path(sys.argv[1]), int(sys.argv[2])
    names = sys.argv[3:] or list(SCENARIOS)
    lines = [json.loads(line) for line in path.read_text().splitlines()] if path.exists() else []
    done = {(line["scenario"], line["replicate"]) for line in lines}
    with path.open("a") as file:
        for number in range(wanted):
            for name in names:
                if (name, number) not in done:
                    lines.append(replicate(name, number))
                    file.write(json.dumps(lines[-1]) + "\n")
                    file.flush()
    print(table(lines))


if __name__ == "__main__":
    main()
