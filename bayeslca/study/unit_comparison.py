"""Whether units are better pooled, left alone or taken as one: predicted for a new unit."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.exceptions import BayesLCAError
from bayeslca.report.content import ReportContent, UnitComparison
from bayeslca.study.load import Study
from bayeslca.study.progress import JobProgress
from bayeslca.study.steps import UNIT_FITS, Steps, step_key

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior

POOLED, ALONE, ONE = UNIT_FITS


def unit_models(study: Study, model: LatentClassModel) -> dict[str, LatentClassModel]:
    """Return the models that are compared, by the names of their rows.

    The one without groups is left out where statements or free items speak of groups.

    Raises
    ------
    ModelError
        When the model's units cannot be pooled.
    """
    spread = study.said.model.spread_prior
    found = {
        POOLED: replace(model, pooled=True, spread_prior=spread),
        ALONE: replace(model, pooled=False, spread_prior=(1.0, 1.0)),
    }
    try:
        found[ONE] = replace(found[ALONE], groups=None)
    except BayesLCAError:
        pass
    return found


def with_unit_comparison(
    study: Study, content: ReportContent, steps: Steps, progress: JobProgress
) -> ReportContent:
    """Fit and compare the models by leaving one unit out at a time, if the study asks for it."""
    from bayeslca.assess.left_out.leave_one_unit_out import compare_units

    if not study.said.groups.compare_pooled or content.posterior.model.n_classes == 1:
        return content
    main = content.posterior
    sampling, seed = study.sampling_options, study.said.sampling.seed
    fitted: dict[str, Posterior] = {}
    for name, model in unit_models(study, main.model).items():
        if model == main.model:
            fitted[name] = main
            continue
        kept = steps.take(UNIT_FITS[name], step_key(study.responses, model, sampling, seed))
        fitted[name] = kept or model.sample(
            study.responses, seed=seed, progress=progress.of_model(f"units {name}"), **sampling
        )
        progress.finished(1)
    progress.say("Leaving one unit out at a time")
    return replace(
        content, units=UnitComparison(compare_units(fitted, refit=True, seed=seed), fitted)
    )
