"""What the priors imply, on the page: figure, tables, files, and the reviewer's question."""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pandas as pd
import pytest
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure as Drawing

from bayeslca import Item, LatentClassModel
from bayeslca.exceptions import ModelError
from bayeslca.report.blocks import PageTable, Paragraph, Picture, Questions, Subheading
from bayeslca.report.columns import COLUMNS
from bayeslca.report.facts import Facts
from bayeslca.report.prior_plots import plot_prior_predictive, prior_height, prior_rows
from bayeslca.report.sections.assumptions import assumptions_section
from bayeslca.report.sections.prior_predictive import HEADING, implied_in_words, prior_blocks
from bayeslca.report.sections.reviewer import reviewer_section
from bayeslca.report.tables import file_tables
from bayeslca.report.workbook import write_workbook
from bayeslca.responses.item import Groups


@pytest.fixture(scope="module")
def facts(content: Any) -> Facts:
    return Facts(content)


def axes() -> Any:
    return Drawing().subplots()


def bars(ax: Any) -> list[np.ndarray]:
    """Return lower and upper ends of the bars: two collections a class, 95 % first."""
    return [
        np.array([line[:, 0] for line in found.get_segments()])
        for found in ax.collections
        if isinstance(found, LineCollection) and found.get_linewidth()[0] > 2
    ]


def test_bars_are_the_priors_intervals_and_marks_the_posterior(facts: Facts) -> None:
    prior, posterior = facts.prior_predictive, facts.posterior
    ax = plot_prior_predictive(prior, posterior, interval=0.9, ax=axes())
    found = bars(ax)
    learnt = posterior.response_probabilities(interval=0.9)
    share = posterior.prevalence(interval=0.9)
    for k, name in enumerate(posterior.model.class_names):
        answers = prior.response_probabilities
        mine = answers[(answers["latent_class"] == name) & (answers["category"] == "yes")]
        whole = prior.prevalence[prior.prevalence["latent_class"] == name]
        for at, part in enumerate(("95", "50")):
            ends = [f"lower_{part}", f"upper_{part}"]
            expected = np.concatenate([whole[ends], mine[ends]])
            np.testing.assert_allclose(found[2 * k + at], expected)
        after = learnt[(learnt["latent_class"] == name) & (learnt["category"] == "yes")]
        median = [*share.loc[share["latent_class"] == name, "median"], *after["median"]]
        np.testing.assert_allclose(ax.containers[k].lines[0].get_xdata(), median)
    assert "line: after, 90 %" in ax.get_xlabel()


def test_without_a_posterior_the_priors_medians_are_marked(facts: Facts) -> None:
    prior = facts.prior_predictive
    ax = plot_prior_predictive(prior, ax=axes())
    assert not ax.containers
    assert "after" not in ax.get_xlabel()
    for k, name in enumerate(facts.class_names):
        mark = ax.lines[k]
        share = prior.prevalence.set_index("latent_class").loc[name, "median"]
        assert mark.get_xdata()[0] == pytest.approx(share)
        assert mark.get_markerfacecolor() == "white"
    assert plot_prior_predictive(prior).figure is not ax.figure


def test_markers_and_colours_tell_the_classes_apart(facts: Facts) -> None:
    ax = plot_prior_predictive(facts.prior_predictive, ax=axes())
    assert len({line.get_marker() for line in ax.lines}) == 3
    assert len({line.get_color() for line in ax.lines}) == 3


def test_a_posterior_of_another_model_is_refused(facts: Facts, mixed: Any) -> None:
    with pytest.raises(ModelError, match="different models"):
        plot_prior_predictive(facts.prior_predictive, mixed, ax=axes())
    fewer = LatentClassModel(facts.posterior.model.items, 2)
    prior = fewer.prior_predictive(20, draws=20, seed=1)
    with pytest.raises(ModelError, match="different models"):
        plot_prior_predictive(prior, facts.posterior, ax=axes())


