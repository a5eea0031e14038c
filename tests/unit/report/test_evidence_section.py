"""The probability of each number of classes on the page: bars, table, words, what is missing."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.figure import Figure as Drawing

from bayeslca.assess.class_count.class_counts import ClassCounts
from bayeslca.assess.class_count.words import evidence_in_words
from bayeslca.report.blocks import PageTable, Paragraph, Picture
from bayeslca.report.evidence_plot import plot_count_probabilities
from bayeslca.report.facts import Facts
from bayeslca.report.sections.class_counts import class_counts_section


def counts(reliable: tuple[bool, ...] = (True, True, True)) -> ClassCounts:
    known = np.array(reliable)
    table = pd.DataFrame(
        {
            "log_evidence": np.where(known, [-440.0, -430.0, -431.0], np.nan),
            "log_evidence_mcse": np.where(known, [0.0, 0.02, 0.03], np.nan),
            "prior": 1 / 3,
            "probability": np.where(known, [0.001, 0.73, 0.269], np.nan),
            "probability_mcse": np.where(known, [0.0, 0.01, 0.01], np.nan),
            "reliable": known,
            "reason": np.where(known, "", "the chains disagree"),
        },
        index=pd.Index([1, 2, 3], name="classes"),
    )
    verdict = evidence_in_words(table, is_uniform=True, stated=False)
    return ClassCounts(table, {}, verdict, np.zeros((3, 3)))


def compared(made: Any, found: ClassCounts) -> Any:
    comparison = made.comparison(range(1, 4))
    for name in ("log_evidence", "log_evidence_mcse", "probability"):
        comparison.table[name] = found.table[name]
    verdict = f"{comparison.verdict} {found.verdict}"
    return replace(comparison, class_counts=found, verdict=verdict)


def section(small: Any, made: Any, comparison: Any) -> tuple[Any, ...]:
    return class_counts_section(Facts(made.content(small, comparison=comparison))).blocks


def test_bars_have_the_probabilities_and_two_errors() -> None:
    ax = plot_count_probabilities(counts(), ax=Drawing().subplots())
    assert [bar.get_width() for bar in ax.patches] == [0.001, 0.73, 0.269]
    (ranges,) = [made.lines[2] for made in ax.containers if hasattr(made, "has_xerr")]
    spans = [part[1][0] - part[0][0] for part in ranges[0].get_segments()]
    np.testing.assert_allclose(spans, [0.0, 0.04, 0.04], atol=1e-12)
    said = [text.get_text() for text in ax.texts]
    assert said == ["0.1 %", "73 %", "27 %"]


def test_a_number_without_evidence_has_no_bar() -> None:
    ax = plot_count_probabilities(counts((True, True, False)), ax=Drawing().subplots())
    assert len(ax.patches) == 2
    assert ax.texts[-1].get_text() == "evidence not reliable"


def test_the_section_shows_probabilities_evidence_and_what_they_depend_on(
    small: Any, made: Any
) -> None:
    found = counts()
    blocks = section(small, made, compared(made, found))
    pictures = [block.figure.name for block in blocks if isinstance(block, Picture)]
    assert pictures == ["class-count-probabilities", "class-counts"]
    (table,) = [block for block in blocks if isinstance(block, PageTable)]
    assert [head.words for head in table.heads][-2:] == ["Log evidence", "Probability"]
    assert "whose evidence is reliable" in table.heads[-1].gloss
    assert [row[-2:] for row in table.rows] == [
        ("−440.00", "0.1 %"), ("−430.00 ± 0.02", "73 %"), ("−431.00 ± 0.03", "27 %"),
    ]  # fmt: skip
    said = [block.text for block in blocks if isinstance(block, Paragraph)]
    assert found.verdict in said
    assert found.verdict not in said[0]
    assert any("averaged over its priors" in text for text in said)


def test_a_comparison_without_evidence_says_nothing_of_it(small: Any, made: Any) -> None:
    blocks = section(small, made, made.comparison(range(1, 4)))
    pictures = [block.figure.name for block in blocks if isinstance(block, Picture)]
    assert pictures == ["class-counts"]
    assert not any("evidence" in block.text for block in blocks if isinstance(block, Paragraph))


def test_evidence_that_is_not_reliable_is_named(small: Any, made: Any) -> None:
    found = counts((True, True, False))
    blocks = section(small, made, compared(made, found))
    (table,) = [block for block in blocks if isinstance(block, PageTable)]
    assert table.rows[2][-2] == "not reliable"
    said = " ".join(block.text for block in blocks if isinstance(block, Paragraph))
    assert "The evidence of three classes is not reliable (the chains disagree)" in said
