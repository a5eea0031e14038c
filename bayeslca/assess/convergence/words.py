"""The verdict on the sampling in words."""

from __future__ import annotations

import math
from collections.abc import Sequence

from bayeslca.assess.convergence.table import Worst
from bayeslca.findings import Finding

SAID = (
    "empty_class", "duplicate_classes", "names_not_settled", "classes_not_matched",
    "not_identified", "weakly_identified", "modes_mixed",
    "limit_reached", "modes_dropped",
)  # fmt: skip
"""Findings that the verdict tells even where the sampling is to be trusted."""


def verdict_in_words(findings: Sequence[Finding], worst: Worst, *, trustworthy: bool) -> str:
    """Return one short paragraph: agreement of the chains, then what else must be known.

    Parameters
    ----------
    findings : sequence of Finding
        Problems first.
    worst : Worst
    trustworthy : bool
    """
    sentences = []
    if trustworthy:
        sentences.append(_agreement(worst))
    else:
        problems = [f.message for f in findings if f.level == "problem"]
        sentences.append("Not to be trusted: " + "; ".join(problems))
    sentences += [f.message for f in findings if f.level != "problem" and f.kind in SAID]
    return " ".join(_sentence(text) for text in sentences)


def convergence_text(verdict: str, findings: Sequence[Finding]) -> str:
    """Return verdict and findings for a terminal of 80 columns."""
    from textwrap import fill

    lines = [fill(verdict, 79)]
    for finding in findings:
        text = f"{finding.level}: {_sentence(finding.message)} {finding.remedy}".rstrip()
        lines.append(fill(text, 79, initial_indent="- ", subsequent_indent="  "))
    return "\n".join(lines)


def convergence_html(verdict: str, findings: Sequence[Finding]) -> str:
    """Return verdict and findings for a notebook; all names are escaped."""
    from html import escape

    rows = "".join(
        f"<li><b>{finding.level}</b>: {escape(_sentence(finding.message))} "
        f"{escape(finding.remedy)}</li>"
        for finding in findings
    )
    return f"<p>{escape(verdict)}</p>" + (f"<ul>{rows}</ul>" if rows else "")


def _agreement(worst: Worst) -> str:
    if not worst.n:
        return "Nothing that was sampled varies, so there is nothing to judge"
    ess = f"{worst.ess:,.0f}" if math.isfinite(worst.ess) else "unlimited"
    return (
        f"The chains agree: largest R-hat {worst.r_hat:.3f}, smallest effective sample size {ess} "
        f"({worst.n} quantities)"
    )


def _sentence(text: str) -> str:
    text = text[:1].upper() + text[1:]
    return text if text.endswith((".", "!", "?")) else text + "."
