"""How common each class is, in shares and in cases."""

from __future__ import annotations

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Picture, Section
from bayeslca.report.facts import Facts, Share, shares_in_words
from bayeslca.report.figures import draw
from bayeslca.report.plots import plot_prevalence
from bayeslca.report.wording import (
    called,
    counted,
    level,
    listed,
    sentence,
    whole,
)

ANCHOR, HEADING = "prevalence", "How common each class is"
FEW = 5
"""A class with fewer expected cases is named as one with few."""


def prevalence_section(facts: Facts) -> Section:
    """Return the section on prevalences."""
    if len(facts.class_names) == 1:
        text = f"There is one class, so it holds all {counted(facts.n_cases, 'case')}."
        return Section(ANCHOR, HEADING, (Paragraph(text),))
    interval = facts.content.interval
    groups = facts.posterior.model.groups
    n_rows = len(facts.class_names) * (len(groups.levels) if groups else 1)
    figure = draw(
        "prevalence",
        lambda drawing: plot_prevalence(facts.posterior, interval=interval, ax=drawing.subplots()),
        size=(7.0, 1.0 + 0.36 * n_rows),
        caption=(
            f"The share of the cases in each class{' by group' if groups else ''}: a marker at the "
            f"median, a line over the {level(interval)} interval."
        ),
        alt=sentence(shares_in_words(facts.overall, facts.n_cases)),
    )
    blocks: list[Block] = [Paragraph(_in_words(facts)), Picture(figure), _table(facts)]
    return Section(ANCHOR, HEADING, tuple(blocks))


def _in_words(facts: Facts) -> str:
    groups = facts.posterior.model.groups
    among = "among all cases, groups weighted by their sizes, " if groups else ""
    text = sentence(f"{among}{shares_in_words(facts.overall, facts.n_cases)}")
    few = [
        f"{called(share.name)} (about {counted(round(share.median * facts.n_cases), 'case')})"
        for share in facts.overall
        if share.median * facts.n_cases < FEW
    ]
    if few:
        text += (
            f" Few cases are expected in {listed(few)}: what is said of so small a class rests on "
            "very little."
        )
    return text


def _table(facts: Facts) -> PageTable:
    frame = facts.posterior.prevalence(interval=facts.content.interval)
    groups = facts.posterior.model.groups
    units = facts.units
    rows: list[tuple[str, ...]] = []
    for name, overall in zip(facts.class_names, facts.overall, strict=True):
        for row in frame[frame["latent_class"] == name].to_dict("records"):
            size, where = facts.n_cases, []
            if groups:
                where = [str(row["group"])]
                at = groups.levels.index(row["group"])
                size = int(units.count[units.group == at].sum())
            share = Share(name, row["median"], row["lower"], row["upper"])
            rows.append(_row(share, where, size))
        if groups:
            rows.append(_row(overall, ["overall"], facts.n_cases))
    heads = (
        Head("Class", "the class that the row is about", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if groups else []),
        Head("Share", f"of the cases, median ({level(facts.content.interval)} interval)"),
        Head("In cases", "the share times the cases observed"),
        Head("Of", "cases observed with at least one answer"),
    )
    return PageTable("The share of the cases in each class", heads, tuple(rows))


def _row(share: Share, where: list[str], size: int) -> tuple[str, ...]:
    low, high = whole(share.lower * size), whole(share.upper * size)
    cases = f"{whole(share.median * size)} ({low} to {high})"
    return (called(share.name), *where, share.text, cases, whole(size))
