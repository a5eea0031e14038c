"""The section on what predicts class: sentences, tables, pictures."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.report.blocks import Banner, PageTable, Paragraph, Picture
from bayeslca.report.columns import COLUMNS
from bayeslca.report.content import ReportContent
from bayeslca.report.facts import Facts
from bayeslca.report.sections.methods import methods_paragraph
from bayeslca.report.sections.predictors import predictor_tables, predictors_section
from tests.unit.report.conftest import make_items, make_posterior

RULE = ("managed is where P(item_1=yes) is highest",)


@pytest.fixture(scope="module")
def content():
    posterior = make_posterior(make_items(4), ("managed", "lapsed"), statements=RULE)
    rng = np.random.default_rng(3)
    frame = pd.DataFrame(
        {
            "committee": posterior.responses.row_names,
            "age": rng.normal(10, 3, size=118),
            "<b>": rng.choice(["a$b", "c"], size=118),
        }
    )
    found = lca.class_predictors(
        posterior, frame, "age + `<b>`", ways=("cut",), seed=1, draws=120, prior_scale=1.0
    )
    return ReportContent(
        responses=posterior.responses,
        posterior=posterior,
        predictors=found,
        predictors_against="lapsed",
    )


def test_the_section_stands_only_where_the_study_asks(content):
    posterior = content.posterior
    none = ReportContent(responses=posterior.responses, posterior=posterior)
    assert predictors_section(Facts(none)) is None


def test_sentences_tables_and_pictures(content):
    section = predictors_section(Facts(content))
    assert section.heading == "What predicts class"
    texts = [block.text for block in section.blocks if isinstance(block, Paragraph)]
    assert texts[0].startswith("Class was regressed on age and <b> (all 118 cases).")
    assert any("not effects of changing a covariate" in text for text in texts)
    ratios, effects, direct = (b for b in section.blocks if isinstance(b, PageTable))
    assert "against lapsed" in ratios.caption
    assert [row[2] for row in ratios.rows] == ["managed"] * 2
    assert len(effects.rows) == 2
    assert direct.folded
    pictures = [block for block in section.blocks if isinstance(block, Picture)]
    assert len(pictures) == 2
    assert "managed" in pictures[0].figure.alt
    assert all(isinstance(b.texts, tuple) for b in section.blocks if isinstance(b, Banner))


def test_every_column_of_the_files_is_explained(content):
    tables = predictor_tables(content.predictors, "lapsed", 0.95)
    assert set(tables) == {
        "predictors",
        "predictor_effects",
        "predictor_probabilities",
        "direct_effects",
    }
    for _, frame in tables.values():
        assert [name for name in frame.columns if name not in COLUMNS] == []


def test_the_methods_paragraph_says_how(content):
    text = methods_paragraph(Facts(content), {})
    assert "Class was regressed on age and <b> by multinomial logistic regression" in text
    assert "by a cut (Plummer 2015)" in text
