"""Cases that stand out: surprising answers, and cases that the prevalences rest on."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bayeslca.assess.left_out.influence_words import influential, records, rows_in_words
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
)
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.influence_plot import plot_influence
from bayeslca.report.wording import called, decimal, listed, sentence, whole

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.left_out.influence import Influence
    from bayeslca.report.content import ReportContent

ANCHOR, HEADING = "influence", "Cases that stand out"
SHOWN = 10


def influence_section(facts: Facts) -> Section | None:
    """Return the section on single cases; None when it was not asked for."""
    found = facts.content.influence
    if found is None:
        return None
    figure = draw(
        "influence",
        lambda drawing: plot_influence(found, ax=drawing.subplots()),
        size=(WIDTH, 3.4),
        caption=(
            "Each marker is a pattern of answers, larger where more cases gave it. To the left: "
            "answers that the model finds improbable. High: leaving out one such case moves a "
            "prevalence." + (" Orange squares: cases that stand out." if found.findings else "")
        ),
        alt=sentence(found.verdict),
    )
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in found.findings)
    blocks: list[Block] = [
        Paragraph(sentence(found.verdict)),
        *([Bullets(noticed)] if noticed else []),
        Paragraph(_how(found)),
        Picture(figure),
        _table(facts, found),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def influence_in_words(found: Influence) -> str:
    """Return the answer to a reviewer who asks for outliers."""
    return sentence(found.verdict)


def _how(found: Influence) -> str:
    refits = found.loo.loo.n_refitted
    how = "by importance sampling" + (
        f", and by {whole(refits)} refit{'s' if refits > 1 else ''} where that is not reliable"
        if refits
        else ""
    )
    return (
        f"Each case was left out in turn ({how}). Its answers are compared with those of new cases "
        "of its group that answered the same items; as the lowest of many cases is low by chance, "
        f"it is judged by the lowest of each of {whole(found.replicates)} replicates of the data. "
        "An improbable case is not a wrong one, and no case was removed."
    )


def _table(facts: Facts, found: Influence) -> PageTable:
    rows = records(found.table)
    lowest = rows[:SHOWN]
    also = [row for row in rows[SHOWN:] if influential(row)][:SHOWN]
    show = facts.content.show_cases
    names = facts.class_names
    heads = (
        Head("Cases", "their names in the data" if show else "their rows in the data", False),
        *([Head("Answers", "in the order of the items", False)] if show else []),
        Head("Number", "cases that gave these answers"),
        Head("Log probability", "of the answers, given all other cases"),
        Head("p", "a new case has answers as improbable"),
        Head("Replicates", "share that hold a case as improbable"),
        *(
            Head(
                f"Change of {called(name)}",
                "prevalence without the case, in points (in posterior sd)",
            )
            for name in names
        ),
        Head("How", "weights: importance sampling; refit: sampled without it", numeric=False),
    )
    cells = tuple(_cells(facts, row) for row in (*lowest, *also))
    notes = ("Least probable first." + (" Then cases that move a prevalence most." * bool(also)),)
    return PageTable("Cases by how improbable their answers are", heads, cells, notes)


def _cells(facts: Facts, row: dict[str, Any]) -> tuple[str, ...]:
    show = facts.content.show_cases
    how = "refit" if row["refitted"] else "weights"
    return (
        _names(facts, row) if show else rows_in_words(row),
        *([_answers(facts, row)] if show else []),
        whole(row["count"]),
        decimal(row["log_density"], 1),
        decimal(row["p_new_case"], 3),
        f"{100 * row['p_replicate']:.0f} %",
        *(
            f"{_signed(row[f'change_{name}'])} ({_signed(row[f'sd_{name}'], 2)})"
            for name in facts.class_names
        ),
        how if row["reliable"] else f"{how}, not reliable",
    )


def _names(facts: Facts, row: dict[str, Any]) -> str:
    at = [int(one) - 1 for one in str(row["rows"]).split(", ")]
    names = [str(facts.content.responses.row_names[r]) for r in at[:SHOWN]]
    return listed(names) + (", ..." if len(at) > SHOWN else "")


def _answers(facts: Facts, row: dict[str, Any]) -> str:
    given = (row[item.name] for item in facts.content.responses.items)
    return ", ".join("–" if answer is None else str(answer) for answer in given)


def _signed(value: float, places: int = 1) -> str:
    text = decimal(abs(value), places)
    if float(text.replace(",", "")) == 0.0:
        return text
    return f"{'+' if value > 0 else '−'}{text}"


def influence_tables(content: ReportContent) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the table of influence for the files; single cases' answers only where allowed."""
    found = content.influence
    if found is None:
        return {}
    frame = found.table
    if not content.show_cases:
        frame = frame.drop(columns=[item.name for item in content.responses.items])
    return {"influence": ("How improbable each case is, and what rests on it", frame)}
