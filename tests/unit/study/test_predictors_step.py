"""Predictors in a study file: what is wrong is named with its place, before anything is sampled."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from bayeslca.exceptions import StudyError
from bayeslca.study.check import check_study
from bayeslca.study.load import load_study
from bayeslca.study.predictors import check_predictors

EXAMPLE = Path(__file__).parents[3] / "examples" / "water_points"
BASE = """
[answers]
file = "committees.csv"
case = "committee"
items = ["fees", "accounts", "meets", "mechanic"]

[model]
classes = ["active", "lapsed"]
statements = ["active is where P(fees=yes) is highest"]

[class_count]
compare = []

[predictors]
"""


def study(tmp_path, predictors):
    shutil.copy(EXAMPLE / "committees.csv", tmp_path)
    path = tmp_path / "study.toml"
    path.write_text(BASE + predictors, encoding="utf-8")
    return load_study(path)


def test_covariates_are_read_like_the_answers(tmp_path):
    design = check_predictors(study(tmp_path, 'formula = "district + log(km_to_parts)"'))
    assert design.used.sum() == 118
    assert design.covariates == ("district", "km_to_parts")


def test_check_says_what_will_be_done(tmp_path):
    found = study(tmp_path, 'formula = "district"\nways = ["cut", "three_steps"]')
    assert "- relate class to district (cut, three steps)" in check_study(found.path)


@pytest.mark.parametrize(
    ("predictors", "message"),
    [
        (
            'formula = "distrikt"',
            r"study.toml, \[predictors\].*'distrikt' \(near names: 'district'",
        ),
        ('formula = "district +"', "cannot be read"),
        ('formula = "days_out"\nagainst = "activ"', r"no class 'activ' \(near names: 'active'"),
        ('formula = "district + fees"', "'fees' is an item of"),
        ('formula = "committee"', "'committee' holds the ids of cases"),
        ('formula = "km to parts"', "between backticks"),
        ('formula = "x"\nfile = "other.csv"', "holds none of the 118 cases"),
        ('formula = "x"\nfile = "twice.csv"', "'WP001' in lines 2, 3"),
        ('formula = "x"\nfile = "same.csv"', "covariate 'x' is 1 in all 2 cases"),
        ('formula = "x"\nfile = "same.csv"\nmissing = "refuse"', "116 of 118 cases miss"),
    ],
)
def test_what_is_wrong_is_named(tmp_path, predictors, message):
    for name, rows in {
        "other.csv": "X1,1\nX2,2\n",
        "twice.csv": "WP001,1\nWP001,2\n",
        "same.csv": "WP001,1\nWP002,1\n",
    }.items():
        (tmp_path / name).write_text("committee,x\n" + rows, encoding="utf-8")
    with pytest.raises(StudyError, match=message):
        check_predictors(study(tmp_path, predictors))


def test_one_class_cannot_be_predicted(tmp_path):
    found = study(tmp_path, 'formula = "district"')
    text = found.path.read_text("utf-8").replace('["active", "lapsed"]', "1")
    lines = [line for line in text.splitlines() if not line.startswith("statements")]
    found.path.write_text("\n".join(lines), encoding="utf-8")
    with pytest.raises(StudyError, match="has one class"):
        check_predictors(load_study(found.path))


def test_a_list_of_predictors_is_refused_in_words(tmp_path):
    path = study(tmp_path, 'formula = "district"').path
    path.write_text(path.read_text("utf-8").replace("[predictors]", "[[predictors]]"))
    with pytest.raises(StudyError, match=r"write it as \[predictors\], not \[\[predictors\]\]"):
        load_study(path)


@pytest.mark.parametrize(
    ("predictors", "message"),
    [
        ('formula = "district"\nway = ["cut"]', r"unknown key 'way' \(near names: 'ways'"),
        ('formula = "district"\nways = ["both"]', "joint"),
        ("", "formula: is missing"),
    ],
)
def test_keys_are_checked(tmp_path, predictors, message):
    with pytest.raises(StudyError, match=message):
        study(tmp_path, predictors)
