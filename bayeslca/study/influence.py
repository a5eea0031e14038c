"""Cases that stand out: the step of a run that leaves each of them out."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import ReportContent
from bayeslca.sampling.progress import Progress, in_words

if TYPE_CHECKING:
    from bayeslca.study.load import Study
    from bayeslca.study.progress import JobProgress


def with_influence(study: Study, content: ReportContent, progress: JobProgress) -> ReportContent:
    """Leave out the cases of the model that the answer rests on, unless told not to."""
    if not study.said.fit.influence:
        return content

    def show(refits: Progress) -> None:
        progress.say(f"Leaving cases out: {in_words(refits)}")

    progress.say("Leaving cases out")
    found = content.posterior.influence(seed=study.said.sampling.seed, progress=show)
    return replace(content, influence=found)
