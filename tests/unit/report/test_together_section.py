"""Which cases go together, on the page: heat map, sets, typical answers, reasons in words."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure as Drawing

from bayeslca.assess.together.co_membership import CoMembership
from bayeslca.assess.together.partition import Partition
from bayeslca.report.blocks import Bullets, PageTable, Paragraph, Picture
from bayeslca.report.facts import Facts
from bayeslca.report.sections.together import sets_table, together_section
from bayeslca.report.together_plot import MOST_SHOWN, plot_co_membership, shown_units


@pytest.fixture(scope="module")
def together(small: Any) -> CoMembership:
    """Two sets by the first item's answer; the last unit alone in a third."""
    units = small.units
    labels = np.where(units.pattern[:, 0] == 1, 0, 1)
    if units.count[labels == 0].sum() < units.count[labels == 1].sum():
        labels = 1 - labels
    labels[-1] = 2
    same = np.equal.outer(labels, labels)
    probability = np.where(same, 0.8, 0.1)
    partition = Partition(labels, 0.5, 0.9, 1000)
    return CoMembership(
        small.model, small.responses, probability, np.zeros_like(probability), partition, "With x"
    )


def section(small: Any, made: Any, **more: Any) -> Any:
    return together_section(Facts(made.content(small, **more)))


def test_not_asked_for_means_no_section(small: Any, made: Any) -> None:
    assert section(small, made) is None


def test_a_reason_stands_where_nothing_could_be_found(small: Any, made: Any) -> None:
    found = section(small, made, together_why_not="there are 4,000 distinct response patterns")
    (only,) = found.blocks
    assert only == Paragraph("There are 4,000 distinct response patterns.")


def test_the_section_shows_sets_their_cases_and_answers(
    small: Any, made: Any, together: CoMembership
) -> None:
    blocks = section(small, made, together=together, together_why_not="six are left out").blocks
    assert blocks[0] == Paragraph("Six are left out.")
    assert any(isinstance(block, Picture) for block in blocks)
    (table,) = [block for block in blocks if isinstance(block, PageTable)]
    sizes = np.bincount(together.partition.labels, weights=together.units.count).astype(int)
    assert [row[:2] for row in table.rows] == [
        (name, str(size)) for name, size in zip("ABC", sizes, strict=True)
    ]
    assert table.rows[0][2:] == ("80 %", "10 %")
    (answers,) = [block for block in blocks if isinstance(block, Bullets)]
    assert answers.entries[0][0] == "Set A"
    assert "item_1 yes (100 %)" in answers.entries[0][1] + answers.entries[1][1]
    if sizes[2] == 1:  # a single case's answers are not shown
        assert answers.entries[2] == ("Set C", "mostly –.")


def test_the_map_is_of_cases_in_the_order_of_their_sets(together: CoMembership) -> None:
    unit, edges = shown_units(together)
    labels = together.partition.labels[unit]
    assert np.all(np.diff(labels) >= 0)
    assert edges.tolist() == [0, *np.cumsum(np.bincount(labels)).tolist()]
    assert np.bincount(unit, minlength=together.units.n_units).tolist() == (
        together.units.count.tolist()
    )
    ax = plot_co_membership(together, ax=Drawing().subplots())
    shown = ax.images[0].get_array()
    np.testing.assert_allclose(shown, together.probability[np.ix_(unit, unit)])
    assert [text.get_text() for text in ax.get_xticklabels()] == ["A", "B", "C"]


def test_of_many_cases_some_are_shown(together: CoMembership) -> None:
    units = replace(together.units, count=together.units.count * 50)
    many = replace(together)
    many.__dict__["units"] = units
    unit, edges = shown_units(many)
    assert unit.size == MOST_SHOWN
    assert edges[-1] == MOST_SHOWN


def test_the_file_has_the_sets(together: CoMembership) -> None:
    table = sets_table(together)
    assert list(table.columns) == [
        "set", "cases", "patterns", "together_within", "together_between"
    ]  # fmt: skip