def test_groups_have_rows_and_a_wrong_one_is_refused(mixed: Any) -> None:
    prior = mixed.model.prior_predictive(20, draws=20, seed=1)
    rows = [row.text for row in prior_rows(prior)]
    assert rows[:3] == [f"Share of the cases, {name}" for name in ("north", "south", "overall")]
    assert rows[3] == "<script>alert(1)</script>: yes"
    assert len(rows) == 3 + 2 + 5 + 4
    with pytest.raises(ModelError, match=r"no group 'noth' \(near names: 'north'"):
        plot_prior_predictive(prior, group="noth", ax=axes())


def test_a_group_shows_its_own_answers(made: Any) -> None:
    model = LatentClassModel(
        (Item("fees", ("no", "yes")), Item("meets", ("no", "yes"))),
        2,
        groups=Groups("district", ("hill", "plain")),
        free_by_group=True,
    )
    prior = model.prior_predictive(20, draws=20, seed=1)
    one, other = (
        bars(plot_prior_predictive(prior, group=name, ax=axes()))[0] for name in ("hill", "plain")
    )
    np.testing.assert_array_equal(one[:3], other[:3])
    assert (one[3:] != other[3:]).all()


def test_one_class_has_no_share_to_show(made: Any) -> None:
    posterior = made.posterior(made.items(3), 1, n_cases=60)
    prior = posterior.model.prior_predictive(60, draws=20, seed=1)
    assert [row.is_prevalence for row in prior_rows(prior)] == [False] * 3
    assert prior_height(prior) > 2


def test_the_section_has_words_a_figure_and_folded_tables(facts: Facts) -> None:
    blocks = assumptions_section(facts).blocks
    at = next(i for i, b in enumerate(blocks) if isinstance(b, Subheading) and b.text == HEADING)
    words, picture, classes, answers = blocks[at + 1 : at + 5]
    assert isinstance(words, Paragraph)
    assert implied_in_words(facts) in words.text
    assert isinstance(picture, Picture)
    assert picture.figure.name == "prior_predictive"
    for table in (classes, answers):
        assert isinstance(table, PageTable)
        assert table.folded
        assert all(len(row) == len(table.heads) for row in table.rows)
    assert len(classes.rows) == 3 * (1 + 7)
    assert len(answers.rows) == 7 + 3 + 8


def test_tables_on_the_page_hold_the_numbers(facts: Facts) -> None:
    classes, answers = (b for b in prior_blocks(facts) if isinstance(b, PageTable))
    found = {row[:2]: row[2:] for row in classes.rows}
    prior = facts.prior_predictive.response_probabilities
    (row,) = prior[
        (prior["latent_class"] == "lapsed") & (prior["item"] == "item_2")
        & (prior["category"] == "yes")
    ].to_dict("records")  # fmt: skip
    before, half, after = found[("Does thing number 2: yes", "lapsed")]
    assert before.startswith(f"{100 * row['median']:.0f} % (")
    assert half == f"{100 * row['lower_50']:.0f} to {100 * row['upper_50']:.0f}"
    learnt = facts.probabilities
    (row,) = learnt[
        (learnt["latent_class"] == "lapsed") & (learnt["item"] == "item_2")
        & (learnt["category"] == "yes")
    ].to_dict("records")  # fmt: skip
    assert after.startswith(f"{100 * row['median']:.0f} % (")
    observed = {row[0]: row[3] for row in answers.rows}
    codes = facts.content.responses.codes
    yes = (codes[:, 0] == 1).sum() / (codes[:, 0] >= 0).sum()
    assert observed["Does thing number 1: yes"] == f"{100 * yes:.0f} %"
    scores = (codes == 1).sum(axis=1)
    assert observed["Cases with sum score 3"] == str((scores == 3).sum())
    n_patterns = len(np.unique(codes[(codes >= 0).any(axis=1)], axis=0))
    assert observed["The number of different patterns of answers"] == str(n_patterns)


