"""The section on what the priors did, the marks, and the first sentence."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from bayeslca.findings import Finding
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.report.facts import Facts
from bayeslca.report.sections.answer import headline
from bayeslca.report.sections.sensitivity import sensitivity_section
from bayeslca.report.sensitivity_plot import drawn, plot_prior_and_posterior
from bayeslca.report.tables import file_tables
from bayeslca.report.write import write_report
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses


@pytest.fixture(scope="module")
def few() -> Posterior:
    """Six committees, two classes told apart by a heavy prior."""
    frame = pd.DataFrame(
        {name: ["yes", "yes", "no", "no", "yes", "no"] for name in ("fees", "meets", "fenced")}
    )
    items = [ItemSpec(name, categories=("no", "yes"), yes="yes") for name in frame]
    responses = Responses.from_frame(frame, items=items)
    stated = ("P(fees=yes | managed) ~ Beta(30, 10)", "P(fees=yes | lapsed) ~ Beta(10, 30)")
    model = LatentClassModel(responses.items, ("managed", "lapsed"), stated)
    return model.sample(responses, seed=4, draws=400, ess=300, r_hat=1.05, progress=False)


@pytest.fixture(scope="module")
def shown(few: Posterior, made: Any) -> Any:
    found = few.prior_sensitivity(
        quantities={"gap": "P(fees=yes | managed) - P(fees=yes | lapsed)"},
        hypotheses={"More fees": ["P(fees=yes | managed) > P(fees=yes | lapsed)"]},
        refit=["uniform"],
    )
    return made.content(few, comparison=None, sensitivity=found)


def test_the_page_says_what_moves_and_what_rests_on_the_prior(shown: Any, tmp_path: Path) -> None:
    write_report(shown, tmp_path)
    text = re.sub(r"<[^>]+>|\s+", " ", (tmp_path / "report.html").read_text(encoding="utf-8"))
    text = re.sub(r"\s+", " ", text)
    for words in (
        "What the priors did",
        "The data say little about",
        "What moves under other priors",
        "How much of each result rests on its prior",
        "The hypotheses under other priors",
        "† rests mostly on the prior",
        "its own prior is flat, which power scaling cannot see",
        "Bayes factor weighs a hypothesis by its prior",
    ):
        assert words in text, words
    answer = text.split("Would other priors have changed the answer?")[1][:80]
    assert "Not done" not in answer
    assert (tmp_path / "figures" / "prior-and-posterior.svg").exists()


def test_tables_carry_the_marks_and_explain_them(shown: Any, few: Posterior) -> None:
    tables = {table.name: table.frame for table in file_tables(shown)}
    answers = tables["response_probabilities"]
    assert list(answers["mostly_prior"]) == few.prior_marks.answers.tolist()
    assert list(answers.columns[-2:]) == ["prior_overlap", "mostly_prior"]
    assert {"prior_sensitivity", "other_priors", "hypotheses_by_prior"} <= set(tables)
    described = tables["columns"]
    new = described[described["table"].isin(["prior_sensitivity", "other_priors"])]
    assert (new["meaning"] != "").all()


def test_without_it_there_is_no_section(small: Any, made: Any) -> None:
    assert sensitivity_section(Facts(made.content(small))) is None


def test_a_model_that_is_not_determined_has_a_marked_headline(small: Any, made: Any) -> None:
    """Whatever its shares: the first sentence of the report and of the terminal."""
    finding = Finding("not_identified", "warning", "the answers cannot determine all of it")
    told = made.posterior(made.items(7), 3, findings=(finding,))
    assert headline(Facts(made.content(told))).startswith(
        "† resting on the priors too, as the answers cannot determine all of the model: "
    )
    assert "†" not in headline(Facts(made.content(small)))


def test_a_share_that_rests_on_the_prior_marks_the_headline(few: Posterior, made: Any) -> None:
    """Two cases against Dirichlet(60, 20): the shares are the prior's."""
    model = LatentClassModel(
        few.model.items,
        ("managed", "lapsed"),
        (*few.model.statements, "P(managed, lapsed) ~ Dirichlet(60, 20)"),
    )
    posterior = model.sample(few.responses, seed=4, draws=400, ess=300, r_hat=1.05, progress=False)
    facts = Facts(made.content(posterior, comparison=None))
    assert facts.marked_classes == ("managed", "lapsed")
    assert headline(facts).startswith("† with what is said of managed and lapsed resting mostly")


def test_the_figure_shows_prior_beside_posterior(shown: Any) -> None:
    found = shown.sensitivity
    ax = plot_prior_and_posterior(found)
    labels = [label.get_text().replace("\n", " ") for label in ax.get_yticklabels()]
    assert len(labels) == len(drawn(found)) == 6
    overlaps = found.table.set_index("quantity").loc[drawn(found), "prior_overlap"]
    assert overlaps.is_monotonic_decreasing
    assert overlaps.iloc[0] == found.table["prior_overlap"].max()
