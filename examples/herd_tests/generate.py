"""Make the invented data of this example: two tests in three herds, counts of each result.

Nothing here was measured. Run it again and herds.csv comes out the same, byte for byte.
"""

from __future__ import annotations

import csv
from itertools import product
from pathlib import Path

import numpy as np

SEED = 20261201
HERDS = {"valley": (140, 0.05), "ridge": (90, 0.18), "coast": (70, 0.40)}
"""Animals tested, and the share of them that is infected."""
SENSITIVITY = {"blood": 0.88, "milk": 0.65}
SPECIFICITY = {"blood": 0.95, "milk": 0.98}


def main() -> None:
    """Write herds.csv beside this file."""
    rng = np.random.default_rng(SEED)
    rows = []
    for herd, (n_animals, prevalence) in HERDS.items():
        infected = rng.random(n_animals) < prevalence
        positive = {
            test: rng.random(n_animals)
            < np.where(infected, SENSITIVITY[test], 1 - SPECIFICITY[test])
            for test in SENSITIVITY
        }
        for blood, milk in product((True, False), repeat=2):
            count = int(np.sum((positive["blood"] == blood) & (positive["milk"] == milk)))
            words = ["positive" if result else "negative" for result in (blood, milk)]
            rows.append([herd, *words, count])
    with (Path(__file__).parent / "herds.csv").open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(["herd", "blood", "milk", "animals"])
        writer.writerows(rows)


if __name__ == "__main__":
    main()
