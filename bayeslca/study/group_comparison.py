"""Whether groups answer alike: shared response probabilities against ones free by group."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import ReportContent
from bayeslca.report.sections.groups import ALIKE, FREE
from bayeslca.study.load import Study
from bayeslca.study.progress import JobProgress
from bayeslca.study.steps import ALIKE_FIT, FREE_FIT, Steps, step_key

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior

FILES = {ALIKE: ALIKE_FIT, FREE: FREE_FIT}


def group_models(study: Study, model: LatentClassModel) -> dict[str, LatentClassModel]:
    """Return the two models that are compared, by the names of their rows.

    Raises
    ------
    ModelError
        When the model's statements do not fit response probabilities that differ by group.
    """
    return {
        ALIKE: replace(model, free_by_group=False),
        FREE: replace(model, free_by_group=study.free_by_group or True),
    }


def with_group_comparison(
    study: Study, content: ReportContent, steps: Steps, progress: JobProgress
) -> ReportContent:
    """Fit and compare both models, if the study asks for it."""
    from bayeslca.assess.comparison.compare import compare

    if not study.said.groups.compare_free:
        return content
    main = content.posterior
    sampling, seed = study.sampling_options, study.said.sampling.seed
    fitted: dict[str, Posterior] = {}
    for name, model in group_models(study, main.model).items():
        key = step_key(study.responses, model, sampling, seed)
        kept = steps.take(FILES[name], key)
        if kept is None and model == main.model:
            kept = main
        fitted[name] = kept or model.sample(
            study.responses, seed=seed, progress=progress.of_model(f"groups {name}"), **sampling
        )
        progress.finished(1)
    return replace(content, group_comparison=compare(fitted, progress=False))
