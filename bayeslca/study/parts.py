"""Parts of a run that come after the fits: each adds to what the report is made from.

A part is a function of the run and the content so far, and returns the content with its own
fields filled. A part that the study does not ask for returns the content as it came.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

from bayeslca.report.content import ReportContent
from bayeslca.study.claims import with_theory
from bayeslca.study.fit_checks import with_fit_checks
from bayeslca.study.group_comparison import with_group_comparison
from bayeslca.study.influence import with_influence
from bayeslca.study.likelihood import with_maximum_likelihood
from bayeslca.study.load import Study
from bayeslca.study.other_counts import with_counts_under_other_priors
from bayeslca.study.outcomes import with_outcomes
from bayeslca.study.placing import with_placing
from bayeslca.study.predictors import with_predictors
from bayeslca.study.prior_sensitivity import with_prior_sensitivity
from bayeslca.study.progress import JobProgress
from bayeslca.study.sample_design import with_sample_design
from bayeslca.study.steps import Steps
from bayeslca.study.together import with_together
from bayeslca.study.unit_comparison import with_unit_comparison


@dataclass(frozen=True)
class Run:
    """What a part may use besides the content.

    Attributes
    ----------
    study : Study
    steps : Steps
        Fits that can be taken over from the run before.
    progress : JobProgress
        Told what is being done.
    """

    study: Study
    steps: Steps
    progress: JobProgress


Part: TypeAlias = Callable[[Run, ReportContent], ReportContent]


def _group_comparison(run: Run, content: ReportContent) -> ReportContent:
    return with_group_comparison(run.study, content, run.steps, run.progress)


def _theory(run: Run, content: ReportContent) -> ReportContent:
    return with_theory(run.study, content, run.progress.say)


def _fit_checks(run: Run, content: ReportContent) -> ReportContent:
    return with_fit_checks(run.study, content, run.progress.say)


def _influence(run: Run, content: ReportContent) -> ReportContent:
    return with_influence(run.study, content, run.progress)


def _maximum_likelihood(run: Run, content: ReportContent) -> ReportContent:
    return with_maximum_likelihood(run.study, content, run.progress.say)


def _units(run: Run, content: ReportContent) -> ReportContent:
    return with_unit_comparison(run.study, content, run.steps, run.progress)


def _priors(run: Run, content: ReportContent) -> ReportContent:
    return with_prior_sensitivity(run.study, content, run.progress.say)


def _placing(run: Run, content: ReportContent) -> ReportContent:
    return with_placing(run.study, content, run.progress.say)


def _predictors(run: Run, content: ReportContent) -> ReportContent:
    return with_predictors(run.study, content, run.progress.say)


def _sample_design(run: Run, content: ReportContent) -> ReportContent:
    return with_sample_design(run.study, content, run.steps, run.progress)


def _other_counts(run: Run, content: ReportContent) -> ReportContent:
    return with_counts_under_other_priors(run.study, content, run.progress)


def _together(run: Run, content: ReportContent) -> ReportContent:
    return with_together(run.study, content, run.progress.say)


def _outcomes(run: Run, content: ReportContent) -> ReportContent:
    return with_outcomes(run.study, content, run.progress.say)


PARTS: tuple[Part, ...] = (
    _sample_design,
    _other_counts,
    _together,
    _group_comparison,
    _units,
    _theory,
    _fit_checks,
    _influence,
    _priors,
    _maximum_likelihood,
    _outcomes,
    _predictors,
    _placing,
)
"""All parts, in the order in which they are done."""


def with_all_parts(run: Run, content: ReportContent) -> ReportContent:
    """Do every part that the study asks for."""
    for part in PARTS:
        content = part(run, content)
    return content
