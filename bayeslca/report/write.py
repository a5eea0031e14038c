"""The one entry: content in, a folder with the page, tables, figures and a workbook out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from bayeslca.report.blocks import Picture, Section
from bayeslca.report.content import ReportContent, WrittenReport
from bayeslca.report.facts import Facts
from bayeslca.report.figures import Figure
from bayeslca.report.html import render_page
from bayeslca.report.sections.answer import answer_section, headline, is_to_be_trusted
from bayeslca.report.sections.assumptions import assumptions_section
from bayeslca.report.sections.class_counts import class_counts_section
from bayeslca.report.sections.classes import classes_section
from bayeslca.report.sections.design import design_section, marked
from bayeslca.report.sections.fit import fit_section
from bayeslca.report.sections.groups import groups_section
from bayeslca.report.sections.influence import influence_section
from bayeslca.report.sections.joint_answers import joint_answers_section
from bayeslca.report.sections.likelihood import likelihood_section
from bayeslca.report.sections.limits import limits_section
from bayeslca.report.sections.membership import membership_section
from bayeslca.report.sections.methods import methods_section
from bayeslca.report.sections.outcomes import outcomes_section
from bayeslca.report.sections.predictors import predictors_section
from bayeslca.report.sections.prevalence import prevalence_section
from bayeslca.report.sections.reproduce import reproduce_section, software_versions
from bayeslca.report.sections.reviewer import reviewer_section
from bayeslca.report.sections.sampling import sampling_section
from bayeslca.report.sections.sensitivity import sensitivity_section
from bayeslca.report.sections.theory import theory_section
from bayeslca.report.sections.together import together_section
from bayeslca.report.sections.units import units_section
from bayeslca.report.tables import FileTable, file_tables
from bayeslca.report.wording import sentence
from bayeslca.report.workbook import write_workbook

if TYPE_CHECKING:
    import pandas as pd


def write_report(content: ReportContent, folder: Path) -> WrittenReport:
    """Write a report into a folder.

    Parameters
    ----------
    content : ReportContent
        What the report is made from.
    folder : Path
        Made if it is not there. Written are ``report.html``, ``tables.xlsx``,
        ``membership_of_patterns.csv`` and the folders ``tables`` and ``figures``.

    Returns
    -------
    WrittenReport
        Where everything stands, and the sentence that answers the question.
    """
    facts = Facts(content)
    versions = content.versions or software_versions(content.posterior)
    sections = report_sections(facts, versions)
    trusted = is_to_be_trusted(facts)
    folder.mkdir(parents=True, exist_ok=True)
    page = folder / "report.html"
    page.write_text(
        render_page(title=content.title, sections=sections, versions=versions, trustworthy=trusted),
        encoding="utf-8",
        newline="\n",
    )
    tables = file_tables(content, facts.prior_predictive)
    workbook = folder / "tables.xlsx"
    warning = "" if trusted else "Not to be trusted yet: see the sheet read me."
    write_workbook(workbook, tables, _notes(facts), warning=warning)
    _write_csv(
        content.posterior.membership(rows="patterns", interval=content.interval),
        folder / "membership_of_patterns.csv",
    )
    return WrittenReport(
        page=page,
        workbook=workbook,
        tables=_write_tables(tables, folder / "tables"),
        figures=_write_figures(_figures(sections), folder / "figures"),
        headline=headline(facts),
    )


def report_sections(facts: Facts, versions: Mapping[str, str]) -> tuple[Section, ...]:
    """Return the sections of the page in their order."""
    sections = (
        answer_section(facts),
        design_section(facts),
        classes_section(facts),
        joint_answers_section(facts),
        prevalence_section(facts),
        class_counts_section(facts),
        together_section(facts),
        units_section(facts),
        groups_section(facts),
        fit_section(facts),
        influence_section(facts),
        likelihood_section(facts),
        theory_section(facts),
        membership_section(facts),
        predictors_section(facts),
        outcomes_section(facts),
        assumptions_section(facts),
        sensitivity_section(facts),
        sampling_section(facts),
        reviewer_section(facts, versions),
        limits_section(facts),
        methods_section(facts, versions),
        reproduce_section(facts, versions),
    )
    return tuple(marked(section, facts) for section in sections if section is not None)


def _notes(facts: Facts) -> list[str]:
    return [
        facts.content.title,
        headline(facts),
        sentence(facts.diagnostics.verdict),
        "Row 1 of each sheet holds the heads in words, row 2 the columns' names as in the CSV "
        "files; the sheet “columns” explains every column.",
    ]


def _figures(sections: Sequence[Section]) -> Iterator[Figure]:
    for section in sections:
        for block in section.blocks:
            if isinstance(block, Picture):
                yield block.figure


def _write_figures(figures: Iterator[Figure], folder: Path) -> dict[str, Path]:
    folder.mkdir(exist_ok=True)
    written = {}
    for figure in figures:
        for ending, content in (("svg", figure.svg), ("png", figure.png)):
            path = folder / f"{figure.name}.{ending}"
            path.write_bytes(content)
            written[path.name] = path
    return written


def _write_tables(tables: Sequence[FileTable], folder: Path) -> dict[str, Path]:
    folder.mkdir(exist_ok=True)
    written = {}
    for table in tables:
        written[table.name] = folder / f"{table.name}.csv"
        _write_csv(table.frame, written[table.name])
    return written


def _write_csv(frame: pd.DataFrame, path: Path) -> None:
    named = frame.index.name is not None or frame.index.nlevels > 1
    frame.to_csv(path, index=named, lineterminator="\n")
