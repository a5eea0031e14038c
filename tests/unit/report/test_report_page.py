"""The page: what it says, that it fits the study, and that it never claims too much."""

from __future__ import annotations

import re
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from bayeslca.findings import Finding
from bayeslca.report.columns import COLUMNS
from bayeslca.report.content import Change, ReportContent, WrittenReport
from bayeslca.report.facts import Facts
from bayeslca.report.figures import Figure
from bayeslca.report.references import REFERENCES, cited_in
from bayeslca.report.sections import class_counts, classes, membership, prevalence, sampling
from bayeslca.report.sections.answer import headline
from bayeslca.report.sections.methods import methods_paragraph
from bayeslca.report.write import write_report

HEADINGS = [
    "The question and the answer",
    "What each class looks like",
    "How common each class is",
    "How many classes the data support",
    "How surely cases are placed",
    "What was assumed",
    "Can the sampling be trusted",
    "What a reviewer will ask",
    "Limits and cautions",
    "A methods paragraph to paste",
    "How to reproduce",
]


class Text(HTMLParser):
    """The text of a page, without style and figures; and its tags."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.words: list[str] = []
        self.tags: list[str] = []
        self.links: list[str] = []
        self.ids: list[str] = []
        self.headings: list[str] = []
        self._in_heading = False
        self._skip = 0
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self._in_heading = tag == "h2"
        self._skip += tag in {"style", "svg"}
        for key, value in attrs:
            if key in {"href", "src"} and value:
                self.links.append(value)
            if key == "id" and value:
                self.ids.append(value)

    def handle_endtag(self, tag: str) -> None:
        self._in_heading = False
        self._skip -= tag in {"style", "svg"}

    def handle_data(self, data: str) -> None:
        if self._in_heading:
            self.headings.append(data)
        if not self._skip:
            self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).replace("\u00a0", " ").split())


PageOf = Callable[[ReportContent], Text]


@pytest.fixture
def page_of(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> PageOf:
    """Return a function that writes a page whose figures are not drawn, and reads its text."""

    def undrawn(name: str, plot: object, *, size: object, caption: str, alt: str) -> Figure:
        return Figure(name, caption, alt, "", b"", b"")

    for section in (classes, prevalence, class_counts, membership, sampling):
        monkeypatch.setattr(section, "draw", undrawn)

    def write(content: ReportContent) -> Text:
        return Text(write_report(content, tmp_path).page.read_text(encoding="utf-8"))

    return write


@pytest.fixture(scope="module")
def written(content: ReportContent, tmp_path_factory: pytest.TempPathFactory) -> WrittenReport:
    return write_report(content, tmp_path_factory.mktemp("report"))


@pytest.fixture(scope="module")
def page(written: WrittenReport) -> Text:
    return Text(written.page.read_text(encoding="utf-8"))


def test_sections_stand_in_their_order(page: Text) -> None:
    assert page.headings == HEADINGS


def test_first_sentence_answers_with_numbers(content: ReportContent, page: Text) -> None:
    table = content.posterior.prevalence()
    largest = table.loc[table["median"].idxmax()]
    said = headline(Facts(content))
    assert largest["latent_class"] in said
    assert f"{100 * largest['median']:.0f} %" in said
    assert f"about {round(largest['median'] * 118)} of 118" in said
    assert said in page.text


def test_page_is_whole_without_network(page: Text) -> None:
    assert "script" not in page.tags
    assert "img" not in page.tags
    assert {link for link in page.links if not link.startswith("#")} == {"data:,"}
    assert {link[1:] for link in page.links if link.startswith("#")} <= set(page.ids)
    assert len(page.ids) == len(set(page.ids))


def test_no_single_case_is_shown(content: ReportContent, page: Text) -> None:
    assert not re.search(r"WP\d{3}", page.text)


def test_files_are_those_that_are_promised(written: WrittenReport) -> None:
    assert {path.name for path in written.page.parent.iterdir()} == {
        "report.html", "tables.xlsx", "membership_of_patterns.csv", "tables", "figures",
    }  # fmt: skip
    assert set(written.tables) == {
        "prevalence", "response_probabilities", "assignment_error", "separation", "priors",
        "answers", "diagnostics", "class_counts", "columns", "prior_predictive",
    }  # fmt: skip
    assert all(path.exists() for path in (*written.tables.values(), *written.figures.values()))


def test_every_column_of_every_table_is_explained(written: WrittenReport) -> None:
    columns = pd.read_csv(written.tables["columns"])
    for name, path in written.tables.items():
        for column in pd.read_csv(path).columns:
            mine = columns[(columns["table"] == name) & (columns["column"] == column)]
            assert name == "columns" or len(mine) == 1
            assert column in COLUMNS


def test_pictures_have_300_dots_an_inch(written: WrittenReport) -> None:
    from PIL import Image

    for path in written.figures.values():
        if path.suffix == ".png":
            assert Image.open(path).info["dpi"][0] == pytest.approx(300, abs=1)


def test_an_untrusted_posterior_is_marked_before_anything_is_claimed(
    made: Any, page_of: PageOf
) -> None:
    posterior = made.posterior(
        made.items(5),
        2,
        trustworthy=False,
        verdict="The chains do not agree: the largest R-hat is 1.31.",
        findings=(Finding("modes_differ", "problem", "Two modes hold chains", "Sample longer"),),
    )
    content = made.content(posterior)
    page = page_of(content)
    assert headline(Facts(content)).startswith("Not to be trusted as it stands: ")
    warning = page.text.index("not to be trusted yet")
    assert warning < page.text.index("the largest, class")
    assert "R-hat is 1.31" in page.text
    assert "Two modes hold chains. Sample longer." in page.text
    assert "Do not use it yet" in page.text
    n_tables = page.tags.count("caption")
    assert n_tables > 5
    assert page.text.count("(not to be trusted yet)") == n_tables


def test_a_tied_count_that_is_not_to_be_trusted_is_said(
    small: Any, made: Any, page_of: PageOf
) -> None:
    comparison = made.comparison()
    comparison.table.loc[1, "trustworthy"] = False
    page = page_of(made.content(small, comparison=comparison))
    assert "the sampling of 1 class is not to be trusted; the number" in page.text


def test_a_model_outside_the_tie_is_said_first(small: Any, made: Any) -> None:
    content = made.content(small, comparison=made.comparison(best=6))
    said = headline(Facts(content))
    assert said.startswith("The study's own model (3 classes) predicts new cases worse than")
    assert "6 classes" in said
    assert "standard error of 2.5" in said


def test_a_model_inside_the_tie_has_no_such_clause(content: ReportContent) -> None:
    assert "worse" not in headline(Facts(content))


def test_mark_up_in_names_is_text(mixed: Any, made: Any, page_of: PageOf) -> None:
    content = made.content(
        mixed,
        title="<b>bold</b>",
        question="<img src=x onerror=alert(1)>?",
        comparison=None,
        decisions=("<script>alert(2)</script>",),
        study_text="</pre><script>alert(3)</script>",
        command='"><script>',
    )
    page = page_of(content)
    assert "script" not in page.tags
    assert "img" not in page.tags
    assert "b" not in page.tags
    assert "<script>alert(1)</script>" in page.text
    assert "<script>alert(3)</script>" in page.text


def test_groups_have_rows_of_their_own_and_an_overall_one(
    mixed: Any, made: Any, page_of: PageOf
) -> None:
    page = page_of(made.content(mixed, comparison=None))
    assert re.search(r"class 1 north \d+ % .* class 1 south \d+ % .* class 1 overall", page.text)
    assert "groups weighted by their sizes" in page.text


def test_one_class_is_not_called_kinds(made: Any, page_of: PageOf) -> None:
    page = page_of(made.content(made.posterior(made.items(4), 1, n_cases=30)))
    assert "all 30 cases are described alike" in page.text
    assert "one classes" not in page.text
    assert "nan" not in page.text


@pytest.mark.parametrize("n_classes", [1, 2, 8])
def test_grammar_of_one_and_many(made: Any, n_classes: int, page_of: PageOf) -> None:
    posterior = made.posterior(made.items(3), n_classes, n_cases=60)
    page = page_of(made.content(posterior, comparison=made.comparison(range(1, 3))))
    assert not re.search(r"\b1 (cases|classes|answers|draws|modes|places|minutes)\b", page.text)
    assert not re.search(r"\b(\d*[02-9]|\d+1) (case|class|answer|draw|mode)\b(?! \d)", page.text)
    assert "  " not in page.text
    assert not re.search(r"[^.]\.\.[^.]", page.text)
    assert "None" not in page.text


def test_not_done_is_said_and_counted(page: Text) -> None:
    open_ones = page.text.count("Not done in this study.")
    assert open_ones >= 2
    assert "BARG 5A-5C" in page.text
    assert "STARD-BLCM" not in page.text


def test_tests_bring_their_cautions_and_their_checklist(made: Any, page_of: PageOf) -> None:
    from bayeslca.responses.item import Item

    items = tuple(
        Item(name, ("negative", "positive"), yes="positive") for name in ("elisa", "culture", "pcr")
    )
    page = page_of(made.content(made.posterior(items, 2), comparison=None))
    assert "Not for decisions on a single patient or animal" in page.text
    assert "Local rules and licensed practice come first" in page.text
    assert "STARD-BLCM 14b" in page.text
    assert "Kostoulas" in page.text


def test_yes_no_practices_are_not_taken_for_tests(page: Text) -> None:
    assert "single patient" not in page.text


def test_changes_are_shown_with_before_and_now(small: Any, made: Any, page_of: PageOf) -> None:
    changes = (Change("prevalence of managed", "40 % (30 to 50)", "47 % (37 to 57)"),)
    page = page_of(made.content(small, changes=changes, replaced=True))
    assert "prevalence of managed 40 % (30 to 50) 47 % (37 to 57)" in page.text


def test_nothing_moved_is_said_only_after_a_replacement(
    small: Any, made: Any, page_of: PageOf
) -> None:
    replaced = page_of(made.content(small, replaced=True))
    assert "Nothing moved since the last run" in replaced.text
    assert "Nothing moved" not in page_of(made.content(small)).text


def test_other_counts_in_the_tie_are_shown(made: Any, page_of: PageOf) -> None:
    posterior = made.posterior(made.items(5), 2)
    other = made.posterior(made.items(5), 3)
    page = page_of(made.content(posterior, alternatives={"3 classes": other}))
    assert "The same answers with 3 classes" in page.text
    assert "three kinds were expected" in page.text
    assert "With three classes, the data are predicted as well" in page.text


def test_an_open_number_of_classes_is_explained(made: Any, page_of: PageOf) -> None:
    posterior, other = made.posterior(made.items(5), 2), made.posterior(made.items(5), 3)
    page = page_of(made.content(posterior, chosen_because="", alternatives={"3 classes": other}))
    assert "The answer is for two classes, the smallest number within the tie." in page.text


def test_findings_of_the_comparison_are_said(small: Any, made: Any, page_of: PageOf) -> None:
    finding = Finding("few", "warning", "the standard errors are too small", "read on")
    page = page_of(made.content(small, comparison=made.comparison(findings=(finding,))))
    assert "The standard errors are too small. Read on." in page.text


def test_results_that_rest_on_the_prior_are_marked(made: Any, page_of: PageOf) -> None:
    few = page_of(made.content(made.posterior(made.items(4), 8, n_cases=10), comparison=None))
    assert "†" in few.text
    assert "rests mostly on the prior" in few.text


def test_enough_cases_leave_no_mark(page: Text) -> None:
    assert "†" not in page.text


def test_cases_are_shown_when_asked_for(small: Any, made: Any, page_of: PageOf) -> None:
    page = page_of(made.content(small, show_cases=True))
    assert "The membership of each case" in page.text
    assert "WP001" in page.text


def test_stephens_is_cited_only_where_labels_were_matched_by_his_criterion(
    content: ReportContent, made: Any
) -> None:
    named = methods_paragraph(Facts(content), {})
    numbered = methods_paragraph(Facts(made.content(made.posterior(made.items(3), 2))), {})
    assert "Stephens" not in named
    assert "Classes were named by rule: managed is where" in named
    assert "(Stephens 2000)" in numbered


def test_methods_paragraph_cites_what_it_uses(content: ReportContent) -> None:
    text = methods_paragraph(Facts(content), {"bayeslca": "0.1.0", "Python": "3.11"})
    for short in re.findall(r"\(([A-Z][^()]*? \d{4})\)", text):
        assert short in REFERENCES
    assert len(cited_in(text)) >= 5
    assert "118 cases" in text
    assert "seven items" in text


def test_the_same_content_gives_the_same_page(
    content: ReportContent, written: WrittenReport, tmp_path: Path
) -> None:
    again = write_report(content, tmp_path)
    assert again.page.read_bytes() == written.page.read_bytes()
    for name, path in written.figures.items():
        assert again.figures[name].read_bytes() == path.read_bytes()
