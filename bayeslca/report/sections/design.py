"""What the sample's design changes: weighted figures beside unweighted ones."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior
from bayeslca.relate.weighted.words import posterior_in_words
from bayeslca.report.blocks import Block, Bullets, Head, PageTable, Paragraph, Section
from bayeslca.report.facts import Facts
from bayeslca.report.references import REFERENCES
from bayeslca.report.wording import (
    NOTHING,
    called,
    counted,
    decimal,
    level,
    percent_interval,
    percent_value,
    sentence,
    whole,
)

ANCHOR, HEADING = "design", "What the sample design changes"
PAPERS = (
    "Gunawan et al. 2020",
    "Dong, Elliott & Raghunathan 2014",
    "Rao & Wu 1988",
    "Binder 1983",
)
UNWEIGHTED = {
    "classes": "the probabilities are those that fit the cases as they are",
    "prevalence": "the shares are of the cases as they are, not of the population",
    "class-counts": "predictive accuracy, WAIC, leave-one-out and evidence",
    "groups": "predictive accuracy",
    "fit": "it is checked whether the model reproduces the cases as they are",
    "maximum-likelihood": "these estimates and criteria",
    "theory": "probabilities of hypotheses and quantities are of the cases as they are",
    "membership": "it is the cases that are placed",
    "predictors": "odds ratios and class probabilities are of the cases as they are",
    "outcomes": "class means are of the cases as they are",
}
"""What of a section takes the cases as they are, by its anchor."""
RELATED = ("predictors", "outcomes")
"""Sections on other variables: the design is no part of them in any form."""
NOT_MARKED = frozenset(
    {"answer", "design", "assumptions", "sampling", "reviewer", "limits", "methods", "reproduce"}
)
"""Sections that say themselves what they speak of, or hold no estimates."""


def marked(section: Section, facts: Facts) -> Section:
    """Say at the head of a section that it is unweighted, where the sample has a design."""
    if facts.content.weighted is None or section.anchor in NOT_MARKED:
        return section
    what = UNWEIGHTED.get(section.anchor, "the figures are of the cases as they are")
    text = f"Unweighted: {what}. "
    text += (
        "No weighted figures were computed for this; where cases were drawn in clusters, its "
        "intervals are too narrow."
        if section.anchor in RELATED
        else f"Weighted figures stand under “{HEADING}”."
    )
    return replace(section, blocks=(Paragraph(text), *section.blocks))


def design_section(facts: Facts) -> Section | None:
    """Return the section on the sample's design; None where there is none."""
    weighted = facts.content.weighted
    if weighted is None:
        return None
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in weighted.findings)
    blocks: list[Block] = [
        Paragraph(_design_in_words(facts, weighted)),
        Paragraph(_which_is_shown(facts)),
        *([Bullets(noticed)] if noticed else []),
        *([_shares(facts, weighted)] if len(facts.class_names) > 1 else []),
        Paragraph(_answers_in_words(facts, weighted)),
        _answers(facts, weighted),
        Paragraph(_how(weighted)),
        Bullets(tuple((REFERENCES[name], "") for name in PAPERS)),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def moved_in_words(facts: Facts) -> str:
    """Say how far weighted and unweighted shares are apart."""
    weighted = facts.content.weighted
    if weighted is None and facts.content.responses.design is not None:
        return (
            "All of this is unweighted, though the answers came with weights, clusters or strata: "
            "it describes the cases, not the population."
        )
    if weighted is None or len(facts.class_names) == 1:
        return ""
    return posterior_in_words(weighted, facts.content.interval).replace("%", " %")


def method_in_words(facts: Facts) -> str:
    """Return a sentence for the methods section; empty where the sample has no design."""
    weighted = facts.content.weighted
    if weighted is None:
        return ""
    return (
        f"For the population, {counted(weighted.n_pseudo_samples, 'pseudo-sample')} that undo the "
        "weights and vary as clusters within strata do were each fitted and their draws pooled "
        f"({weighted.design.in_words()}; after Gunawan et al. 2020 and Dong, Elliott & "
        "Raghunathan 2014); model comparison and checks of fit are unweighted."
    )


def _design_in_words(facts: Facts, weighted: WeightedPosterior) -> str:
    design = weighted.design
    text = sentence(design.in_words().removeprefix("sample design: "))
    if design.is_weighted:
        text += (
            f" By their weights alone, {counted(facts.n_cases, 'case')} are worth about "
            f"{whole(design.effective_size)} drawn with equal chances."
        )
    return f"{text} {moved_in_words(facts)}".strip()


def _which_is_shown(facts: Facts) -> str:
    return (
        "The answer at the head of this report and this section are weighted: they speak of the "
        "population that the cases were drawn from, as far as the weights stand for it. All other "
        "sections take the cases as they are, and say so. Interpretation of the classes, their "
        "number and their fit therefore rests on the cases; how common they are, on the weights."
    )


def _shares(facts: Facts, weighted: WeightedPosterior) -> PageTable:
    interval = facts.content.interval
    grouped = facts.posterior.model.groups is not None
    rows = []
    for row in weighted.beside_unweighted(interval).to_dict("records"):
        where = [str(row["group"])] if grouped else []
        rows.append(
            (
                called(str(row["latent_class"])),
                *where,
                _interval(row, "weighted"),
                _interval(row, "unweighted"),
                "yes" if row["differs"] else "no",
                decimal(row["design_effect"]),
                _estimate(row),
            )
        )
    heads = (
        Head("Class", "the class that the row is about", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if grouped else []),
        Head("Weighted", f"share of the population, median ({level(interval)} interval)"),
        Head("Unweighted", "share of the cases as they are"),
        Head("Differs", "unweighted median outside the weighted interval", numeric=False),
        Head("Design effect", "variance over that of as many cases drawn at random"),
        Head("Maximum likelihood", "weighted, ± linearised standard error"),
    )
    return PageTable("Shares of the population beside shares of the cases", heads, tuple(rows))


def _answers_in_words(facts: Facts, weighted: WeightedPosterior) -> str:
    frame = weighted.response_probabilities_beside_unweighted(facts.content.interval)
    moved = frame[frame["differs"]]
    if moved.empty:
        return (
            "No probability of an answer within a class lies outside its weighted interval: the "
            "classes look alike, weighted or not."
        )
    named = [
        f"{row['item']} = {row['category']} in {called(str(row['latent_class']))}"
        for row in moved.to_dict("records")
    ]
    shown = "; ".join(named[:6]) + (f"; and {len(named) - 6} more" if len(named) > 6 else "")
    return (
        f"Of {counted(len(frame), 'probability', 'probabilities')} of answers, "
        f"{whole(len(moved))} lie outside their weighted interval: {shown}. A class may then look "
        "different in the population than among the cases."
    )


def _answers(facts: Facts, weighted: WeightedPosterior) -> PageTable:
    interval = facts.content.interval
    frame = weighted.response_probabilities_beside_unweighted(interval)
    grouped = "group" in frame
    rows = tuple(
        (
            called(str(row["latent_class"])),
            *([str(row["group"])] if grouped else []),
            f"{row['item']} = {row['category']}",
            _interval(row, "weighted"),
            _interval(row, "unweighted"),
            "yes" if row["differs"] else "no",
        )
        for row in frame.to_dict("records")
    )
    heads = (
        Head("Class", "the class that the row is about", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if grouped else []),
        Head("Answer", "item and answer", numeric=False),
        Head("Weighted", f"median ({level(interval)} interval)"),
        Head("Unweighted", "of the cases as they are"),
        Head("Differs", "unweighted median outside the weighted interval", numeric=False),
    )
    caption = "The probability of each answer in each class, weighted beside unweighted"
    return PageTable(caption, heads, rows, folded=True)


def _how(weighted: WeightedPosterior) -> str:
    return (
        f"{counted(weighted.n_pseudo_samples, 'pseudo-sample')} of the sample's size undo the "
        "weights; they differ by as much as drawing other clusters within the strata would move "
        "the figures, less what the model's own uncertainty covers. Each was fitted, and the "
        "draws pooled. Clusters are taken as drawn with replacement: where most of a stratum's "
        "clusters are in the sample, intervals are too wide. Weights are taken as given: that "
        "they were estimated is not counted."
    )


def _interval(row: Mapping[Any, Any], name: str) -> str:
    return percent_interval(row[name], row[f"{name}_lower"], row[f"{name}_upper"])


def _estimate(row: Mapping[Any, Any]) -> str:
    if row["estimate"] != row["estimate"]:
        return NOTHING
    if row["standard_error"] != row["standard_error"]:
        return f"{percent_value(row['estimate'])} %"
    return f"{percent_value(row['estimate'])} ± {percent_value(row['standard_error'])} %"
