"""Does the model fit: the step of a run that makes posterior predictive checks."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    from bayeslca.assess.fit.predictive_checks import PredictiveChecks
    from bayeslca.study.load import Study

OF_OTHERS = 500
"""Replicates for each of the other numbers of classes."""


def record_of(checks: PredictiveChecks | None) -> Mapping[str, Any] | None:
    """Return what ``run.json`` keeps of the checks."""
    if checks is None:
        return None
    return {
        "replicates": checks.replicates,
        "seed": checks.seed,
        "simulated_studies": checks.calibrated_in,
        "reproduces": checks.reproduces,
        "verdict": checks.verdict,
    }


def with_fit_checks(
    study: Study, content: ReportContent, say: Callable[[str], None]
) -> ReportContent:
    """Check the model that the answer rests on, and shortly those it was compared with."""
    said, seed = study.said.fit, study.said.sampling.seed
    if not said.check:
        return content
    interval = study.said.report.interval

    def count(done: int, total: int) -> None:
        say(f"Checking the fit: simulated study {min(done + 1, total)} of {total}")

    say("Checking the fit")
    checks = content.posterior.predictive_checks(
        seed=seed, interval=interval, calibrate=said.calibrate, progress=count
    )
    others = content.comparison.posteriors if content.comparison is not None else {}
    return replace(
        content,
        checks=checks,
        checks_by_count={
            n: posterior.predictive_checks(seed=seed, interval=interval, replicates=OF_OTHERS)
            for n, posterior in others.items()
            if isinstance(n, int)
        },
    )
