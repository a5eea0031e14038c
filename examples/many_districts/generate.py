"""Write committees.csv: an invented study of water-point committees in many small districts.

Nothing here was observed. The file is made from the numbers below and a seed, so that the true
kinds and the true shares of each district are known. Only ``random.Random.random`` is used, whose
sequence Python keeps the same from version to version; running this again writes the same file.

    python examples/many_districts/generate.py
"""

from __future__ import annotations

import csv
import random
from pathlib import Path

SEED = 24
PRACTICES = ("fees", "accounts", "mechanic", "fenced", "meets")
YES = {"managed": (0.92, 0.85, 0.88, 0.70, 0.95), "lapsed": (0.15, 0.06, 0.25, 0.25, 0.20)}
"""The chance that a committee of each kind has each practice."""
CASES_OF_KIND = 6
"""The share of managed committees in a district is Beta(6 x 0.5, 6 x 0.5): sd 0.19."""
DISTRICTS = (
    "Adina", "Beko", "Calla", "Dumo", "Esra", "Foyle", "Gant", "Hoda", "Ilmen", "Jara", "Koro",
    "Lunde", "Mirra", "Nasso", "Oriel", "Pemba", "Quell", "Rusk", "Sova", "Tarn", "Ulva", "Vero",
    "Wick", "Yana",
)  # fmt: skip
FEWEST, MOST = 1, 14


def draw_share(rng: random.Random) -> float:
    """Draw a Beta(3, 3): the middle of five uniform numbers."""
    numbers = sorted(rng.random() for _ in range(CASES_OF_KIND - 1))
    return numbers[CASES_OF_KIND // 2 - 1]


def main() -> None:
    """Write the file beside this script."""
    rng = random.Random(SEED)
    path = Path(__file__).parent / "committees.csv"
    number = 0
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(("committee", "district", *PRACTICES))
        for district in DISTRICTS:
            share = draw_share(rng)
            for _ in range(FEWEST + int(rng.random() * (MOST - FEWEST + 1))):
                number += 1
                kind = "managed" if rng.random() < share else "lapsed"
                answers = ["yes" if rng.random() < chance else "no" for chance in YES[kind]]
                writer.writerow((f"C{number:03d}", district, *answers))


if __name__ == "__main__":
    main()
