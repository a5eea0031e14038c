"""The tables of a report as they go into files: stable columns, one row a quantity."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.report.columns import column
from bayeslca.report.priors import priors_table
from bayeslca.report.sections.influence import influence_tables
from bayeslca.report.sections.left_out import fold_tables
from bayeslca.report.sections.likelihood import likelihood_tables
from bayeslca.report.sections.outcomes import outcome_tables
from bayeslca.report.sections.predictors import predictor_tables
from bayeslca.report.sections.together import sets_table
from bayeslca.report.wording import level

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.prior_predictive import PriorPredictive
    from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior
    from bayeslca.report.content import ReportContent


@dataclass(frozen=True)
class FileTable:
    """A table for ``tables/<name>.csv`` and a sheet of the workbook.

    Attributes
    ----------
    name : str
        File name without its ending; the sheet's name.
    title : str
        What it holds, in a sentence.
    frame : pandas.DataFrame
        Key columns first, no index.
    """

    name: str
    title: str
    frame: pd.DataFrame


PRIOR_NAMES = {
    name: f"prior_{name}"
    for name in ("median", "mean", "lower_50", "upper_50", "lower_95", "upper_95")
}


def file_tables(
    content: ReportContent, prior: PriorPredictive | None = None
) -> tuple[FileTable, ...]:
    """Return all tables of a report; none holds a single case's name or answers.

    Parameters
    ----------
    content : ReportContent
    prior : PriorPredictive, optional
        What the priors imply; its table is left out when not given.
    """
    posterior, interval = content.posterior, content.interval
    named: dict[str, tuple[str, pd.DataFrame]] = {
        "prevalence": (
            "How common each class is",
            posterior.prevalence(interval=interval).assign(
                prior_overlap=posterior.prior_marks.prevalence_overlap,
                mostly_prior=posterior.prior_marks.prevalence,
            ),
        ),
        "response_probabilities": (
            "The probability of each answer in each class",
            posterior.response_probabilities(interval=interval).assign(
                prior_overlap=posterior.prior_marks.answer_overlap,
                mostly_prior=posterior.prior_marks.answers,
            ),
        ),
        "assignment_error": (
            "Of the cases of each class, the share whose most probable class is each class",
            posterior.assignment_error(interval=interval),
        ),
        "separation": (
            "How well the answers tell the classes apart",
            posterior.separation(interval=interval),
        ),
        "priors": ("What was assumed before the answers", priors_table(posterior)),
        "answers": ("What was answered", content.responses.summary()),
        "diagnostics": ("How the sampling went", posterior.diagnostics().table),
    }
    if prior is not None:
        named["prior_predictive"] = (
            "What the priors imply before the data",
            prior.table.rename(columns=PRIOR_NAMES),
        )
    if posterior.model.item_sets:
        named["joint_answers"] = (
            "The probability of each joint answer in each class",
            posterior.joint_answers(interval=interval),
        )
        named["conditional_dependence"] = (
            "How items that are answered together go together within a class",
            posterior.conditional_dependence(interval=interval),
        )
    if content.comparison is not None:
        named["class_counts"] = (
            "How well models with different numbers of classes predict",
            content.comparison.table,
        )
        if content.weighted is not None:
            unweighted = content.comparison.table.assign(weighting="unweighted")
            named["class_counts"] = (named["class_counts"][0], unweighted)
    if content.counts_under_other_priors is not None:
        named["class_counts_other_priors"] = (
            "How probable each number of classes is, prior by prior",
            content.counts_under_other_priors.table,
        )
    if content.together is not None:
        named["sets"] = (
            "Sets of cases that go together whatever the number of classes",
            sets_table(content.together),
        )
    if content.weighted is not None:
        named |= weighted_tables(content.weighted, interval)
    if posterior.model.pooled:
        named["units"] = (
            "How common each class is, unit by unit",
            posterior.partial_pooling(interval=interval),
        )
        named["between_units"] = (
            "How much units differ",
            posterior.between_units(interval=interval),
        )
        named["spread_sensitivity"] = (
            "What other priors on the spread between units would have given",
            posterior.spread_sensitivity(interval=interval),
        )
    if content.units is not None:
        named["units_left_out"] = (
            "How well models predict a unit that they have not seen",
            content.units.table,
        )
    named |= fold_tables(content)
    named |= influence_tables(content)
    if content.claims:
        named["hypotheses"] = ("What became of the study's hypotheses", hypotheses_table(content))
    for name, rivals in content.rivals.items():
        named[f"rivals_{_file_name(name)}"] = (f"Rival hypotheses: {name}", rivals.table)
    if content.quantities is not None:
        named["quantities"] = ("Quantities that the study asks for", content.quantities)
    if content.checks is not None:
        fit = {
            "fit_checks": ("Does the model reproduce the answers", content.checks.overall),
            "fit_pairs": ("Pairs of items the model misses", content.checks.pairs),
            "fit_items": ("Answers to single items", content.checks.margins),
            "fit_sum_scores": ("Cases by their sum score", content.checks.sum_scores),
        }
        named |= {name: table for name, table in fit.items() if not table[1].empty}
    named |= likelihood_tables(content)
    named |= outcome_tables(content)
    if content.predictors is not None:
        named |= predictor_tables(content.predictors, content.predictors_against, interval)
    if content.sensitivity is not None:
        done = content.sensitivity
        named["prior_sensitivity"] = ("How much of each result rests on its prior", done.table)
        named["other_priors"] = ("What other priors would have given", done.moved)
        named["other_priors_tried"] = ("Which other priors were tried, and how", done.priors)
        if len(done.hypotheses):
            named["hypotheses_by_prior"] = ("The hypotheses under other priors", done.hypotheses)
    tables = [FileTable(name, title, _flat(frame)) for name, (title, frame) in named.items()]
    return (*tables, _columns_table(tables, interval))


def weighted_tables(
    weighted: WeightedPosterior, interval: float
) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the tables of the population that a sample with a design was drawn from."""
    return {
        "weighted_prevalence": (
            "How common each class is in the population",
            weighted.prevalence(interval),
        ),
        "weighted_beside_unweighted": (
            "Shares of the population beside shares of the cases",
            weighted.beside_unweighted(interval),
        ),
        "weighted_response_probabilities": (
            "The probability of each answer in each class, weighted beside unweighted",
            weighted.response_probabilities_beside_unweighted(interval),
        ),
    }


