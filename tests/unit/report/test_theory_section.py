"""The section on the theory: the outcome first, unplanned claims under their own heading."""

from __future__ import annotations

import math
from types import SimpleNamespace

import pandas as pd
import pytest

from bayeslca.assess.hypothesis.hypotheses import HypothesisTest
from bayeslca.assess.hypothesis.rivals import Rivals
from bayeslca.posterior.posterior import Posterior
from bayeslca.report.blocks import PageTable, Paragraph, Section, Subheading
from bayeslca.report.content import Claim
from bayeslca.report.facts import Facts
from bayeslca.report.sections.theory import outcome_in_words, theory_section
from bayeslca.report.tables import file_tables


def made_test(log_factor: float, *, after: float = 0.9, **more: object) -> HypothesisTest:
    given = {
        "statements": ("P(a) > P(b)",),
        "posterior_probability": after,
        "prior_probability": 0.5,
        "posterior_mcse": 0.001,
        "prior_mcse": 0.0,
        "log_bayes_factor": log_factor / 2,
        "log_bayes_factor_mcse": 0.01,
        "log_bayes_factor_against_complement": log_factor,
        "log_bayes_factor_against_complement_mcse": 0.01,
    }
    return HypothesisTest(**{**given, **more})


CLAIMS = (
    Claim("An afterthought", made_test(math.log(9.0))),
    Claim("Managed ones pay", made_test(math.log(30.0), after=0.97), planned=True),
)


@pytest.fixture
def section(made: SimpleNamespace, small: Posterior) -> Section:
    rivals = Rivals(
        pd.DataFrame(
            {
                "statement": ["x", "y"],
                "prior_weight": [0.5, 0.5],
                "posterior_weight": [0.8, 0.2],
                "log_bayes_factor": [1.0, -0.4],
            },
            index=pd.Index(["one", "two"], name="hypothesis"),
        ),
        {"two": made_test(-0.8, bound="below")},
        (),
    )
    quantities = small.quantities({"gap": "P(item_1=yes | managed) - P(item_1=yes | lapsed)"})
    content = made.content(small, claims=CLAIMS, rivals={"pay": rivals}, quantities=quantities)
    found = theory_section(Facts(content))
    assert found is not None
    names = {table.name for table in file_tables(content)}
    assert {"hypotheses", "rivals_pay", "quantities"} <= names
    return found


def test_the_first_sentence_tells_the_outcome_of_the_planned_claim(section: Section) -> None:
    first = section.blocks[0]
    assert isinstance(first, Paragraph)
    assert first.text.startswith(
        "“Managed ones pay” is supported, with strong evidence: its probability is 97 %, against "
        "50 % before the data (Bayes factor 30 against its opposite)."
    )


def test_what_was_not_planned_stands_under_its_own_heading(section: Section) -> None:
    at = next(
        i for i, block in enumerate(section.blocks)
        if isinstance(block, Subheading) and block.text == "Thought of after seeing the data"
    )  # fmt: skip
    before = [b for b in section.blocks[:at] if isinstance(b, PageTable)]
    after = [b for b in section.blocks[at:] if isinstance(b, PageTable)]
    assert [row[0] for row in before[0].rows] == ["Managed ones pay"]
    assert [row[0] for row in after[0].rows] == ["An afterthought"]


def test_rivals_and_quantities_have_their_tables(section: Section) -> None:
    tables = {block.caption: block for block in section.blocks if isinstance(block, PageTable)}
    assert tables["Rivals: pay"].rows[0] == ("one", "50 %", "80 %", "2.72")
    assert tables["Rivals: pay"].rows[1][-1] == "below 0.67"
    ((name, after, *_),) = tables["Quantities that the study asks for"].rows
    assert name == "gap"
    assert " to " in after


@pytest.mark.parametrize(
    ("test", "said"),
    [
        (made_test(-4.0, after=0.1), "is contradicted, with strong evidence against it"),
        (
            made_test(2.0, after=0.31),
            "more probable than it was (positive evidence), yet improbable",
        ),
        (made_test(-2.0, after=0.8), "less probable than it was (positive evidence), yet probable"),
        (made_test(0.5), "is neither supported nor contradicted"),
        (made_test(6.0, bound="above"), "(Bayes factor above 403 against its opposite)"),
        (made_test(-6.0, bound="below"), "(Bayes factor below 0.00248 against its opposite)"),
        (made_test(2.0, after=math.nan), "(Bayes factor 7.39 against the model)"),
        (made_test(0.0, true_by_definition=True), "is true by definition"),
    ],
)
def test_outcomes_in_words(test: HypothesisTest, said: str) -> None:
    assert said in outcome_in_words([Claim("It holds", test, planned=True)])


def test_a_study_without_a_theory_has_no_section(made: SimpleNamespace, small: Posterior) -> None:
    assert theory_section(Facts(made.content(small))) is None
