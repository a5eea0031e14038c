"""A class in one or two sentences: the answers that its cases usually and seldom give."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from bayeslca.report.facts import Facts
from bayeslca.report.wording import listed_up_to, percent

USUAL, SELDOM = 0.8, 0.2
MOST_NAMED = 10
PRIOR_MARK = "†"
"""Put beside a number that rests mostly on the prior."""


def portrait(facts: Facts, latent_class: str) -> str:
    """Describe a class by its usual and its seldom answers, with their probabilities."""
    cells = class_cells(facts, latent_class)
    usual: dict[str, list[str]] = {}
    seldom: dict[str, list[str]] = {}
    between: list[str] = []
    several: list[str] = []
    for item in facts.posterior.model.items:
        mark = PRIOR_MARK if (latent_class, item.name) in facts.ruled else ""
        if item.n_categories > 2:
            best = max(item.categories, key=lambda name: cells[(item.name, name)]["median"])
            share = percent(cells[(item.name, best)]["median"])
            several.append(f"{item.text}: most often “{best}” ({share}{mark})")
            continue
        yes = item.yes or item.categories[-1]
        median = cells[(item.name, yes)]["median"]
        text = f"{item.text} ({percent(median)}{mark})"
        if USUAL > median > SELDOM:
            between.append(text)
        else:
            (usual if median >= USUAL else seldom).setdefault(yes, []).append(text)
    parts = [
        *_sentences(f"usually ({percent(USUAL)} or more)", usual),
        *_sentences(f"seldom ({percent(SELDOM)} or less)", seldom),
    ]
    if between:
        parts.append(f"in between: {listed_up_to(between, MOST_NAMED)}.")
    if several:
        parts.append(f"{listed_up_to(several, MOST_NAMED)}.")
    return " ".join(part[0].upper() + part[1:] for part in parts)


def class_cells(facts: Facts, latent_class: str) -> Mapping[tuple[str, str], Mapping[str, Any]]:
    """Return a class's response probabilities by (item, category); of the first group if many."""
    frame = facts.probabilities
    if "group" in frame:
        frame = frame[frame["group"] == frame["group"].iloc[0]]
    frame = frame[frame["latent_class"] == latent_class]
    return {
        (str(row["item"]), str(row["category"])): {str(k): v for k, v in row.items()}
        for row in frame.to_dict("records")
    }


def _sentences(how: str, by_answer: Mapping[str, list[str]]) -> list[str]:
    return [
        f"{how} “{answer}”: {listed_up_to(texts, MOST_NAMED)}."
        for answer, texts in by_answer.items()
    ]