def hypotheses_table(content: ReportContent) -> pd.DataFrame:
    """Return a row per hypothesis, with all its numbers."""
    import pandas as pd

    return pd.DataFrame(
        [
            {
                "claim": claim.words,
                "planned": claim.planned,
                "statement": claim.test.text,
                "posterior_probability": claim.test.posterior_probability,
                "posterior_mcse": claim.test.posterior_mcse,
                "prior_probability": claim.test.prior_probability,
                "prior_mcse": claim.test.prior_mcse,
                "log_bayes_factor": claim.test.log_bayes_factor,
                "log_bayes_factor_mcse": claim.test.log_bayes_factor_mcse,
                "log_bayes_factor_against_complement": (
                    claim.test.log_bayes_factor_against_complement
                ),
                "log_bayes_factor_against_complement_mcse": (
                    claim.test.log_bayes_factor_against_complement_mcse
                ),
                "grade": claim.test.grade,
                "bound": claim.test.bound,
                "true_by_definition": claim.test.true_by_definition,
                "method": claim.test.method,
            }
            for claim in content.claims
        ]
    )


def _file_name(name: str) -> str:
    """Return a name with everything but letters and digits replaced."""
    return "".join(sign if sign.isalnum() else "_" for sign in name)


def _flat(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the frame with its index, where that means something, as columns."""
    if frame.index.name is None and frame.index.nlevels == 1:
        return frame.reset_index(drop=True)
    return frame.reset_index()


def _columns_table(tables: list[FileTable], interval: float) -> FileTable:
    import pandas as pd

    rows: list[Mapping[str, str]] = []
    for table in tables:
        for name in table.frame.columns:
            meaning = column(str(name))
            rows.append(
                {
                    "table": table.name,
                    "column": str(name),
                    "words": meaning.words,
                    "meaning": meaning.gloss.replace(
                        "the interval", f"the {level(interval)} interval"
                    ),
                }
            )
    return FileTable("columns", "What every column of every table means", pd.DataFrame(rows))


def records(frame: pd.DataFrame) -> list[dict[str, object]]:
    """Return the rows of a frame with plain Python values, missing ones as None."""
    cleaned = frame.astype(object).where(frame.notna(), None)
    return [
        {str(key): value.item() if isinstance(value, np.generic) else value for key, value in row}
        for row in (record.items() for record in cleaned.to_dict("records"))
    ]
