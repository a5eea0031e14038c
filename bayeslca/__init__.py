"""Bayesian latent class modelling for small samples of categorical answers."""

from __future__ import annotations

from importlib import import_module
from typing import Any

_HOME = {
    "AnsweredTogether": "bayeslca.model.answered_together",
    "ClassOutcomes": "bayeslca.relate.outcomes.class_outcomes",
    "ClassPredictors": "bayeslca.relate.predictors.class_predictors",
    "Comparison": "bayeslca.assess.comparison.compare",
    "GibbsStep": "bayeslca.sampling.pymc_step",
    "Groups": "bayeslca.responses.item",
    "Item": "bayeslca.responses.item",
    "ItemSpec": "bayeslca.responses.item",
    "LatentClassModel": "bayeslca.model.latent_class_model",
    "Posterior": "bayeslca.posterior.posterior",
    "Responses": "bayeslca.responses.responses",
    "class_count_test": "bayeslca.assess.likelihood.likelihood_ratio",
    "class_outcomes": "bayeslca.relate.outcomes.class_outcomes",
    "class_predictors": "bayeslca.relate.predictors.class_predictors",
    "compare": "bayeslca.assess.comparison.compare",
    "compare_class_counts": "bayeslca.assess.comparison.compare",
    "compare_rivals": "bayeslca.assess.hypothesis.rivals",
    "compare_units": "bayeslca.assess.left_out.leave_one_unit_out",
    "criteria_beside": "bayeslca.assess.likelihood.criteria_beside",
    "criteria_table": "bayeslca.assess.likelihood.fit_statistics",
    "k_fold": "bayeslca.assess.left_out.folds",
    "leave_one_group_out": "bayeslca.assess.left_out.folds",
    "leave_one_out": "bayeslca.assess.left_out.exact_loo",
    "likelihood_ratio_test": "bayeslca.assess.likelihood.likelihood_ratio",
    "log_evidence": "bayeslca.assess.evidence.log_evidence",
    "place_cases": "bayeslca.relate.placing",
    "plausible_values": "bayeslca.relate.plausible_values",
    "sample_class_count": "bayeslca.assess.class_count.unknown_count",
    "sample_weighted": "bayeslca.relate.weighted.sample_weighted",
    "weighted_maximum_likelihood": "bayeslca.relate.weighted.weighted_likelihood",
}
"""Where each public name lives; loaded when first used, so that importing stays light."""

__all__ = [
    "AnsweredTogether",
    "ClassOutcomes",
    "ClassPredictors",
    "Comparison",
    "GibbsStep",
    "Groups",
    "Item",
    "ItemSpec",
    "LatentClassModel",
    "Posterior",
    "Responses",
    "class_count_test",
    "class_outcomes",
    "class_predictors",
    "compare",
    "compare_class_counts",
    "compare_rivals",
    "compare_units",
    "criteria_beside",
    "criteria_table",
    "k_fold",
    "leave_one_group_out",
    "leave_one_out",
    "likelihood_ratio_test",
    "log_evidence",
    "place_cases",
    "plausible_values",
    "sample_class_count",
    "sample_weighted",
    "weighted_maximum_likelihood",
]
__version__ = "0.1.0"


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        msg = f"module 'bayeslca' has no attribute {name!r}; it has {', '.join(__all__)}"
        raise AttributeError(msg)
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
