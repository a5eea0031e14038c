"""How many classes the data support: comparison of models, ties called ties."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bayeslca.assess.class_count.counts_under_other_priors import AS_STATED
from bayeslca.assess.comparison.words import verdict_in_words
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
    Subheading,
)
from bayeslca.report.evidence_plot import plot_count_probabilities
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.plots import plot_class_counts, row_name
from bayeslca.report.sections.left_out import left_out_blocks
from bayeslca.report.wording import (
    NOTHING,
    counted_in_words,
    decimal,
    listed,
    percent,
    sentence,
)

if TYPE_CHECKING:
    from bayeslca.assess.comparison.compare import Comparison

ANCHOR, HEADING = "class-counts", "How many classes the data support"


def class_counts_section(facts: Facts) -> Section:
    """Return the section on the number of classes."""
    comparison = facts.content.comparison
    if comparison is None:
        text = "Different numbers of classes were not compared in this study."
        return Section(ANCHOR, HEADING, (Paragraph(text),))
    table, study_row = comparison.table, facts.content.study_row
    figure = draw(
        "class-counts",
        lambda drawing: plot_class_counts(comparison, study_row=study_row, ax=drawing.subplots()),
        size=(WIDTH, 1.2 + 0.34 * len(table)),
        caption=(
            "How far each model predicts behind the best, with two standard errors of the "
            "difference. Filled: tied with the best. Square: the model the answer rests on. An "
            "arrow stands for a model too far behind to be shown to scale."
        ),
        alt=sentence(verdict_in_words(table, comparison.best)),
    )
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in comparison.findings)
    blocks: list[Block] = [
        Paragraph(_in_words(facts)),
        *_evidence_paragraph(comparison),
        *([Bullets(noticed)] if noticed else []),
        *_evidence_figure(comparison),
        Picture(figure),
        _table(facts),
        *left_out_blocks(comparison),
        *_about_evidence(comparison),
        *_under_other_priors(facts),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def tie_in_words(facts: Facts) -> str:
    """Return which models are tied: ``2 classes and 3 classes``."""
    return listed([row_name(name) for name in facts.tied])


def _evidence_paragraph(comparison: Comparison) -> list[Block]:
    """Return what the evidence says, where it is part of the verdict."""
    counts = comparison.class_counts
    if counts is None or not comparison.verdict.endswith(counts.verdict):
        return []
    return [Paragraph(sentence(counts.verdict))]


def _evidence_figure(comparison: Comparison) -> list[Block]:
    """Return the probability of each number of classes, where it could be found."""
    counts = comparison.class_counts
    if counts is None or counts.table["probability"].notna().sum() < 2:
        return []
    figure = draw(
        "class-count-probabilities",
        lambda drawing: plot_count_probabilities(counts, ax=drawing.subplots()),
        size=(WIDTH, 1.2 + 0.34 * len(counts.table)),
        caption=(
            "How probable each number of classes is, given the answers. The thin lines are two "
            "errors of the simulation, not of the answers."
        ),
        alt=sentence(counts.verdict),
    )
    return [Picture(figure)]


def _about_evidence(comparison: Comparison) -> list[Block]:
    if "log_evidence" not in comparison.table:
        return []
    text = (
        "The evidence is the probability of all answers under a model, averaged over its priors; "
        "its logarithm is shown. It weighs a model by its priors as well as by its fit, so that "
        "other priors can speak for fewer classes or for more; predictive accuracy depends on them "
        "far less. A "
        "number of classes counts classes that hold no case of this sample, too: a probable "
        "larger number need not mean that more kinds were seen. Neither figure tells whether the "
        "classes are kinds that exist outside the model."
    )
    return [Paragraph(text)]


def _under_other_priors(facts: Facts) -> list[Block]:
    """Return the numbers of classes weighed again, where the study asked for it."""
    found = facts.content.counts_under_other_priors
    if found is None:
        return []
    numbers = found.by_prior[AS_STATED].table.index
    heads = (
        Head("Priors", "strength: all prior counts times 1/2 or 2", numeric=False),
        *(Head(row_name(int(k))) for k in numbers),
    )
    rows = tuple(
        (name, *(percent(float(p)) for p in one.table["probability"]))
        for name, one in found.by_prior.items()
    )
    return [
        Subheading("The same under other priors"),
        Paragraph(sentence(found.verdict)),
        PageTable("Probability of each number of classes, prior by prior", heads, rows),
    ]


def _in_words(facts: Facts) -> str:
    comparison = facts.content.comparison
    if comparison is None:
        return ""
    counts = comparison.class_counts
    said = comparison.verdict if counts is None else comparison.verdict.removesuffix(counts.verdict)
    text = sentence(said.strip())
    if facts.content.chosen_because:
        chosen = counted_in_words(len(facts.class_names), "class", "classes")
        text += " " + sentence(f"the study has {chosen} because {facts.content.chosen_because}")
    if facts.outside_tie:
        text += (
            " The study's own model lies outside the tie: the data alone would not have led to it."
        )
    return text


def _table(facts: Facts) -> PageTable:
    comparison = facts.content.comparison
    if comparison is None:
        msg = "there is no comparison to show"
        raise ValueError(msg)
    rows = tuple(
        _row(facts, name, record)
        for name, record in zip(
            comparison.table.index, comparison.table.to_dict("records"), strict=True
        )
    )
    heads: tuple[Head, ...] = (
        Head("Model", "the number of classes, or the study's model", numeric=False),
        Head("Behind the best", "difference in predictive accuracy ± its standard error"),
        Head("Tied", "too close to the best to tell", numeric=False),
        Head("Predictive accuracy", "elpd by leave-one-out ± its standard error; higher is better"),
        Head("Effective parameters", "flexibility that the answers used up"),
        Head("Weight", "in the best mixture of the models' predictions"),
        Head("Smallest class", "its share of the cases"),
        Head("Separation", "1: every case placed surely; 0: by chance"),
        Head("Sampling", "is it to be trusted", numeric=False),
    )
    if "log_evidence" in comparison.table:
        heads = (
            *heads,
            Head("Log evidence", "log probability of all answers ± simulation error"),
            Head("Probability", "given the answers, among the rows whose evidence is reliable"),
        )
    notes = ("Square brackets: the model the answer rests on.",)
    return PageTable("Models with different numbers of classes", heads, rows, notes)


def _row(facts: Facts, name: object, row: dict[Any, Any]) -> tuple[str, ...]:
    mine = name == facts.content.study_row
    text = row_name(name)
    separation = row["separation"]
    return (
        f"[{text}]" if mine else text,
        f"{decimal(row['elpd_diff'])} ± {decimal(row['elpd_diff_se'])}",
        "yes" if row["tied"] else "no",
        f"{decimal(row['elpd'])} ± {decimal(row['elpd_se'])}",
        decimal(row["p_loo"]),
        decimal(row["weight"], 2),
        percent(row["smallest_class"]),
        NOTHING if separation is None or separation != separation else decimal(separation, 2),
        "yes" if row["trustworthy"] else "no",
        *_evidence_cells(row),
    )


def _evidence_cells(row: dict[Any, Any]) -> tuple[str, ...]:
    if "log_evidence" not in row:
        return ()
    value, error, chance = row["log_evidence"], row["log_evidence_mcse"], row["probability"]
    if value != value:
        return "not reliable", NOTHING
    shown = decimal(value, 2) if error == 0 else f"{decimal(value, 2)} ± {decimal(error, 2)}"
    return shown, percent(chance) if chance == chance else NOTHING
