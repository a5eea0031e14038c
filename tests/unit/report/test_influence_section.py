"""Cases that stand out, on the page: words, plot, table, and whose answers are not shown."""

from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace
from typing import Any

import pandas as pd
import pytest
from matplotlib.figure import Figure as Drawing

from bayeslca.assess.left_out.influence import Influence
from bayeslca.assess.left_out.influence_words import (
    influence_findings,
    influential,
    verdict_in_words,
)
from bayeslca.report.blocks import Bullets, PageTable, Paragraph, Picture
from bayeslca.report.columns import column
from bayeslca.report.facts import Facts
from bayeslca.report.influence_plot import plot_influence
from bayeslca.report.sections.influence import influence_section, influence_tables
from bayeslca.report.sections.left_out import left_out_blocks, left_out_in_words


@pytest.fixture(scope="module")
def found(small: Any) -> Influence:
    """Return the influence of a made-up posterior, with one pattern made to stand out."""
    real = small.influence(exact=False)
    table = real.table.copy()
    first = small.model.class_names[0]
    table.loc[0, ["p_replicate", "largest", "largest_mcse"]] = [0.004, -0.64, 0.05]
    table.loc[0, [f"change_{first}", f"sd_{first}"]] = [-3.2, -0.64]
    names = small.model.class_names
    return replace(
        real,
        table=table,
        findings=influence_findings(table, names),
        verdict=verdict_in_words(table, names, real.replicates, ""),
    )


def test_words_name_what_moves_and_by_how_much(found: Influence) -> None:
    row = found.table.iloc[0]
    name = found.class_names[0]
    assert "fewer than 1 % of" in found.verdict
    assert f"the prevalence of {name} down by 3.2 points, 0.6 of its posterior sd" in found.verdict
    kinds = [finding.kind for finding in found.findings]
    assert kinds == ["surprising_case", "influential_case"]
    assert all(row["rows"] in finding.message for finding in found.findings)
    quiet = found.table.assign(p_replicate=0.5, largest=0.1, largest_mcse=0.0, reliable=False)
    text = verdict_in_words(quiet, found.class_names, 1000, "No pattern was refitted: NUTS.")
    assert "nothing is unusual" in text
    assert "No single case moves" in text
    assert "cases are not reliable. No pattern was refitted: NUTS." in text
    assert influence_findings(quiet, found.class_names) == ()


@pytest.mark.parametrize(
    ("largest", "mcse", "named"),
    [(0.6, 0.1, True), (-0.6, 0.1, True), (0.6, 0.35, False), (0.45, 0.0, False)],
)
def test_a_change_within_simulation_error_is_not_named(
    largest: float, mcse: float, named: bool
) -> None:
    assert influential({"largest": largest, "largest_mcse": mcse}) == named


def test_single_cases_are_shown_by_row_unless_the_study_asks(
    found: Influence, small: Any, made: Any
) -> None:
    hidden = influence_section(Facts(made.content(small, influence=found)))
    assert hidden is not None
    assert [type(block) for block in hidden.blocks] == [
        Paragraph, Bullets, Paragraph, Picture, PageTable
    ]  # fmt: skip
    table = hidden.blocks[-1]
    assert isinstance(table, PageTable)
    assert "Answers" not in [head.words for head in table.heads]
    assert table.rows[0][0].startswith("row")
    names = small.responses.row_names
    assert not any(name in cell for name in names for row in table.rows for cell in row)
    files = influence_tables(made.content(small, influence=found))["influence"][1]
    assert not {item.name for item in small.model.items} & set(files.columns)
    assert all(column(str(name)).gloss for name in files.columns)

    shown = influence_section(Facts(made.content(small, influence=found, show_cases=True)))
    assert shown is not None
    table = shown.blocks[-1]
    assert isinstance(table, PageTable)
    first = int(str(found.table.loc[0, "rows"]).split(", ")[0]) - 1
    assert names[first] in table.rows[0][0]
    assert "yes" in table.rows[0][1] or "no" in table.rows[0][1]
    assert influence_section(Facts(made.content(small))) is None


def test_plot_marks_what_stands_out_otherwise_than_by_colour_alone(found: Influence) -> None:
    ax = plot_influence(found, ax=Drawing().subplots())
    assert [label.get_label() for label in ax.collections] == [
        "Patterns", "Patterns that stand out"
    ]  # fmt: skip
    usual, odd = (len(one.get_offsets()) for one in ax.collections)
    assert (usual, odd) == (len(found.table) - 1, 1)
    row = str(found.table.loc[0, "rows"]).split(", ")[0]
    assert any(text.get_text().startswith(f"row {row}") for text in ax.texts)


def test_the_page_says_how_cases_were_left_out(made: Any) -> None:
    comparison = made.comparison(range(1, 4))
    loo = {n: SimpleNamespace(refitted=None) for n in (1, 2, 3)}
    some = replace(comparison, table=comparison.table.assign(refitted=[0, 3, 1]), loo=loo)
    text = left_out_in_words(some)
    assert "3 patterns were refitted with 2 classes; 1 pattern was refitted with 3 classes." in text
    none = replace(comparison, table=comparison.table.assign(refitted=0), loo=loo)
    assert "No pattern was refitted." in left_out_in_words(none)
    folds = SimpleNamespace(
        folds=10,
        verdict="By 10 folds of cases, two classes predicted best.",
        no_refit={"own": "NUTS alone can sample it"},
        table=pd.DataFrame(
            {"elpd": -40.0, "elpd_se": 2.0, "elpd_mcse": 0.05, "elpd_diff": [-3.0, 0.0],
             "elpd_diff_se": [1.0, 0.0], "reliable": [True, False]},
            index=pd.Index([1, 2], name="classes"),
        ),
    )  # fmt: skip
    how, words, table = left_out_blocks(replace(none, folds=folds))
    assert isinstance(how, Paragraph)
    assert isinstance(words, Paragraph)
    assert isinstance(table, PageTable)
    assert "two classes predicted best" in words.text
    assert [row[-1] for row in table.rows] == ["yes", "no"]
    assert "NUTS alone can sample it" in table.notes[0]
