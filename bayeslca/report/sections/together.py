"""Which cases go together, whatever the number of classes and whatever they are called."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from bayeslca.assess.together.co_membership import set_name
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
from bayeslca.report.facts import Facts
from bayeslca.report.figures import draw
from bayeslca.report.together_plot import MOST_SHOWN, plot_co_membership
from bayeslca.report.wording import NOTHING, decimal, listed, percent, sentence, whole

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.together.co_membership import CoMembership

ANCHOR, HEADING = "together", "Which cases go together whatever the number of classes"
SIZE = (3.4, 4.1)
"""Inches: a telephone shows it whole."""
TYPICAL = 0.5
"""An answer is given for a set when more of its cases than this gave it."""
MOST_DESCRIBED = 8
"""Sets whose answers are described."""


def together_section(facts: Facts) -> Section | None:
    """Return the section on who is together with whom; None where the study did not ask."""
    together, why_not = facts.content.together, facts.content.together_why_not
    if together is None:
        if not why_not:
            return None
        return Section(ANCHOR, HEADING, (Paragraph(sentence(why_not)),))
    figure = draw(
        "cases-together",
        lambda drawing: plot_co_membership(together, ax=drawing.subplots()),
        size=SIZE,
        caption=(
            "Each row and column is a case, in the order of the sets; the darker a square, the "
            f"more probably its two cases are in one class.{_thinned(together)}"
        ),
        alt=sentence(together.verdict),
    )
    blocks: list[Block] = [
        *([Paragraph(sentence(why_not))] if why_not else []),
        Paragraph(sentence(together.verdict)),
        Picture(figure),
        _table(together),
        Subheading("What the cases of each set answered"),
        Bullets(tuple(_answers(facts, together))),
        Paragraph(
            "Sets are not classes: a class is part of a model with a fixed number of them, a set "
            "is what the cases amount to when that number and the classes' names are left open. "
            "Cases with the same answers are kept together. A set whose cases are together with "
            "low probability is no firm group: its cases share mostly that they fit nowhere else."
        ),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def sets_table(together: CoMembership) -> pd.DataFrame:
    """Return the table of the sets for the files."""
    return together.sets.rename(
        columns={"within": "together_within", "between": "together_between"}
    )


def _thinned(together: CoMembership) -> str:
    n_cases = together.units.n_cases
    if n_cases <= MOST_SHOWN:
        return ""
    return f" Of {whole(n_cases)} cases {MOST_SHOWN} are shown, evenly spaced."


def _table(together: CoMembership) -> PageTable:
    heads = (
        Head("Set", "A is the largest", numeric=False),
        Head("Cases", "how many cases it holds"),
        Head("Together", "mean probability that two of its cases are in one class"),
        Head("With others", "the same of one of its cases and one of another set"),
    )
    rows = tuple(
        (
            str(row["set"]),
            whole(row["cases"]),
            _share(row["within"]),
            _share(row["between"]),
        )
        for row in together.sets.to_dict("records")
    )
    return PageTable("The sets of cases", heads, rows)


def _answers(facts: Facts, together: CoMembership) -> Iterator[tuple[str, str]]:
    """Yield each set with the answers that more than half of its cases gave."""
    for at in range(min(together.partition.n_sets, MOST_DESCRIBED)):
        yield f"Set {set_name(at)}", f"mostly {_typical(facts, together, at)}."


def _share(value: Any) -> str:
    return NOTHING if value != value else percent(float(value))


def _typical(facts: Facts, together: CoMembership, at: int) -> str:
    """Return the answers that most cases of a set gave, item by item."""
    units = together.units
    mine = together.partition.labels == at
    if not facts.content.show_cases and int(units.count[mine].sum()) < 2:
        return NOTHING  # a single case's answers
    found = []
    for j, item in enumerate(together.model.items):
        codes, count = units.pattern[mine, j], units.count[mine]
        answered = codes >= 0
        total = float(count[answered].sum())
        for code, category in enumerate(item.categories):
            share = float(count[codes == code].sum()) / total if total else 0.0
            if share > TYPICAL:
                found.append(f"{item.name} {category} ({decimal(100 * share, 0)} %)")
    return listed(found) or NOTHING
