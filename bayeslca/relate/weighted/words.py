"""A weighted posterior in words: the terminal's table, and how far weights move the shares."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior

WIDTH = 80


def as_terminal_text(posterior: WeightedPosterior) -> str:
    """Return the prevalences, weighted beside unweighted, at most 80 columns wide."""
    frame = posterior.beside_unweighted()
    head = (
        f"Weighted posterior: {posterior.n_pseudo_samples} pseudo-samples of "
        f"{posterior.unweighted.units.n_cases:,} cases; {posterior.design.in_words()}"
    )
    names = [
        f"{row['latent_class']}, {row['group']}" if "group" in frame else str(row["latent_class"])
        for row in frame.to_dict("records")
    ]
    names = [textwrap.shorten(name, 26, placeholder="...") for name in names]
    width = max(len("class"), *map(len, names))
    lines = [f"{'class':<{width}}  {'weighted':>18}  {'unweighted':>18}  design effect"]
    for name, row in zip(names, frame.to_dict("records"), strict=True):
        shown = [
            f"{row[c]:.2f} ({row[f'{c}_lower']:.2f}-{row[f'{c}_upper']:.2f})"
            for c in ("weighted", "unweighted")
        ]
        lines.append(
            f"{name:<{width}}  {shown[0]:>18}  {shown[1]:>18}  {row['design_effect']:13.2f}"
        )
    said = [posterior_in_words(posterior), *(f.message for f in posterior.findings)]
    wrapped = [line for text in said for line in textwrap.wrap(text, WIDTH)]
    return "\n".join([*textwrap.wrap(head, WIDTH), "", *lines, "", *wrapped])


def posterior_in_words(posterior: WeightedPosterior, interval: float = 0.95) -> str:
    """Say which prevalences the design moves, all groups together, in a sentence or two."""
    frame = posterior.beside_unweighted(interval).tail(posterior.unweighted.model.n_classes)
    moved = frame[frame["differs"]]
    if not posterior.design.is_weighted:
        widest = frame["design_effect"].max()
        return (
            "Cases weigh alike, so the design moves no share by much; it widens intervals (design "
            f"effect up to {widest:.1f})."
        )
    if moved.empty:
        apart = (frame["weighted"] - frame["unweighted"]).abs()
        (most,) = frame.loc[[apart.idxmax()]].to_dict("records")
        return (
            "Unweighted shares lie inside the weighted intervals; the furthest apart is "
            f"{_both(most)}."
        )
    named = [_both(row) for row in moved.to_dict("records")]
    shown = "; ".join(named[:4]) + (f"; and {len(named) - 4} more" if len(named) > 4 else "")
    return (
        f"The weights change the answer: {shown}. The unweighted shares describe the cases, not "
        "the population."
    )


def _both(row: Mapping[Any, Any]) -> str:
    name = str(row["latent_class"])
    name = f"class {name}" if name.isdigit() else name
    return f"{name} {row['weighted']:.0%} weighted, {row['unweighted']:.0%} unweighted"
