"""A maximum likelihood solution in words: findings, and what the terminal shows."""

from __future__ import annotations

import textwrap
from math import isnan
from typing import TYPE_CHECKING

from bayeslca.assess.likelihood.em_runs import Climbed
from bayeslca.assess.likelihood.estimates import Estimates
from bayeslca.findings import Finding

if TYPE_CHECKING:
    from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood

WIDTH = 80
FEW = 0.05
"""A best maximum that fewer runs than this share reached may not be the highest there is."""
MOST_NAMED = 6


def findings_of(
    shown: Estimates, found: Climbed, no_saturated: str, complete: bool, doubt: str
) -> tuple[Finding, ...]:
    """Return what should be known of a solution."""
    out = []
    runs, reached = found.log_likelihoods.size, found.reached_best
    if runs > 1 and reached < max(2, FEW * runs):
        out.append(
            Finding(
                "few_runs_reached_best",
                "warning",
                f"Only {reached} of {runs} starting points reached the best maximum: there may be "
                "a higher one.",
                "Raise starting_points.",
                value=float(reached),
            )
        )
    if not found.ended:
        out.append(
            Finding(
                "em_not_ended",
                "warning",
                f"EM was still climbing after {found.steps:,} steps.",
                "Take the last digits as not known; the maximum may be a flat ridge.",
            )
        )
    if shown.boundary:
        out.append(
            Finding(
                "boundary_estimates",
                "warning",
                f"{len(shown.boundary)} {_plural('estimate', len(shown.boundary))} at 0 or 1: "
                f"{_listed(shown.boundary)}. There the standard error means nothing (not given), "
                "and those of all others take these estimates as known.",
                "The posterior gives intervals there.",
                about=shown.boundary,
            )
        )
    if shown.active:
        out.append(
            Finding(
                "active_bounds",
                "note",
                f"On a bound or held together by an order: {_listed(shown.active)}.",
                "Without the constraint the likelihood would be higher.",
                about=shown.active,
            )
        )
    if shown.singular:
        out.append(
            Finding(
                "information_singular",
                "warning",
                "The information matrix has no inverse, so there are no standard errors: some "
                "combination of parameters is not determined by the answers.",
                "See model.identifiability(responses).",
            )
        )
    if no_saturated:
        out.append(Finding("no_g2", "warning", f"There is no G2: {no_saturated}."))
    if not complete:
        out.append(
            Finding(
                "missing_answers",
                "note",
                "Answers are missing: G2 is under missingness at random; X2 is of the complete "
                "cases alone, and right only where answers are missing completely at random.",
            )
        )
    if doubt:
        out.append(
            Finding(
                "no_chi_square",
                "note",
                f"No p-values from the chi-square distribution: {doubt}.",
                "Use a bootstrap test (likelihood_ratio_test), or posterior predictive checks.",
            )
        )
    return tuple(out)


def as_terminal_text(fit: MaximumLikelihood) -> str:
    """Return the statistics of fit and the classes, at most 80 columns wide."""
    n = fit.model.n_classes
    head = (
        f"Maximum likelihood: {n} {_plural('class', n)}, {len(fit.model.items)} items, "
        f"{fit.n_cases} cases; {fit.reached_best} of {fit.starting_points} starting "
        f"{_plural('point', fit.starting_points)} reached the best"
    )
    left = [
        ("log likelihood", f"{fit.log_likelihood:.4f}"),
        ("free parameters", f"{fit.n_parameters}"),
        ("df", f"{fit.df:,}"),
        ("G2", _with_p(fit.g2, fit.g2_p_value)),
        ("X2", _with_p(fit.x2, fit.x2_p_value)),
        ("relative entropy", "–" if isnan(fit.relative_entropy) else f"{fit.relative_entropy:.4f}"),
    ]
    right = [
        ("AIC", fit.aic),
        ("AICc", fit.aicc),
        ("BIC", fit.bic),
        ("BIC (Sclove)", fit.bic_sclove),
        ("CAIC", fit.caic),
    ]
    lines = []
    for at, (name, value) in enumerate(left):
        line = f"{name:<17}{value:<27}"
        if at < len(right):
            shown = "–" if isnan(right[at][1]) else f"{right[at][1]:.4f}"
            line += f"{right[at][0]:<13}{shown:>14}"
        lines.append(line.rstrip())
    said = [f.message for f in fit.findings]
    wrapped = [line for text in said for line in textwrap.wrap(text, WIDTH)]
    return "\n".join(
        [
            *textwrap.wrap(head, WIDTH),
            "",
            *lines,
            "",
            *_classes(fit),
            *([""] if said else []),
            *wrapped,
        ]
    )


def _classes(fit: MaximumLikelihood) -> list[str]:
    frame = fit.prevalence
    names = [
        f"{row['latent_class']}, {row['group']}" if "group" in frame else str(row["latent_class"])
        for row in frame.to_dict("records")
    ]
    names = [textwrap.shorten(name, 40, placeholder="...") for name in names]
    width = max(len("class"), *map(len, names))
    lines = [f"{'class':<{width}}  prevalence  standard error"]
    for name, row in zip(names, frame.to_dict("records"), strict=True):
        error = "–" if isnan(row["standard_error"]) else f"{row['standard_error']:.4f}"
        lines.append(f"{name:<{width}}  {row['estimate']:>10.4f}  {error:>14}")
    return lines


def _with_p(value: float, p: float) -> str:
    if isnan(value):
        return "–"
    return f"{value:.4f}" if isnan(p) else f"{value:.4f} (p = {p:.3g})"


def _listed(names: tuple[str, ...]) -> str:
    more = f" and {len(names) - MOST_NAMED} more" if len(names) > MOST_NAMED else ""
    return ", ".join(names[:MOST_NAMED]) + more


def _plural(word: str, n: int) -> str:
    if n == 1:
        return word
    return word + ("es" if word.endswith("s") else "s")
