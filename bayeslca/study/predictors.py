"""What predicts class: the step of a run that relates class to covariates."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.exceptions import BayesLCAError, StudyError, near_names
from bayeslca.relate.case_table import CaseTable, Kind, read_case_table
from bayeslca.relate.predictors.covariates import Design, design_of
from bayeslca.relate.predictors.formula import read_formula
from bayeslca.report.content import ReportContent
from bayeslca.study.outcomes import refuse_one_class

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def study_covariates(study: Study) -> CaseTable | None:
    """Read the study's covariates; None when it asks for no predictors.

    Raises
    ------
    BayesLCAError
    """
    said, answers = study.said.predictors, study.said.answers
    if said is None:
        return None
    own = said.file is None
    kinds: dict[str, Kind] = dict.fromkeys(said.categories, "category")
    return read_case_table(
        study.responses,
        study.path.parent / (answers.file if said.file is None else said.file),
        read_formula(said.formula).columns,
        case=said.case or answers.case,
        kinds=kinds,
        no_answer=said.no_answer or answers.no_answer,
        keep_only=answers.keep_only if own else None,
        sheet=answers.sheet if own else None,
        header_row=answers.header_row if own else 1,
        encoding=answers.encoding if own else None,
        separator=answers.separator if own else None,
    )


def check_predictors(study: Study) -> Design | None:
    """Read and check the covariates before anything is sampled.

    Raises
    ------
    StudyError
        Naming the study file and what is wrong.
    """
    said = study.said.predictors
    if said is None:
        return None
    where = f"{study.path.name}, [predictors]"
    try:
        refuse_one_class(study)
        _refuse_what_makes_classes(study)
        table = study_covariates(study)
        assert table is not None
        design = design_of(table, said.formula, missing=said.missing)
    except BayesLCAError as error:
        msg = f"{where}: {error}"
        raise StudyError(msg) from None
    names = study.model.class_names if study.model is not None else ()
    if said.against is not None and said.against not in names:
        known = f"The classes are {', '.join(names)}." if names else "Name the classes in [model]."
        near = near_names(said.against, names)
        msg = f"{where} against: there is no class {said.against!r}{near}. {known}"
        raise StudyError(msg)
    return design


def _refuse_what_makes_classes(study: Study) -> None:
    said, answers = study.said.predictors, study.said.answers
    if said is None:
        return
    for name in read_formula(said.formula).columns:
        if name in answers.items:
            msg = f"{name!r} is an item of [answers]: it makes the classes and cannot predict them."
            raise StudyError(msg)
        if name in (answers.case, said.case):
            msg = f"{name!r} holds the ids of cases: each case would have an effect of its own."
            raise StudyError(msg)


def with_predictors(
    study: Study, content: ReportContent, say: Callable[[str], None]
) -> ReportContent:
    """Relate class to the study's covariates."""
    said = study.said.predictors
    if said is None or content.posterior.model.n_classes == 1:
        return content
    from bayeslca.relate.predictors.class_predictors import class_predictors

    found = class_predictors(
        content.posterior,
        study_covariates(study),
        said.formula,
        ways=said.ways,
        correction=said.correction,
        prior_scale=said.prior_scale,
        missing=said.missing,
        seed=study.said.sampling.seed,
        progress=say,
    )
    return replace(content, predictors=found, predictors_against=said.against)
