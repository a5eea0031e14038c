"""How often each criterion finds the true number of classes, by simulation.

Three classes of seven yes/no items (all mostly yes, all mostly no, and the first four mostly yes),
50, 118 or 300 cases, and three separations: an answer is the usual one of its class with
probability 0.9, 0.8 or 0.7. Each table is fitted with one to five classes.

    python class_count_recovery.py results.jsonl --tables 100     # goes on where it stopped
    python class_count_recovery.py results.jsonl --show           # the table of docs/benchmarks.md

Each table's line is written as soon as it is done; Ctrl-C loses the tables in work only. A table
depends on its cell and number alone, not on the order or the number of processes.
"""

import argparse
import json
import os
from concurrent.futures import ProcessPoolExecutor, as_completed
from math import sqrt
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

CASES = (50, 118, 300)
USUAL = {"high": 0.9, "middling": 0.8, "low": 0.7}
PREVALENCE = (0.45, 0.35, 0.20)
MOSTLY_YES = ((1,) * 7, (0,) * 7, (1, 1, 1, 1, 0, 0, 0))
COUNTS = (1, 2, 3, 4, 5)
TRUE = 3
CRITERIA = {
    "waic": "WAIC, highest",
    "loo": "leave-one-out, highest",
    "loo_smallest_tied": "leave-one-out, smallest in the tie",
    "evidence": "evidence, most probable",
    "bic": "BIC, smallest",
}


def one_table(separation, cases, number):
    """Simulate and fit one table; return what each criterion picks."""
    import numpy as np

    import bayeslca as lca

    cell = [list(USUAL).index(separation), CASES.index(cases), number]
    rng = np.random.default_rng([20261201, *cell])
    usual = USUAL[separation]
    yes = np.where(np.array(MOSTLY_YES) == 1, usual, 1 - usual)
    latent_class = rng.choice(3, size=cases, p=PREVALENCE)
    answers = (rng.random((cases, 7)) < yes[latent_class]).astype(int)
    names = [f"item_{j + 1}" for j in range(7)]
    import pandas as pd

    frame = pd.DataFrame(np.where(answers == 1, "yes", "no"), columns=names)
    responses = lca.Responses.from_frame(
        frame, items=[lca.Item(name, ("no", "yes"), yes="yes") for name in names]
    )
    comparison = lca.compare_class_counts(
        responses, COUNTS, seed=number, progress=False, draws=500, ess=400, threads=1
    )
    table = comparison.table
    bic = {
        k: lca.LatentClassModel(responses.items, k)
        .maximum_likelihood(responses, starting_points=20, seed=number)
        .bic
        for k in COUNTS
    }
    chance = table["probability"].fillna(-1.0)
    return {
        "separation": separation,
        "cases": cases,
        "number": number,
        "waic": int(table["waic"].idxmax()),
        "loo": int(table["elpd"].idxmax()),
        "loo_smallest_tied": int(min(table.index[table["tied"]])),
        "evidence": int(chance.idxmax()) if chance.max() >= 0 else None,
        "bic": min(bic, key=bic.get),
        "chance_of_true": float(table.loc[TRUE, "probability"]),
        "tie_holds_true": bool(table.loc[TRUE, "tied"]),
    }


def done_tables(path):
    """Return the results that stand in the file."""
    if not path.exists():
        return []
    return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines() if line]


def run(path, tables, processes):
    """Fit the tables that the file does not hold yet."""
    have = {(r["separation"], r["cases"], r["number"]) for r in done_tables(path)}
    wanted = [(s, n, i) for i in range(tables) for n in CASES for s in USUAL]
    left = [cell for cell in wanted if cell not in have]
    print(f"{len(wanted) - len(left)} of {len(wanted)} tables are there, {len(left)} to do")
    with ProcessPoolExecutor(processes) as pool, path.open("a", encoding="utf-8") as file:
        jobs = [pool.submit(one_table, *cell) for cell in left]
        try:
            for count, job in enumerate(as_completed(jobs), start=1):
                file.write(json.dumps(job.result()) + "\n")
                file.flush()
                print(f"\r{count} of {len(left)}", end="", flush=True)
        except KeyboardInterrupt:
            pool.shutdown(cancel_futures=True)
            print("\nstopped; start again to go on")
            return
    print()


def show(path):
    """Print how often each criterion finds the true number, as a table in Markdown."""
    results = done_tables(path)
    print("| separation | cases | tables |", " | ".join(CRITERIA.values()), "| P(3) on average |")
    print("| --- " * (4 + len(CRITERIA)) + "|")
    for separation in USUAL:
        for cases in CASES:
            own = [r for r in results if (r["separation"], r["cases"]) == (separation, cases)]
            if not own:
                continue
            cells = [_share([r[key] for r in own]) for key in CRITERIA]
            weighed = [r["chance_of_true"] for r in own if r["chance_of_true"] >= 0]
            mean = f"{100 * sum(weighed) / len(weighed):.0f} %" if weighed else "–"
            print(f"| {separation} | {cases} | {len(own)} |", " | ".join(cells), f"| {mean} |")
    by_size = {key: [r[key] for r in results] for key in CRITERIA}
    for key, picks in by_size.items():
        few = sum(p is not None and p < TRUE for p in picks)
        many = sum(p is not None and p > TRUE for p in picks)
        print(f"{CRITERIA[key]}: too few {few}, too many {many} of {len(picks)}")


def _share(picks):
    share = sum(pick == TRUE for pick in picks) / len(picks)
    return f"{100 * share:.0f} ± {100 * sqrt(share * (1 - share) / len(picks)):.0f} %"


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("results", type=Path)
    parser.add_argument("--tables", type=int, default=100, help="tables of each cell")
    parser.add_argument("--processes", type=int, default=os.cpu_count())
    parser.add_argument("--show", action="store_true")
    asked = parser.parse_args()
    if asked.show:
        show(asked.results)
    else:
        run(asked.results, asked.tables, asked.processes)
