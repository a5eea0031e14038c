"""Does the model fit: the step of a run that makes posterior predictive checks."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from bayeslca.assess.compare import Comparison
    from bayeslca.assess.predictive_checks import PredictiveChecks
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.study.load import Study

OF_OTHERS = 500
"""Replicates for each of the other numbers of classes."""


@dataclass(frozen=True)
class FitChecks:
    """Posterior predictive checks of a run.

    Attributes
    ----------
    main : PredictiveChecks or None
        Of the model the answer rests on; None when the study does without.
    by_count : mapping of int to PredictiveChecks
        Of the models of the comparison of class counts.
    """

    main: PredictiveChecks | None = None
    by_count: Mapping[int, PredictiveChecks] = field(default_factory=dict)


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


def checked_fit(
    study: Study,
    main: Posterior,
    comparison: Comparison | None,
    say: Callable[[str], None],
) -> FitChecks:
    """Check the model that the answer rests on, and shortly those it was compared with.

    Parameters
    ----------
    study : Study
    main : Posterior
    comparison : Comparison or None
    say : callable
        Told what is being done.
    """
    said, seed = study.said.fit, study.said.sampling.seed
    if not said.check:
        return FitChecks()
    interval = study.said.report.interval

    def count(done: int, total: int) -> None:
        say(f"Checking the fit: simulated study {min(done + 1, total)} of {total}")

    say("Checking the fit")
    checks = main.predictive_checks(
        seed=seed, interval=interval, calibrate=said.calibrate, progress=count
    )
    others = comparison.posteriors if comparison is not None else {}
    return FitChecks(
        checks,
        {
            n: posterior.predictive_checks(seed=seed, interval=interval, replicates=OF_OTHERS)
            for n, posterior in others.items()
            if isinstance(n, int)
        },
    )
