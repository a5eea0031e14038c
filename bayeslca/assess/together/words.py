"""Who is together with whom, in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.comparison.words import listed_with_and

if TYPE_CHECKING:
    from bayeslca.assess.together.co_membership import CoMembership

SMALL = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")
MOST_SHOWN = 6


def together_in_words(found: CoMembership) -> str:
    """Return into which sets the cases fall, how surely, and how far that may be off."""
    sets = found.sets
    n = len(sets)
    basis = found.basis
    if n == 1:
        text = f"{basis}, no way to part the cases is nearer to what is probable than none at all."
        within = float(sets["within"].iloc[0])
        if np.isfinite(within):
            text += f" Two cases are in one class with probability {within:.2f} on average."
    else:
        number = SMALL[n] if n < len(SMALL) else str(n)
        shown = [
            f"{row['set']} with {row['cases']:,} {'case' if row['cases'] == 1 else 'cases'}"
            for row in sets.head(MOST_SHOWN).to_dict("records")
        ]
        if n > MOST_SHOWN:
            shown.append(f"{n - MOST_SHOWN} smaller ones")
        text = f"{basis}, the cases fall into {number} sets: {listed_with_and(shown)}."
        cases = sets["cases"].to_numpy(dtype=np.float64)
        pairs = cases * (cases - 1.0)
        known = pairs > 0
        inside = float(np.sum(pairs[known] * sets["within"].to_numpy()[known]) / pairs.sum())
        apart = cases * (cases.sum() - cases)
        outside = float(np.sum(apart * sets["between"].to_numpy()) / apart.sum())
        text += (
            f" Two cases of one set are in one class with probability {inside:.2f} on average, "
            f"two of different sets with {outside:.2f}."
        )
    partition = found.partition
    most = np.log2(max(found.units.n_cases, 2))
    return (
        f"{text} On average, probable ways to part the cases lie {partition.loss:.2f} bits from "
        f"this one, 95 % of them within {partition.radius:.2f} (variation of information, at most "
        f"{most:.1f} with so many cases; 0: settled)."
    )
