"""What follows from class: the step of a run that relates outcomes to the classes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bayeslca.exceptions import BayesLCAError, StudyError
from bayeslca.findings import Finding
from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.study.load import Study
    from bayeslca.study.schema import OutcomeSection


def check_outcomes(study: Study) -> list[Finding]:
    """Read all outcomes and orders, so that what is wrong is said before anything is sampled.

    Returns
    -------
    list of Finding
        What was noticed on reading.

    Raises
    ------
    StudyError
    """
    from bayeslca.relate.outcomes.column import read_outcome
    from bayeslca.relate.outcomes.tables import read_order
    from bayeslca.relate.outcomes.work import read_covariates

    findings: list[Finding] = []
    for said in study.said.outcomes:
        data, how = _data(study, said)
        try:
            refuse_one_class(study)
            outcome = read_outcome(
                study.responses, data, said.column, said.kind, levels=said.levels, yes=said.yes,
                label=said.label, **how,
            )  # fmt: skip
            *_, noticed = read_covariates(study.responses, data, said.adjusted_for or None, **how)
            if study.model is not None:
                for order in said.orders:
                    read_order(order, study.model.class_names)
        except BayesLCAError as error:
            msg = f"{study.path.name}, [[outcomes]] {said.column}: {error}"
            raise StudyError(msg) from None
        findings += [one for one in (*outcome.findings, *noticed) if one not in findings]
    return findings


def refuse_one_class(study: Study) -> None:
    """Refuse to relate other variables to the class where there is one class only.

    Raises
    ------
    StudyError
    """
    if study.model is not None and study.model.n_classes == 1:
        msg = "[model] has one class, so nothing can differ between classes; leave this out."
        raise StudyError(msg)


def with_outcomes(
    study: Study, content: ReportContent, say: Callable[[str], None]
) -> ReportContent:
    """Relate the study's outcomes to the classes that the answer rests on."""
    from bayeslca.relate.outcomes.class_outcomes import class_outcomes

    if not study.said.outcomes or content.posterior.model.n_classes == 1:
        return content
    found = []
    for said in study.said.outcomes:
        say(f"Relating {said.label or said.column} to class")
        data, how = _data(study, said)
        found.append(
            class_outcomes(
                content.posterior,
                data,
                said.column,
                kind=said.kind,
                ways=said.ways,
                adjusted_for=said.adjusted_for or None,
                count_model=said.count_model,
                spread=said.spread,
                levels=said.levels,
                yes=said.yes,
                label=said.label,
                seed=study.said.sampling.seed,
                interval=study.said.report.interval,
                **how,
            )
        )
    orders = {said.column: tuple(said.orders) for said in study.said.outcomes}
    return replace(content, outcomes=tuple(found), outcome_orders=orders)


def memberships_moved(content: ReportContent) -> dict[str, pd.DataFrame]:
    """Return each case's memberships by way, by file name: for files of their own."""
    return {
        f"membership_with_{_file_name(found.outcome.name)}.csv": found.membership_moved()
        for found in content.outcomes
        if found.drawn
    }


def _file_name(name: str) -> str:
    return "".join(sign if sign.isalnum() else "_" for sign in name)


def _data(study: Study, said: OutcomeSection) -> tuple[Path, dict[str, Any]]:
    """Return the file of an outcome and how to read it: as the answers, if it is theirs."""
    answers = study.said.answers
    how: dict[str, Any] = {"no_answer": tuple(said.no_answer or answers.no_answer)}
    if said.file is None or said.file == answers.file:
        how |= {
            "sheet": answers.sheet,
            "header_row": answers.header_row,
            "encoding": answers.encoding,
            "separator": answers.separator,
            "keep_only": answers.keep_only or None,
        }
    return study.path.parent / (said.file or answers.file), how
