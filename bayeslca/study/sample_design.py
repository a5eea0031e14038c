"""What the sample's design changes: the step of a run that fits pseudo-samples."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from bayeslca.report.content import ReportContent
from bayeslca.study.changes import weighted_changes

if TYPE_CHECKING:
    from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior
    from bayeslca.study.load import Study
    from bayeslca.study.progress import JobProgress
    from bayeslca.study.steps import Steps


def with_sample_design(
    study: Study, content: ReportContent, steps: Steps, progress: JobProgress
) -> ReportContent:
    """Fit pseudo-samples of the model that the answer rests on, where the sample has a design."""
    if study.responses.design is None:
        return content
    from bayeslca.relate.weighted.sample_weighted import sample_weighted

    said = study.said.sampling
    weighted = sample_weighted(
        content.posterior.model,
        study.responses,
        pseudo_samples=said.pseudo_samples,
        seed=said.seed,
        unweighted=content.posterior,
        progress=lambda so_far: progress.say(
            f"Weighing: pseudo-samples {so_far.sweeps / max(so_far.planned, 1):.0%} done"
        ),
    )
    moved = weighted_changes(steps.previous, weighted, content.interval)
    return replace(content, weighted=weighted, changes=(*moved, *content.changes))


def record_of_design(weighted: WeightedPosterior | None) -> Mapping[str, Any] | None:
    """Return what ``run.json`` keeps of the sample's design."""
    if weighted is None:
        return None
    design = weighted.design
    return {
        "design": design.in_words(),
        "pseudo_samples": weighted.n_pseudo_samples,
        "clusters": design.n_clusters,
        "strata": design.n_strata,
        "effective_size_of_weights": design.effective_size,
        "findings": [finding.kind for finding in weighted.findings],
    }
