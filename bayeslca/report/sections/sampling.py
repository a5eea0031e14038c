"""Can the sampling be trusted: the verdict, the findings, traces, ranks and numbers."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from bayeslca.report.blocks import Block, Bullets, Head, PageTable, Paragraph, Picture, Section
from bayeslca.report.facts import Facts
from bayeslca.report.figures import Figure, draw
from bayeslca.report.sampling_plots import plot_ranks, plot_traces, traced_quantities
from bayeslca.report.wording import (
    counted,
    counted_in_words,
    decimal,
    duration,
    sentence,
    significant,
    whole,
)

ANCHOR, HEADING = "sampling", "Can the sampling be trusted"
MOST_TRACED = 5


def sampling_section(facts: Facts) -> Section:
    """Return the section on the sampling."""
    diagnostics = facts.diagnostics
    verdict = sentence(diagnostics.verdict)
    blocks: list[Block] = [
        Paragraph(verdict),
        Paragraph(sampling_in_words(facts)),
    ]
    if diagnostics.findings:
        blocks.append(
            Bullets(
                tuple(
                    (sentence(finding.message), sentence(finding.remedy))
                    for finding in diagnostics.findings
                )
            )
        )
    blocks += [Picture(_figure(facts)), _table(facts)]
    return Section(ANCHOR, HEADING, tuple(blocks))


def sampling_in_words(facts: Facts) -> str:
    """Return how the posterior was computed, with its numbers."""
    draws = facts.posterior.draws
    how = "NUTS" if draws.sampler == "nuts" else "Gibbs sampling"
    sweeps = "iterations" if draws.sampler == "nuts" else "sweeps"
    text = (
        f"The posterior was computed by {how}: {counted(draws.n_chains, 'chain')} of "
        f"{whole(draws.sweeps)} {sweeps} each, the first {whole(draws.warmup)} thrown away, "
        f"{counted(draws.n_draws, 'draw')} kept in each"
    )
    text += f", in {duration(draws.seconds)}." if draws.seconds else "."
    if draws.limit_reached:
        text += " The stated number of sweeps was reached before the stopping rule was met."
    return f"{text} {starts_in_words(facts)}".strip()


def starts_in_words(facts: Facts) -> str:
    """Return what the short runs from scattered points found."""
    starts = facts.posterior.draws.starts
    if starts is None:
        return ""
    n_runs = len(starts.mode)
    n_best = int((starts.mode == 0).sum())
    best = "all" if n_best == n_runs else whole(n_best)
    text = (
        f"From scattered points, {counted(n_runs, 'short run')} found "
        f"{counted_in_words(starts.n_modes, 'mode')} within {significant(starts.reach)} nats of "
        f"the best; {best} of them reached the best."
    )
    if starts.dropped:
        n_dropped = len(starts.dropped)
        was = "was" if n_dropped == 1 else "were"
        text += f" {counted(n_dropped, 'mode')} further down {was} left."
    return text


def _figure(facts: Facts) -> Figure:
    names = list(traced_quantities(facts.posterior))
    shown = names[:MOST_TRACED]
    height = 2.0 * len(shown)

    def plot(drawing: object) -> None:
        rows = drawing.subplots(len(shown), 2, squeeze=False)  # type: ignore[attr-defined]
        for row, name in zip(rows, shown, strict=True):
            plot_traces(facts.posterior, name, ax=row[0])
            plot_ranks(facts.posterior, name, ax=row[1])

    more = f" {counted(len(names) - len(shown), 'quantity', 'quantities')} not drawn."
    return draw(
        "sampling",
        plot,
        size=(7.5, height),
        caption=(
            "Left, the draws of each chain in their order: lines should lie over each other. "
            "Right, the ranks of each chain's draws among all: bars should stay in the grey band "
            "around the dotted line." + (more if len(names) > len(shown) else "")
        ),
        alt=sentence(facts.diagnostics.verdict),
    )


def _table(facts: Facts) -> PageTable:
    frame = facts.diagnostics.table
    numbers = [name for name in ("r_hat", "ess_bulk", "ess_tail", "mcse") if name in frame]
    rows = tuple(
        (_quantity(row), *(_number(name, float(row[name])) for name in numbers))
        for row in frame.to_dict("records")
    )
    glosses = {
        "r_hat": Head("R-hat", "1 when chains agree; above 1.01 they do not"),
        "ess_bulk": Head("Independent draws, middle", "effective sample size of the mean"),
        "ess_tail": Head("Independent draws, tails", "of the interval's ends"),
        "mcse": Head("Simulation error", "Monte Carlo standard error of the mean"),
    }
    heads = (
        Head("Quantity", "what was sampled", numeric=False),
        *(glosses[name] for name in numbers),
    )
    return PageTable("The sampling in numbers", heads, rows, folded=len(rows) > 10)


def _quantity(row: Mapping[Any, Any]) -> str:
    """Return what a row is about: ``response probability: managed, fees, yes (constant)``."""
    keys = [row.get(key, "") for key in ("group", "latent_class", "item", "category")]
    where = ", ".join(str(key) for key in keys if key)
    note = row.get("note", "")
    return f"{row['quantity']}{': ' if where else ''}{where}{f' ({note})' if note else ''}"


def _number(name: str, value: float) -> str:
    if not math.isfinite(value):
        return "–"
    if name == "r_hat":
        return decimal(value, 3)
    return significant(value) if name == "mcse" else whole(value)
