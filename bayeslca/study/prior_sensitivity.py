"""What the priors do: the step of a run that tries others."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def with_prior_sensitivity(
    study: Study, content: ReportContent, say: Callable[[str], None]
) -> ReportContent:
    """Look at what the priors of the answer's model do, its hypotheses and quantities included."""
    said = study.said.priors
    if not said.sensitivity:
        return content
    say("Looking at what the priors do")
    found = content.posterior.prior_sensitivity(
        quantities=study.said.quantities,
        hypotheses={one.claim: one.statements for one in study.said.hypotheses},
        refit=said.refit,
        seed=study.said.sampling.seed,
        progress=say,
    )
    return replace(content, sensitivity=found)
