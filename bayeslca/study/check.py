"""Checking a study without sampling: what was read, the model in words, what to know of it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable
from pathlib import Path

import numpy as np

from bayeslca.findings import Finding
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prior_predictive import PriorPredictive
from bayeslca.report.wording import counted
from bayeslca.responses.responses import Responses
from bayeslca.study.asked_in_vain import refuse_asked_in_vain
from bayeslca.study.claims import check_theory
from bayeslca.study.group_comparison import group_models
from bayeslca.study.load import Study, load_study
from bayeslca.study.outcomes import check_outcomes
from bayeslca.study.placing import check_placing
from bayeslca.study.predictors import check_predictors
from bayeslca.study.schema import ClassCountSection, StudyFile
from bayeslca.study.unit_comparison import unit_models

WIDTH = 79
_REFUSED = ("What `run` will do", "- refuse to sample until what is marked !! is put right")
SWEEPS = 10_000
"""Sweeps a chain usually takes before the stopping rule is met."""
SECONDS_PER_SPLIT = 2.5e-8
"""Rough time that one unit, class and item takes in a sweep, measured on a laptop core."""
SECONDS_TO_START = 15
"""Loading the libraries, summaries and the report."""


def check_study(path: str | Path, *, prior: bool = False) -> str:
    """Read all of a study and say what `run` would do; nothing is fitted or written.

    Parameters
    ----------
    path : str or Path
        The study file.
    prior : bool
        Show also what the priors imply for a study of this size.

    Raises
    ------
    BayesLCAError
        When the study, the answers or the model are wrong.
    """
    study = load_study(path)
    check_theory(study)
    about_outcomes = check_outcomes(study)
    check_placing(study)
    refuse_asked_in_vain(study)
    covariates = check_predictors(study)
    responses = study.responses
    model = study.model
    checked = model or LatentClassModel(
        responses.items,
        2,
        statements=study.shared_statements,
        groups=responses.groups,
        **study.pooling(2),
        answered_together=study.shared_together,
    )
    if study.said.groups.compare_free:
        group_models(study, checked)
    if study.said.groups.compare_pooled and checked.n_classes > 1:
        unit_models(study, checked)
    findings = [*responses.findings, *checked.findings(responses)]
    findings += covariates.findings if covariates is not None else ()
    findings += [one for one in about_outcomes if one not in findings]
    refused = any(finding.level == "problem" for finding in findings)
    parts = [
        f"{study.said.study.title} ({study.path.name})",
        "",
        repr(responses),
        "",
        *_model_in_words(study, checked),
        "",
        *_findings(findings),
        "",
        *(_REFUSED if refused else _plan(study, responses)),
    ]
    if prior:
        with_two = [] if study.model is not None else ["With two classes:"]
        parts += ["", *with_two, str(_implied(study, checked))]
    return "\n".join(parts)


def _model_in_words(study: Study, model: LatentClassModel) -> list[str]:
    if study.model is None:
        return [
            *_wrapped(
                "The number of classes is left open: the report shows every count that the data "
                "support. With two classes the model would be:"
            ),
            "",
            model.describe(study.responses),
        ]
    return [model.describe(study.responses)]


def _findings(findings: Iterable[Finding]) -> list[str]:
    lines = ["What to know before running"]
    for finding in findings:
        mark = {"note": "-", "warning": "!", "problem": "!!"}[finding.level]
        lines += _wrapped(f"{mark} {finding.message} {finding.remedy}".rstrip(), indent=4)
    if len(lines) == 1:
        lines.append("- nothing was noticed")
    return lines


def _plan(study: Study, responses: Responses) -> list[str]:
    counts = study.said.class_count.compare
    lines = ["What `run` will do"]
    if study.model is not None:
        lines += _wrapped(
            f"- fit the study's model, {counted(study.model.n_classes, 'class', 'classes')}",
            indent=4,
        )
    design = responses.design
    if design is not None:
        lines += _wrapped(f"- {design.in_words()}", indent=4)
        lines += _wrapped(
            f"- weigh: fit {study.said.sampling.pseudo_samples} pseudo-samples for the population; "
            "everything else is unweighted",
            indent=4,
        )
    if counts:
        listed = ", ".join(str(n) for n in counts)
        lines += _wrapped(f"- compare models with {listed} unconstrained classes", indent=4)
        lines += _of_comparison(study.said.class_count)
    if study.said.groups.compare_free:
        lines += _wrapped("- compare groups that answer alike with groups that do not", indent=4)
    if study.said.groups.compare_pooled:
        lines += _wrapped(
            "- compare pooled units with units alone and all as one, leaving one unit out",
            indent=4,
        )
    n_claims, n_quantities = len(study.said.hypotheses), len(study.said.quantities)
    if n_claims or n_quantities:
        asked = [counted(n_claims, "hypothesis", "hypotheses")] if n_claims else []
        asked += [counted(n_quantities, "quantity", "quantities")] if n_quantities else []
        lines += _wrapped(f"- put {' and '.join(asked)} to the posterior", indent=4)
    for outcome in study.said.outcomes:
        name = outcome.label or outcome.column
        lines += _wrapped(f"- relate the {outcome.kind} outcome {name} to class", indent=4)
    if study.said.predictors is not None:
        said = study.said.predictors
        ways = ", ".join(way.replace("_", " ") for way in said.ways)
        lines += _wrapped(f"- relate class to {said.formula} ({ways})", indent=4)
    lines += _asked_besides(study.said)
    lines += _wrapped(f"- {_expected_time(study, responses)}", indent=4)
    return lines


def _of_comparison(said: ClassCountSection) -> list[str]:
    lines = []
    if said.exact:
        lines.append("- fit each again without one case of every response pattern")
    if said.folds:
        lines.append(f"- compare them by {said.folds} folds of cases")
    if said.also_under:
        lines += _wrapped(f"- fit each again under priors: {', '.join(said.also_under)}", indent=4)
    return lines


def _asked_besides(said: StudyFile) -> list[str]:
    lines = []
    if said.priors.refit:
        listed = ", ".join(said.priors.refit)
        lines += _wrapped(f"- fit the answer's model again under priors: {listed}", indent=4)
    if said.maximum_likelihood is not None:
        drawn = said.maximum_likelihood.bootstrap
        tests = f", and to {drawn} tables drawn for each test of one class fewer" if drawn else ""
        lines += _wrapped(f"- fit every model by maximum likelihood{tests}", indent=4)
    if said.assignment is not None:
        bound = f"{said.assignment.at_most:g}"
        lines += _wrapped(f"- place cases where the expected cost is at most {bound}", indent=4)
    return lines


def _implied(study: Study, model: LatentClassModel) -> PriorPredictive:
    """Return what the priors imply, without what was observed: it would not be a prior then."""
    units = model.units(study.responses)
    sizes = np.bincount(units.group, weights=units.count, minlength=model.n_groups)
    seed = study.said.sampling.seed
    return model.prior_predictive([int(n) for n in sizes], seed=seed)


def _expected_time(study: Study, responses: Responses) -> str:
    counts = list(study.said.class_count.compare)
    if study.model is not None:
        counts.append(study.model.n_classes)
    size = responses.units.n_units * len(responses.items)
    sweeps = SWEEPS * study.said.sampling.chains
    seconds = SECONDS_TO_START + sum(size * k * sweeps * SECONDS_PER_SPLIT for k in counts)
    if study.said.sampling.sampler == "nuts":
        return "NUTS was asked for: expect minutes for each model"
    if seconds < 60:
        time = "expected time: under a minute"
    else:
        time = f"expected time: about {round(seconds / 60)} minutes"
    return f"{time}, and more for what is refitted" if _refits(study.said) else time


def _refits(said: StudyFile) -> bool:
    counts, likelihood = said.class_count, said.maximum_likelihood
    drawn = likelihood is not None and likelihood.bootstrap > 0
    return bool(counts.exact or counts.folds or counts.also_under or said.priors.refit or drawn)


def _wrapped(text: str, indent: int = 0) -> list[str]:
    return textwrap.wrap(text, WIDTH, subsequent_indent=" " * indent) or [""]
