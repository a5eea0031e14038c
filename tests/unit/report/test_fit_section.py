"""Does the model fit, on the page: the section, its pictures and files, and what points to it."""

from __future__ import annotations

import re
from html import unescape
from pathlib import Path
from typing import Any

import numpy as np
import openpyxl
import pandas as pd
import pytest
from matplotlib.figure import Figure as Drawing

from bayeslca.report import fit_plots
from bayeslca.report.blocks import PageTable, Picture
from bayeslca.report.content import WrittenReport
from bayeslca.report.facts import Facts
from bayeslca.report.references import cited_in
from bayeslca.report.sections.fit import fit_section
from bayeslca.report.sections.limits import limits_section
from bayeslca.report.sections.methods import methods_paragraph
from bayeslca.report.write import write_report


def text_of(page: str) -> str:
    page = re.sub(r"<(style|svg).*?</\1>", " ", page, flags=re.S)
    return " ".join(unescape(re.sub(r"<[^>]+>", " ", page)).replace("\u00a0", " ").split())


@pytest.fixture(scope="module")
def checked(small: Any, made: Any) -> Any:
    """Content with checks that name a pair, which the first two answers were made to be."""
    checks = small.predictive_checks(replicates=200, calibrate=0)
    return made.content(small, checks=checks, checks_by_count={2: checks, 3: checks})


@pytest.fixture(scope="module")
def written(checked: Any, tmp_path_factory: pytest.TempPathFactory) -> WrittenReport:
    return write_report(checked, tmp_path_factory.mktemp("fit"))


@pytest.fixture(scope="module")
def page(written: WrittenReport) -> str:
    return written.page.read_text(encoding="utf-8")


def test_the_section_stands_between_class_counts_and_membership(page: str) -> None:
    headings = [unescape(h) for h in re.findall(r"<h2[^>]*>(.*?)</h2>", page)]
    at = headings.index("Does the model fit")
    assert headings[at - 1] == "How many classes the data support"
    assert headings[at + 1] == "How surely cases are placed"


def test_the_section_says_verdict_and_method(checked: Any, page: str) -> None:
    text = text_of(page)
    assert checked.checks.verdict in text
    assert "200 replicates of the data were drawn" in text
    assert "Pairs of items the model misses" in text
    assert "The same checks with other numbers of classes" in text
    assert "nan" not in text
    assert "p 0.000" not in text


def test_reviewers_questions_are_answered_and_lead_there(checked: Any, page: str) -> None:
    for question in (
        "Does the model reproduce the answers that were seen?",
        "Are the items independent within a class?",
    ):
        (entry,) = re.findall(rf"<div>\s*<dt>{re.escape(question)}</dt>.*?</div>", page, re.S)
        assert 'href="#fit"' in entry
    text = text_of(page)
    for words in ("response patterns, G2 ", "pairs of items ", "sum scores "):
        assert words in text


def test_without_checks_the_questions_stay_open(content: Any) -> None:
    assert fit_section(Facts(content)) is None
    (bullets,) = limits_section(Facts(content)).blocks
    assert any("not checked" in term for term, _ in bullets.entries)  # type: ignore[union-attr]


def test_limits_do_not_call_it_unchecked(page: str) -> None:
    assert "Independence within a class was assumed, not checked" not in text_of(page)


def test_tables_and_columns_are_in_files_and_workbook(checked: Any, written: WrittenReport) -> None:
    names = {"fit_checks", "fit_pairs", "fit_items", "fit_sum_scores"}
    assert names <= set(written.tables)
    assert names <= set(openpyxl.load_workbook(written.workbook).sheetnames)
    columns = pd.read_csv(written.tables["columns"]).fillna("")
    for name in names:
        frame = pd.read_csv(written.tables[name])
        mine = columns[columns["table"] == name].set_index("column")
        assert list(mine.index) == list(frame.columns)
        assert (mine["meaning"] != "").all()
    pairs = pd.read_csv(written.tables["fit_pairs"])
    np.testing.assert_allclose(pairs["pair_residual"], checked.checks.pairs["pair_residual"])
    assert {"item-pairs.png", "sum-scores.png"} <= set(written.figures)


def test_methods_name_the_checks_and_their_source(checked: Any) -> None:
    text = methods_paragraph(Facts(checked), {})
    assert "200 replicates" in text
    assert any(full.startswith("Gelman, A., Meng") for full in cited_in(text))


