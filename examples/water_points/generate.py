"""Write committees.csv: an invented study of committees that look after rural water points.

Nothing here was observed. The file is made from the numbers below and a seed, so that the demo
has answers whose true classes are known. Only ``random.Random.random`` is used, whose sequence
Python keeps the same from version to version; running this again writes the same file.

    python examples/water_points/generate.py
"""

from __future__ import annotations

import csv
import math
import random
from pathlib import Path

SEED = 118
N_COMMITTEES = 118
SHARE_MISSING = 0.015

PRACTICES = ("fees", "accounts", "spare_parts", "mechanic", "fenced", "meets", "tests_water")
KINDS = ("managed", "informal", "lapsed")
SHARE = {"managed": 0.40, "informal": 0.34, "lapsed": 0.26}
YES = {
    "managed": (0.95, 0.90, 0.78, 0.90, 0.84, 0.96, 0.55),
    "informal": (0.72, 0.07, 0.14, 0.78, 0.38, 0.90, 0.04),
    "lapsed": (0.07, 0.03, 0.05, 0.10, 0.18, 0.08, 0.01),
}
"""The chance that a committee of each kind has each practice."""

DISTRICTS = ("hill", "lake", "plain")
MEAN_KM_TO_PARTS = {"managed": 14.0, "informal": 22.0, "lapsed": 38.0}
MEAN_DAYS_OUT = {"managed": 6.0, "informal": 17.0, "lapsed": 55.0}


def exponential(rng: random.Random, mean: float) -> float:
    """Draw a waiting time or a distance with the given mean."""
    return -mean * math.log(1.0 - rng.random())


def draw_kind(rng: random.Random) -> str:
    at = rng.random()
    for kind in KINDS[:-1]:
        at -= SHARE[kind]
        if at < 0:
            return kind
    return KINDS[-1]


def draw_practices(rng: random.Random, kind: str) -> list[str]:
    answers = ["yes" if rng.random() < chance else "no" for chance in YES[kind]]
    return ["" if rng.random() < SHARE_MISSING else answer for answer in answers]


def draw_committee(rng: random.Random, number: int) -> list[str]:
    kind = draw_kind(rng)
    practices = draw_practices(rng, kind)
    district = DISTRICTS[int(rng.random() * len(DISTRICTS))]
    age = 1 + int(exponential(rng, 9.0))
    distance = 1.0 + exponential(rng, MEAN_KM_TO_PARTS[kind] - 1.0)
    days_out = min(365, int(exponential(rng, MEAN_DAYS_OUT[kind])))
    return [
        f"WP{number:03d}",
        *practices,
        district,
        str(age),
        f"{distance:.1f}",
        str(days_out),
    ]


def main() -> None:
    """Write the file beside this script."""
    rng = random.Random(SEED)
    columns = ("committee", *PRACTICES, "district", "age_years", "km_to_parts", "days_out")
    path = Path(__file__).parent / "committees.csv"
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(columns)
        for number in range(1, N_COMMITTEES + 1):
            writer.writerow(draw_committee(rng, number))


if __name__ == "__main__":
    main()
