"""What log evidences say about the number of classes, in words."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca.assess.comparison.words import listed_with_and, row_in_words
from bayeslca.assess.hypothesis.grades import GRADES

if TYPE_CHECKING:
    import pandas as pd

MOST_OF_IT = 0.95
"""The counts named together hold at least this probability."""
FEWEST_TO_WARN = 3
"""With fewer classes compared, the largest number is no surprise."""


def strength(log_bayes_factor: float) -> str:
    """Return how strong evidence is, by the words of Kass & Raftery (1995)."""
    return next(words for end, words in GRADES if abs(log_bayes_factor) <= end)


def evidence_in_words(table: pd.DataFrame, *, is_uniform: bool, stated: bool) -> str:
    """Return what the answers support, how strongly, and which priors that depends on.

    Parameters
    ----------
    table : DataFrame
        See `bayeslca.assess.class_count.class_counts.ClassCounts`.
    is_uniform : bool
        Whether all numbers of classes were equally probable before.
    stated : bool
        Whether priors of probabilities were stated; else they are uniform.
    """
    rows = {int(k): row for k, row in zip(table.index, table.to_dict("records"), strict=True)}
    unsure = [k for k, row in rows.items() if not row["reliable"]]
    good = {k: row for k, row in rows.items() if row["reliable"] and row["probability"] >= 0}
    parts = []
    if len(good) > 1:
        parts += [_probabilities(good, is_uniform=is_uniform), *_at_the_end(good), *_strength(good)]
        parts.append(_depends(is_uniform=is_uniform, stated=stated))
    else:
        parts.append("The evidence says nothing about the number of classes here.")
    if unsure:
        left_out = listed_with_and([row_in_words(k) for k in unsure])
        whose = "that number" if len(unsure) == 1 else "those numbers"
        reasons = "; ".join(dict.fromkeys(str(rows[k]["reason"]) for k in unsure))
        parts.append(
            f"The evidence of {left_out} is not reliable ({reasons}), so nothing is said of "
            f"{whose}."
        )
    return " ".join(parts)


def _probabilities(good: dict[int, dict[Any, Any]], *, is_uniform: bool) -> str:
    ranked = sorted(good, key=lambda k: -good[k]["probability"])
    named, total = [], 0.0
    for k in ranked:
        named.append(k)
        total += good[k]["probability"]
        if total >= MOST_OF_IT:
            break
    first, *others = named
    before = _counted(sorted(good))
    equally = "equally probable" if is_uniform else "as probable as stated"
    text = f"If {before} were {equally} before the answers, {row_in_words(first)}"
    text += f" {_have(first)} probability {_probability(good[first])} after them"
    if others:
        text += ", " + listed_with_and(
            [f"{row_in_words(k)} {_probability(good[k])}" for k in others]
        )
        return text + f": the answers do not settle the number beyond these {_number(named)}."
    return text + "."


def _at_the_end(good: dict[int, dict[Any, Any]]) -> list[str]:
    """Warn that the largest number need not mean so many kinds (docs/number-of-classes.md)."""
    likeliest = max(good, key=lambda k: good[k]["probability"])
    if likeliest < max(good) or likeliest < FEWEST_TO_WARN:
        return []
    return [
        "That is the largest number that was compared: a class that the answers hardly touch costs "
        "little, so it is no sign of so many kinds."
    ]


def _counted(counts: list[int]) -> str:
    """Return the numbers of classes in words; a gap among them is not passed over."""
    words = [row_in_words(k).split()[0] for k in counts]
    if len(counts) > 2 and counts[-1] - counts[0] == len(counts) - 1:
        return f"{words[0]} to {words[-1]} classes"
    return f"{listed_with_and(words)} classes"


def _strength(good: dict[int, dict[Any, Any]]) -> list[str]:
    """Say how strong the evidence for the likeliest count over its neighbours is."""
    best = max(good, key=lambda k: good[k]["log_evidence"])
    parts = []
    for other in (best - 1, best + 1):
        if other in good:
            gap = good[best]["log_evidence"] - good[other]["log_evidence"]
            parts.append(f"over {row_in_words(other)} is {strength(gap)} ({_factor(gap)})")
    if not parts:
        return []
    joined = " and that ".join(parts)
    return [f"By the grades of Kass & Raftery 1995 the evidence for {row_in_words(best)} {joined}."]


def _depends(*, is_uniform: bool, stated: bool) -> str:
    which = "the priors stated for probabilities" if stated else "uniform priors of probabilities"
    on_count = "equal prior weights of the numbers" if is_uniform else "the stated prior weights"
    return f"All this depends on {which} and on {on_count}; other priors give other figures."


def _probability(row: dict[Any, Any]) -> str:
    places = 2 if 0.005 <= row["probability"] <= 0.995 else 3
    text = f"{row['probability']:.{places}f}"
    error = float(row["probability_mcse"])
    return text if error < 0.005 else f"{text} ± {error:.2f}"


def _factor(gap: float) -> str:
    if gap > np.log(1e6):
        return "Bayes factor above a million"
    factor = float(np.exp(gap))
    return f"Bayes factor {factor:,.0f}" if factor >= 10 else f"Bayes factor {factor:.1f}"


def _have(k: int) -> str:
    return "has" if k == 1 else "have"


def _number(named: list[int]) -> str:
    return row_in_words(len(named)).split()[0]