def test_a_calibrated_p_has_a_column_and_a_source(made: Any) -> None:
    posterior = made.posterior(made.items(3), 1, n_cases=40)
    checks = posterior.predictive_checks(replicates=100, calibrate=2, progress=False)
    facts = Facts(made.content(posterior, checks=checks))
    section = fit_section(facts)
    assert section is not None
    (table, *_) = [block for block in section.blocks if isinstance(block, PageTable)]
    assert "Calibrated p" in [head.words for head in table.heads]
    assert "2 simulated studies (Hjort, Dahl & Steinbakk 2006)" in methods_paragraph(facts, {})


@pytest.mark.parametrize("n_items", [1, 2])
def test_few_items_leave_out_what_they_do_not_have(made: Any, n_items: int, tmp_path: Path) -> None:
    posterior = made.posterior(made.items(n_items), 1, n_cases=40)
    content = made.content(
        posterior, comparison=None, checks=posterior.predictive_checks(replicates=50)
    )
    done = write_report(content, tmp_path)
    assert ("fit_pairs" in done.tables) == (n_items > 1)
    assert ("item-pairs.png" in done.figures) == (n_items > 1)
    text = text_of(done.page.read_text(encoding="utf-8"))
    assert not re.search(r"\b1 (replicates|pair residuals|cases)\b", text)


def test_groups_ordered_and_unordered_items_and_mark_up(mixed: Any, made: Any) -> None:
    checks = mixed.predictive_checks(replicates=100)
    section = fit_section(Facts(made.content(mixed, checks=checks)))
    assert section is not None
    tables = [block for block in section.blocks if isinstance(block, PageTable)]
    assert len(tables[0].rows) == len(checks.overall) / 3  # all cases
    assert tables[1].folded
    assert {row[1] for row in tables[1].rows} == {"north", "south"}
    (figure,) = [
        block.figure
        for block in section.blocks
        if isinstance(block, Picture) and block.figure.name == "item-pairs"
    ]
    assert "no direction" in figure.caption
    assert "&lt;script&gt;" in figure.markup
    assert "<script>" not in figure.markup


def test_the_heat_map_has_a_square_number_and_frame_for_each_pair(checked: Any) -> None:
    ax = fit_plots.plot_pair_residuals(checked.checks, ax=Drawing().subplots())
    frame = checked.checks.pairs
    assert len(ax.texts) == 21
    framed = [patch for patch in ax.patches if not patch.get_fill()]
    assert len(framed) == int((frame["p"] < 0.05).sum())
    written = {text.get_text() for text in ax.texts}
    assert written == {fit_plots.signed(value) for value in frame["pair_residual"]}
    assert [t.get_text() for t in ax.get_yticklabels()] == [f"item_{j}" for j in range(2, 8)]
    assert [t.get_text() for t in ax.get_xticklabels()] == [f"item_{j}" for j in range(1, 7)]


def test_the_heat_map_of_many_items_writes_only_what_stands_out(made: Any) -> None:
    posterior = made.posterior(made.items(20), 2, n_cases=60)
    checks = posterior.predictive_checks(replicates=50)
    ax = fit_plots.plot_pair_residuals(checks, ax=Drawing().subplots())
    assert len(ax.texts) == int((checks.pairs["p"] < 0.05).sum())
    width, height = fit_plots.heat_map_size(20)
    assert width <= 5.6
    assert height <= 5.6


def test_colour_and_sign_say_the_same() -> None:
    more, less, none = (fit_plots.residual_colour(value) for value in (3.0, -3.0, 0.0))
    assert more[0] > more[2]
    assert less[2] > less[0]
    assert none == (1.0, 1.0, 1.0)
    assert fit_plots.residual_colour(9.0) == fit_plots.residual_colour(4.0)
    assert [fit_plots.signed(value) for value in (1.26, -0.31, 0.01)] == ["+1.3", "−0.3", "0.0"]


def test_sum_scores_show_the_counts(checked: Any) -> None:
    ax = fit_plots.plot_sum_scores(checked.checks, ax=Drawing().subplots())
    observed = ax.lines[1].get_ydata()
    np.testing.assert_array_equal(observed, checked.checks.sum_scores["observed"])
    assert ax.get_ylim()[0] == 0.0
