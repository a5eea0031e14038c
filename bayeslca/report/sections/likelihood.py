"""Maximum likelihood beside the posterior, for readers who ask for it."""

from __future__ import annotations

from dataclasses import fields
from typing import TYPE_CHECKING

from bayeslca.assess.likelihood.criteria_beside import SHOWN
from bayeslca.assess.likelihood.fit_statistics import Criteria
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Section,
    Subheading,
)
from bayeslca.report.facts import Facts
from bayeslca.report.plots import row_name
from bayeslca.report.wording import (
    counted,
    decimal,
    listed_up_to,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.likelihood.criteria_beside import CriteriaBeside
    from bayeslca.assess.likelihood.likelihood_ratio import LikelihoodRatioTest
    from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood
    from bayeslca.report.content import ReportContent

ANCHOR, HEADING = "maximum-likelihood", "What maximum likelihood says"
MOST_NAMED = 8
LEAST_P = 0.001


def likelihood_section(facts: Facts) -> Section | None:
    """Return the section on maximum likelihood; None when it was not asked for."""
    criteria = facts.content.criteria
    if criteria is None:
        return None
    blocks: list[Block] = [
        *([Paragraph(sentence(criteria.agreement))] if criteria.agreement else []),
        Paragraph(
            "Each model was also fitted by maximum likelihood (EM: Dempster, Laird & Rubin 1977), "
            "where the priors play no part. The criteria count parameters: smaller is better."
        ),
        *_refused(criteria),
        *_criteria_table(criteria),
        _fit_table(criteria),
        *_noticed(facts),
        *_tests(facts.content),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def likelihood_tables(content: ReportContent) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the tables for files, by name, each with what it holds."""
    import pandas as pd

    from bayeslca.assess.likelihood.fit_statistics import criteria_table

    criteria = content.criteria
    if criteria is None:
        return {}
    tables = {
        "maximum_likelihood": (
            "Maximum likelihood of each model",
            pd.DataFrame([_record(name, fit) for name, fit in criteria.fits.items()]),
        ),
        "criteria": ("Criteria that count parameters", criteria_table(criteria.fits)),
    }
    tests = content.one_class_fewer
    if tests:
        tables["one_class_fewer"] = (
            "Likelihood ratio tests of one class fewer",
            pd.DataFrame([_test_record(test) for test in tests]),
        )
    return tables


def _record(name: object, fit: MaximumLikelihood) -> dict[str, object]:
    return {
        "model": name,
        "log_likelihood": fit.log_likelihood,
        "n_parameters": fit.n_parameters,
        "df": fit.df,
        "g2": fit.g2,
        "g2_p_value": fit.g2_p_value,
        "x2": fit.x2,
        "x2_p_value": fit.x2_p_value,
        **{field.name: getattr(fit.criteria, field.name) for field in fields(Criteria)},
        "relative_entropy": fit.relative_entropy,
        "reached_best": fit.reached_best,
        "starting_points": fit.starting_points,
        "boundary": ", ".join(fit.boundary),
        "chi_square": fit.chi_square,
    }


def _test_record(test: LikelihoodRatioTest) -> dict[str, object]:
    return {
        "smaller": test.smaller.model.n_classes,
        "larger": test.larger.model.n_classes,
        "statistic": test.statistic,
        "p_value": test.p_value,
        "p_value_mcse": test.p_value_mcse,
        "tables_drawn": test.simulated.size,
        "adjusted_statistic": test.adjusted_statistic,
        "adjusted_p_value": test.adjusted_p_value,
    }


def _refused(criteria: CriteriaBeside) -> list[Block]:
    entries = tuple(
        (sentence(f"{row_name(name)}: no maximum likelihood solution"), sentence(why))
        for name, why in criteria.refused.items()
    )
    return [Bullets(entries)] if entries else []


def _criteria_table(criteria: CriteriaBeside) -> list[Block]:
    """Return the criteria beside predictive accuracy; nothing where there is one model."""
    if len(criteria.table) == 1:
        return []
    rows = tuple(
        (
            row_name(name),
            f"{decimal(row['elpd_diff'])}{' (tied)' if row['tied'] else ''}",
            *(_above(row[key]) for key in SHOWN),
        )
        for name, row in zip(criteria.table.index, criteria.table.to_dict("records"), strict=True)
    )
    heads = (
        Head("Model", "the number of classes, or the study's model", numeric=False),
        Head("Behind the best", "in predictive accuracy, by leave-one-out"),
        *(Head(shown, "above the smallest") for shown in SHOWN.values()),
    )
    notes = (
        "AIC: Akaike 1974; AICc: Hurvich & Tsai 1989; BIC: Schwarz 1978, and with Sclove's "
        "adjustment for sample size, 1987; CAIC: Bozdogan 1987.",
    )
    return [PageTable("Criteria beside predictive accuracy", heads, rows, notes)]


def _above(value: float) -> str:
    return "smallest" if value == 0 else decimal(value)


def _fit_table(criteria: CriteriaBeside) -> PageTable:
    rows = tuple(
        (
            row_name(name),
            decimal(fit.log_likelihood, 2),
            whole(fit.n_parameters),
            decimal(fit.df, 0),
            _with_p(fit.g2, fit.g2_p_value),
            _with_p(fit.x2, fit.x2_p_value),
            decimal(fit.relative_entropy, 2),
            f"{whole(fit.reached_best)} of {whole(fit.starting_points)}",
        )
        for name, fit in criteria.fits.items()
    )
    heads = (
        Head("Model", numeric=False),
        Head("Log likelihood", "at its highest"),
        Head("Free parameters"),
        Head("df", "cells of the cross-table less one in each group, less parameters"),
        Head("G2", "against the cross-table itself (p where chi-square holds)"),
        Head("X2", "Pearson's (p where chi-square holds)"),
        Head("Separation", "1: every case placed surely"),
        Head("Starting points", "that reached the best solution"),
    )
    doubts: dict[str, list[str]] = {}
    for name, fit in criteria.fits.items():
        if fit.chi_square:
            doubts.setdefault(fit.chi_square, []).append(row_name(name))
    notes = tuple(
        sentence(f"{listed_up_to(names, MOST_NAMED)}: no p, as {why}")
        for why, names in doubts.items()
    )
    return PageTable("Fit by maximum likelihood", heads, rows, notes)


def _with_p(value: float, p: float) -> str:
    shown = significant(value, 4)
    if p != p:
        return shown
    return f"{shown} (p {_p(p)})" if p < LEAST_P else f"{shown} (p = {significant(p, 2)})"


def _p(p: float) -> str:
    return f"below {LEAST_P:g}" if p < LEAST_P else decimal(p, 3)


def _noticed(facts: Facts) -> list[Block]:
    """Return what should be known of the solution of the model that the answer rests on."""
    criteria = facts.content.criteria
    name = facts.content.study_row
    if criteria is None:
        return []
    fit = criteria.fits.get(name) if name is not None else None
    if fit is None and len(criteria.fits) == 1:
        fit = next(iter(criteria.fits.values()))
    if fit is None or not fit.findings:
        return []
    entries = tuple((sentence(one.message), sentence(one.remedy)) for one in fit.findings)
    return [Paragraph("Of the model that the answer rests on:"), Bullets(entries)]


def _tests(content: ReportContent) -> list[Block]:
    tests = content.one_class_fewer
    if not tests:
        return []
    rows = tuple(
        (
            f"{whole(test.smaller.model.n_classes)} against "
            f"{counted(test.larger.model.n_classes, 'class', 'classes')}",
            decimal(test.statistic, 2),
            f"{decimal(test.p_value, 3)} ± {significant(test.p_value_mcse, 1)}",
            whole(test.simulated.size) + (" (stopped)" if test.stopped else ""),
            decimal(test.adjusted_statistic, 2),
            _p(test.adjusted_p_value),
        )
        for test in tests
    )
    heads = (
        Head("Test", numeric=False),
        Head("Statistic", "twice the difference in log likelihood"),
        Head("p, bootstrap", "± Monte Carlo error"),
        Head("Tables drawn", "from the smaller model"),
        Head("Adjusted statistic", "Lo, Mendell & Rubin 2001"),
        Head("p, adjusted", "its proof is in doubt: Jeffries 2003"),
    )
    return [
        Subheading("Is one class fewer enough"),
        Paragraph(tests_in_words(tests)),
        PageTable("Likelihood ratio tests of one class fewer", heads, rows),
    ]


def tests_in_words(tests: tuple[LikelihoodRatioTest, ...]) -> str:
    """Return what the tests say: up to where one class more still improves the fit."""
    first = next((test for test in tests if test.p_value >= 0.05), None)
    how = (
        "Tables were drawn from the solution with fewer classes, and both models were fitted to "
        "each (parametric bootstrap: McLachlan 1987). "
    )
    if first is None:
        most = tests[-1].larger.model.n_classes
        return how + (
            f"Every test up to {counted(most, 'class', 'classes')} has p below 0.05: by these "
            "tests one class more improved the fit each time."
        )
    enough = first.smaller.model.n_classes
    return how + (
        f"Taken in turn, the first test with p of 0.05 or more is of "
        f"{counted(enough, 'class', 'classes')}: by these tests "
        f"{'it is' if enough == 1 else 'they are'} enough. A larger p is no proof of that, "
        f"least of all with {counted(first.smaller.n_cases, 'case')}."
    )
