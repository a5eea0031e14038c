"""Write committees.csv: an invented sample of villages, drawn by zone, and their committees.

Run it with:  python examples/village_sample/generate.py
The population has three zones; the plain has most of the villages and few of the sampled ones.
"""

from pathlib import Path

import numpy as np
import pandas as pd

ITEMS = ["fees", "accounts", "spare_parts", "mechanic", "fenced", "meets", "tests_water"]
MANAGED = np.array([0.93, 0.90, 0.75, 0.85, 0.70, 0.95, 0.50])
LAPSED = np.array([0.25, 0.06, 0.05, 0.15, 0.25, 0.20, 0.03])
ZONES = {"hills": (90, 0.65), "river": (160, 0.45), "plain": (450, 0.20)}
"""Committees in the population, and the share of them that is managed."""
VILLAGES, COMMITTEES = 12, 5
"""Villages drawn in each zone, and committees visited in each village."""


def main() -> None:
    """Draw the sample and write it beside this file."""
    rng = np.random.default_rng(20)
    rows = []
    for zone, (size, share) in ZONES.items():
        for village in range(VILLAGES):
            managed = rng.beta(5.0 * share, 5.0 * (1.0 - share))
            reached = rng.uniform(0.8, 1.25)  # villages differ in how many committees they have
            weight = round(reached * size / (VILLAGES * COMMITTEES), 2)
            for _ in range(COMMITTEES):
                p = MANAGED if rng.random() < managed else LAPSED
                answers = np.where(rng.random(len(ITEMS)) < p, "yes", "no").tolist()
                if rng.random() < 0.05:
                    answers[rng.integers(len(ITEMS))] = ""
                case = f"V{len(rows) + 1:03d}"
                rows.append([case, zone, f"{zone} {village + 1}", weight, *answers])
    frame = pd.DataFrame(rows, columns=["committee", "zone", "village", "weight", *ITEMS])
    frame.to_csv(Path(__file__).with_name("committees.csv"), index=False)


if __name__ == "__main__":
    main()