def say(facts: Facts, **observed: float) -> str:
    """Return the words where some numbers are observed other than they were."""
    from dataclasses import replace

    prior = facts.prior_predictive
    margins, patterns = prior.item_margins.copy(), prior.patterns.copy()
    margins["observed"] = margins["median"]
    patterns["observed"] = patterns["median"]
    for name, value in observed.items():
        patterns.loc[patterns["quantity"] == name, "observed"] = value
        chosen = (margins["item"] == name) & (margins["category"] == "yes")
        margins.loc[chosen, "observed"] = value
    changed = replace(prior, item_margins=margins, patterns=patterns)
    stand_in: Any = SimpleNamespace(prior_predictive=changed)
    return implied_in_words(stand_in)


def test_words_name_what_the_priors_did_not_expect(facts: Facts) -> None:
    assert "Of 10 numbers about the answers, all lie within" in say(facts)
    patterns = facts.prior_predictive.patterns.set_index("quantity")
    unusual = float(patterns.loc["sum_score_mean", ["lower_50", "lower_95"]].mean())
    assert "all lie within" in say(facts, sum_score_mean=unusual)
    text = say(facts, sum_score_sd=3.1, item_4=0.999)
    assert "8 lie within" in text
    assert "the spread of the sum scores (3.10 observed, " in text
    assert "Does thing number 4: yes (99.9 % observed, " in text
    assert text.index("spread") < text.index("number 4")  # the furthest outside first
    many = say(facts, **{f"item_{j}": 0.999 for j in range(1, 8)})
    assert "3 lie within" in many
    assert "4 more" in many
    every = say(
        facts, **{f"item_{j}": 0.999 for j in range(1, 8)}, distinct_patterns=1,
        sum_score_mean=7, sum_score_sd=0,
    )  # fmt: skip
    assert "none lies within" in every
    assert "1 was observed" in every


def test_the_reviewers_question_has_a_number_and_a_place(facts: Facts) -> None:
    blocks = reviewer_section(facts, {}).blocks
    (questions,) = (block for block in blocks if isinstance(block, Questions))
    (answer,) = (e for e in questions.entries if "imply before the data" in e.question)
    assert answer.done
    assert answer.places == (("assumptions", "What was assumed"),)
    assert answer.answer == implied_in_words(facts)
    assert "95 %" in answer.answer


def test_the_file_has_the_table_and_every_column_is_explained(
    content: Any, facts: Facts, tmp_path: Path
) -> None:
    tables = {table.name: table for table in file_tables(content, facts.prior_predictive)}
    frame = tables["prior_predictive"].frame
    assert set(frame.columns) <= set(COLUMNS)
    assert {"prior_median", "prior_lower_50", "prior_upper_95", "observed"} <= set(frame.columns)
    explained = tables["columns"].frame
    mine = explained[explained["table"] == "prior_predictive"]
    assert list(mine["column"]) == list(frame.columns)
    assert (mine["meaning"] != "").all()
    write_workbook(tmp_path / "tables.xlsx", tuple(tables.values()), [])
    sheet = pd.read_excel(tmp_path / "tables.xlsx", sheet_name="prior_predictive", header=1)
    assert len(sheet) == len(frame)
    np.testing.assert_allclose(sheet["prior_median"], frame["prior_median"])
    assert "prior_predictive" not in {table.name for table in file_tables(content)}


def test_large_studies_are_drawn_less_often(facts: Facts) -> None:
    assert facts.prior_predictive.draws == 1000
    asked = {}

    class Model:
        def prior_predictive(self, **given: Any) -> None:
            asked.update(given)

    responses = SimpleNamespace(items=range(10))
    posterior = SimpleNamespace(
        model=Model(), responses=responses, units=SimpleNamespace(n_cases=1000)
    )
    large: Any = SimpleNamespace(posterior=posterior)
    _ = Facts(large).prior_predictive
    assert asked["draws"] == 200
