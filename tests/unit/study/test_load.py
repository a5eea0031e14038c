"""Reading study files: what is wrong is said with file, line, key and remedy."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bayeslca.exceptions import BayesLCAError, ResponsesError, StudyError
from bayeslca.study.load import load_study


def test_a_study_gives_responses_and_model(folder: Path) -> None:
    study = load_study(folder / "study.toml")
    assert study.responses.n_cases == 6
    assert study.model is not None
    assert study.model.class_names == ("managed", "lapsed")
    assert study.statements == ("managed is where P(fees=yes) is highest",)


def test_paths_are_relative_to_the_study_file(
    folder: Path, monkeypatch: pytest.MonkeyPatch, tmp_path_factory: pytest.TempPathFactory
) -> None:
    monkeypatch.chdir(tmp_path_factory.mktemp("elsewhere"))
    assert load_study(folder / "study.toml").responses.n_cases == 6


def test_statements_may_carry_a_source(folder: Path) -> None:
    edit(
        folder,
        'statements = ["managed is where P(fees=yes) is highest"]',
        'statements = [{ statement = "P(fees=yes | managed) ~ Beta(9, 2)", source = "a panel" }]',
    )
    study = load_study(folder / "study.toml")
    assert study.statement_sources == {"P(fees=yes | managed) ~ Beta(9, 2)": "a panel"}
    assert study.model is not None
    assert dict(study.model.statement_sources) == dict(study.statement_sources)


def test_an_open_number_of_classes_takes_statements_about_all_classes(folder: Path) -> None:
    edit(folder, 'classes = ["managed", "lapsed"]\n', "")
    edit(
        folder,
        'statements = ["managed is where P(fees=yes) is highest"]',
        'statements = ["P(fees=yes | .) ~ Beta(2, 2)"]',
    )
    study = load_study(folder / "study.toml")
    assert study.model is None
    assert study.shared_statements == ("P(fees=yes | .) ~ Beta(2, 2)",)


def test_whole_numbers_stand_for_their_digits(folder: Path) -> None:
    (folder / "answers.csv").write_text(
        "committee,fees,accounts,meets\na,1,0,1\nb,0,0,1\nc,1,1,0\nd,8,1,0\n", encoding="utf-8"
    )
    edit(folder, "[model]", "[items.fees]\ncategories = [0, 1]\nno_answer = [8]\n\n[model]")
    edit(folder, "fees=yes", "fees=1")
    responses = load_study(folder / "study.toml").responses
    assert responses.items[0].categories == ("0", "1")
    assert responses.codes[3, 0] == -1


def edit(folder: Path, old: str, new: str) -> None:
    path = folder / "study.toml"
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


HYPOTHESIS = """[[hypotheses]]
claim = 'x'
statements = ['P(managed) > 0.5']
"""

WRONG = [
    # what is replaced, by what, and what the message must hold: place, problem, remedy
    ("seed = 7", "seed = ", ["study.toml", "not valid TOML", "line"]),
    ("seed = 7", "seed = 7\nseed = 8", ["study.toml", "not valid TOML"]),
    ("seed = 7", "sead = 7", ["line 17", "[sampling] sead", "unknown key", "near names: 'seed'"]),
    ("seed = 7", 'seed = "seven"', ["line 17", "[sampling] seed", "'seven'", "whole number"]),
    ("seed = 7", "seed = -1", ["[sampling] seed", "-1", "greater than or equal to 0"]),
    ("seed = 7", "chains = 1", ["[sampling] chains", "greater than or equal to 2"]),
    ("seed = 7", 'sampler = "gibs"', ["[sampling] sampler", "'gibs'", "'gibbs'"]),
    ("[sampling]", "[samplings]", ["line 16", "samplings", "unknown key", "'sampling'"]),
    ('title = "Small"', "titel = 1", ["line 2", "[study] titel", "near names: 'title'"]),
    ('title = "Small"', "title = ['a']", ["[study] title", "string"]),
    ('file = "answers.csv"\n', "", ["[answers] file", "is missing", "Add file = ..."]),
    ('file = "answers.csv"', 'flie = "answers.csv"', ["unknown key 'flie'", "'file'"]),
    ('items = ["fees", "accounts", "meets"]\n', "", ["[answers] items", "is missing"]),
    ('items = ["fees", "accounts", "meets"]', "items = []", ["[answers] items", "at least 1"]),
    ('items = ["fees", "accounts", "meets"]', 'items = "fees"', ["[answers] items", "list"]),
    (
        'items = ["fees", "accounts", "meets"]',
        'items = ["fees", "fees"]',
        ["[answers] items", "'fees' more than once", "once"],
    ),
    ("[class_count]", "[items.feas]\n[class_count]", ["[items.feas]", "does not list"]),
    ("[class_count]", "[items.fees]\nyess = 'yes'\n[class_count]", ["near names: 'yes'"]),
    ("[class_count]", "[items.fees]\nmerge = ['x']\n[class_count]", ["[items.fees] merge"]),
    ("compare = [1, 2]", "compare = [0, 2]", ["[class_count] compare", "0", "or equal to 1"]),
    ("compare = [1, 2]", "compare = [2, 2]", ["[class_count] compare", "more than once"]),
    ("compare = [1, 2]", "compare = 2", ["[class_count] compare", "list"]),
    (
        "compare = [1, 2]",
        "compare = [1, 2]\nprior = { 1 = 0.5, 2 = 0.2, 3 = 0.3 }",
        ["prior names '3'", "compare does not list"],
    ),
    ("compare = [1, 2]", "compare = [1, 2]\nprior = { 1 = 1 }", ["prior says nothing of 2"]),
    ("compare = [1, 2]", "compare = [1, 2]\nprior = { 1 = 1.5, 2 = -0.5 }", ["prior", "below 0"]),
    (
        "compare = [1, 2]",
        "compare = [1, 2]\nprior = { 1 = 0.5, 2 = 0.4 }",
        ["prior adds up to 0.9, not to 1"],
    ),
    ("compare = [1, 2]", 'prior = "flat"', ["[class_count] prior", "'uniform' or a table"]),
    ("compare = [1, 2]", 'exact = "yes"', ["[class_count] exact", "true or false"]),
    (
        "[class_count]",
        'answered_together = [{ items = ["fees", "meets"], class = ["managed"] }]\n[class_count]',
        ["unknown key 'class' (near names: 'classes')"],
    ),
    (
        "[class_count]",
        'answered_together = ["fees", "meets"]\n[class_count]',
        ["'fees'; should be a list", "or a table"],
    ),
    ('classes = ["managed", "lapsed"]', "classes = 0", ["[model] classes", "from 1 up"]),
    ('classes = ["managed", "lapsed"]', "classes = []", ["[model] classes", "list of names"]),
    ('classes = ["managed", "lapsed"]\n', "", ["line", "[model] statements", "Name the classes"]),
    (
        'classes = ["managed", "lapsed"]\nstatements = ["managed is where P(fees=yes) is highest"]'
        "\n\n[class_count]\ncompare = [1, 2]",
        "[class_count]\ncompare = []",
        ["nothing to fit", "give one of them"],
    ),
    ("seed = 7", "seed = 7\n[groups]\ncompare_free = true", ["[groups] compare_free", "group"]),
    ('["managed", "lapsed"]', '["managed", "lapsed"]\nfree_by_group = true', ["free_by_group"]),
    ("[class_count]", "[quantities]\n'gap' = 3\n[class_count]", ["[quantities] gap", "string"]),
    ("[class_count]", "[[hypotheses]]\nclaim = 'x'\n[class_count]", ["statements", "is missing"]),
    ("[class_count]", f"{HYPOTHESIS}weight = 2\n[class_count]", ["a weight, but no rivals"]),
    ("[class_count]", f"{HYPOTHESIS}rivals = 'a'\n[class_count]", ["one hypothesis only"]),
    ("[class_count]", f"{HYPOTHESIS}{HYPOTHESIS}[class_count]", ["the claim 'x' twice"]),
    ("[class_count]", f"{HYPOTHESIS}planed = true\n[class_count]", ["near names: 'planned'"]),
    ('case = "committee"', 'case = "committee"\nweight = "w"', ["weight: there is no column 'w'"]),
    ('case = "committee"', 'case = "committee"\nstratum = "s"', ["stratum: there is no column"]),
    ("seed = 7", "seed = 7\npseudo_samples = 3", ["[sampling] pseudo_samples", "20"]),
    ("seed = 7", "seed = 7\n[report]\ninterval = 95", ["[report] interval", "less than 1"]),
    ("[class_count]", "[items.fees]\nordered = 'yes'\n[class_count]", ["ordered", "true or false"]),
    (
        "seed = 7",
        "seed = 7\n[report]\nshow_cases = 'maybe'",
        ["[report] show_cases", "true or false"],
    ),
    ('file = "answers.csv"', 'file = "answer.csv"', ["answer.csv", "near names: 'answers.csv'"]),
    ('case = "committee"', 'case = "comittee"', ["'comittee'", "near names: 'committee'"]),
    ('"meets"]', '"meats"]', ["'meats'", "near names: 'meets'"]),
    ('case = "committee"', 'group = "fees"', ["fees"]),
    (
        "managed is where P(fees=yes) is highest",
        "managed is where P(fees=maybe) is highest",
        ["study.toml, line 11", "'maybe'", "Its categories are", "^"],
    ),
    (
        "managed is where P(fees=yes) is highest",
        "P(fees=yes | managd) ~ Beta(2, 2)",
        ["'managd'", "near names: 'managed'", "^"],
    ),
    (
        '["managed is where P(fees=yes) is highest"]',
        "[]",
        ["study.toml, line 9, model: nothing in the study tells"],
    ),
    ('["managed is where P(fees=yes) is highest"]', "[1]", ["[model] statements", "1"]),
    (
        '["managed is where P(fees=yes) is highest"]',
        '[{ statement = "P(fees=yes | managed) ~ Beta(9, 2)", scource = "x" }]',
        ["[model.statements] scource", "near names: 'source'"],
    ),
]


@pytest.mark.parametrize(("old", "new", "said"), WRONG)
def test_what_is_wrong_is_said(folder: Path, old: str, new: str, said: list[str]) -> None:
    edit(folder, old, new)
    with pytest.raises(BayesLCAError) as caught:
        _ = load_study(folder / "study.toml").model
    message = str(caught.value)
    for part in said:
        assert part in message


def test_a_missing_study_file_names_near_ones(folder: Path) -> None:
    with pytest.raises(StudyError, match=r"near names: 'study\.toml'.*bayeslca draft"):
        load_study(folder / "studdy.toml")


def test_a_folder_is_not_a_study_file(folder: Path) -> None:
    with pytest.raises(StudyError, match="is a folder"):
        load_study(folder)


def test_a_study_file_in_another_encoding_is_refused(folder: Path) -> None:
    (folder / "study.toml").write_bytes("[study]\ntitle = 'Gëmeinde'".encode("latin-1"))
    with pytest.raises(StudyError, match="UTF-8"):
        load_study(folder / "study.toml")


def test_answers_are_read_with_their_own_errors(folder: Path) -> None:
    (folder / "answers.csv").write_text(
        "committee,fees,accounts,meets\na,yes,no,no\na,no,yes,yes\n", encoding="utf-8"
    )
    with pytest.raises(ResponsesError, match=r"committee.*lines 2, 3"):
        _ = load_study(folder / "study.toml").responses


VALUES = st.recursive(
    st.none() | st.booleans() | st.integers(-3, 200) | st.text(max_size=8),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=6), inner, max_size=3)
    ),
    max_leaves=6,
)


@settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    section=st.sampled_from(["study", "answers", "model", "class_count", "sampling", "report"]),
    key=st.sampled_from(["title", "items", "classes", "statements", "compare", "seed", "interval"]),
    value=VALUES,
)
def test_no_value_gives_another_kind_of_error(
    folder: Path, section: str, key: str, value: object
) -> None:
    text = (folder / "study.toml").read_text(encoding="utf-8")
    path = folder / "fuzzed.toml"
    if value is None:
        return
    line = f"{key} = {toml_value(value)}\n"
    header = f"[{section}]\n"
    changed = text.replace(header, header + line) if header in text else text + header + line
    path.write_text(changed, encoding="utf-8")
    try:
        _ = load_study(path).model
    except BayesLCAError as error:
        assert str(error)  # noqa: PT017 - any other exception fails the test


@settings(
    max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(text=st.text(max_size=120))
def test_no_text_gives_another_kind_of_error(folder: Path, text: str) -> None:
    path = folder / "fuzzed.toml"
    path.write_text(text, encoding="utf-8", errors="replace")
    with pytest.raises(BayesLCAError):
        load_study(path)


def toml_value(value: object) -> str:
    import json

    if isinstance(value, dict):
        return (
            "{ " + ", ".join(f"{json.dumps(k)} = {toml_value(v)}" for k, v in value.items()) + " }"
        )
    if isinstance(value, list):
        return "[" + ", ".join(toml_value(v) for v in value if v is not None) + "]"
    return json.dumps(value)
