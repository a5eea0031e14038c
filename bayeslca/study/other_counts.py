"""Numbers of classes under other priors: a step of a run."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import ReportContent
from bayeslca.study.progress import JobProgress

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def with_counts_under_other_priors(
    study: Study, content: ReportContent, progress: JobProgress
) -> ReportContent:
    """Weigh the numbers of classes under the other priors that the study names."""
    names = study.said.class_count.also_under
    if not names or content.comparison is None:
        return content
    found = content.comparison.under_other_priors(
        names,
        seed=study.said.sampling.seed,
        progress=progress.of_other_priors,
        **study.sampling_options,
    )
    return replace(content, counts_under_other_priors=found)
