"""What follows from class, on the page and in the files."""

from __future__ import annotations

import dataclasses
from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.report.blocks import Answered, PageTable, Paragraph, Picture, Questions, Section
from bayeslca.report.columns import COLUMNS
from bayeslca.report.content import ReportContent
from bayeslca.report.facts import Facts
from bayeslca.report.html import render_page
from bayeslca.report.outcome_plots import plot_outcome_distribution, plot_outcome_means
from bayeslca.report.sections.outcomes import outcome_lead, outcome_tables, outcomes_section
from bayeslca.report.sections.reviewer import reviewer_section

CLASSES = ("managed", "lapsed")
RULE = ("managed is where P(item_1=yes) is highest",)


@pytest.fixture(scope="module")
def found(made: SimpleNamespace) -> tuple[lca.ClassOutcomes, ...]:
    posterior = made.posterior(made.items(5), CLASSES, n_cases=60, statements=RULE)
    rng = np.random.default_rng(1)
    frame = pd.DataFrame(
        {
            "committee": posterior.responses.case_ids,
            "<b>days</b> $x$": rng.poisson(6, 60),
            "good": np.where(rng.random(60) < 0.4, "yes", "no"),
            "grade": rng.integers(1, 4, 60),
        }
    )
    kinds = {"<b>days</b> $x$": "count", "good": "binary", "grade": "ordered"}
    return tuple(
        lca.class_outcomes(
            posterior,
            frame,
            name,
            kind=kind,
            seed=1,
            draws=50,
            ess=20,
            held=80,
            max_sweeps=700,  # type: ignore[arg-type]
        )
        for name, kind in kinds.items()
    )


@pytest.fixture(scope="module")
def told(found: tuple[lca.ClassOutcomes, ...], made: SimpleNamespace) -> ReportContent:
    posterior = made.posterior(made.items(5), CLASSES, n_cases=60, statements=RULE)
    orders = {"grade": ("managed < lapsed",)}
    return made.content(posterior, comparison=None, outcomes=found, outcome_orders=orders)


@pytest.fixture(scope="module")
def section(told: ReportContent) -> Section:
    made = outcomes_section(Facts(told))
    assert made is not None
    return made


def test_no_outcomes_no_section(content: ReportContent) -> None:
    assert outcomes_section(Facts(content)) is None
    assert outcome_tables(content) == {}


def test_every_outcome_has_its_parts(section: Section) -> None:
    captions = [block.caption for block in section.blocks if isinstance(block, PageTable)]
    for name in ("<b>days</b> $x$", "good", "grade"):
        mine = [caption for caption in captions if caption.startswith(name)]
        assert any("by class" in caption for caption in mine)
        assert any("differences between classes (cut)" in caption for caption in mine)
        assert any("check of its distribution" in caption for caption in mine)
    assert "Orders that the study asks for" in captions
    assert "grade: categories by class (cut)" in captions
    assert "Cases that change class" not in captions  # no case by name unless asked for
    figures = [block.figure.name for block in section.blocks if isinstance(block, Picture)]
    assert len(set(figures)) == 6
    moved = [
        b.text for b in section.blocks if isinstance(b, Paragraph) and "beside the cut" in b.text
    ]
    assert len(moved) == 3
    tables = [block for block in section.blocks if isinstance(block, PageTable)]
    assert all(len(row) == len(table.heads) for table in tables for row in table.rows)


def test_text_from_data_is_escaped(section: Section) -> None:
    page = render_page(title="x", sections=(section,), versions={}, trustworthy=True)
    assert "<b>days</b>" not in page
    assert "&lt;b&gt;days&lt;/b&gt; $x$" in page


def test_cases_are_named_only_when_asked_for(told: ReportContent) -> None:
    changed = [one for one in told.outcomes if one.membership_moved()["changed"].any()][:1]
    asked = dataclasses.replace(told, show_cases=True, outcomes=tuple(changed))
    made = outcomes_section(Facts(asked))
    blocks = made.blocks if made is not None else ()
    named = [b for b in blocks if isinstance(b, PageTable) and "change class" in b.caption]
    assert len(named) == len(changed)


def test_files_have_every_column_explained(told: ReportContent) -> None:
    tables = outcome_tables(told)
    assert "outcome_good_means" in tables
    assert "outcome_grade_categories" in tables
    unexplained = {
        column for _, frame in tables.values() for column in frame if column not in COLUMNS
    }
    assert unexplained == set()


def test_the_lead_and_the_reviewer(told: ReportContent) -> None:
    lead = outcome_lead(told.outcomes[1])
    assert "good: the probability of yes is" in lead
    assert " % (" in lead
    assert "The likeliest order is" in lead
    questions = next(
        b for b in reviewer_section(Facts(told), {}).blocks if isinstance(b, Questions)
    )
    answers: dict[str, Answered] = {entry.question: entry for entry in questions.entries}
    assert answers["Was the most probable class treated as if it were known?"].done


def test_plots_take_and_return_axes(told: ReportContent) -> None:
    from matplotlib.figure import Figure

    ax = Figure().subplots()
    assert plot_outcome_means(told.outcomes[0], ax=ax) is ax
    assert [text.get_text() for text in ax.get_yticklabels()] == ["managed", "lapsed"]
    ax = Figure().subplots()
    assert plot_outcome_distribution(told.outcomes[2], "joint", ax=ax) is ax
    assert [text.get_text() for text in ax.get_xticklabels()] == ["1", "2", "3"]
