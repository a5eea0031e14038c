"""Placing in a run and on the command line: the study's rule, named cases, cautions."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from bayeslca.exceptions import StudyError
from bayeslca.study.job import run_study

QUICK = "draws = 100\ness = 100\nr_hat = 1.1\n"
Run = Callable[..., tuple[int, str, str]]


def said(folder: Path, more: str) -> Path:
    path = folder / "study.toml"
    path.write_text(path.read_text(encoding="utf-8") + QUICK + more, encoding="utf-8")
    return path


def test_a_run_places_by_its_rule_and_new_cases_are_placed_alike(folder: Path, run: Run) -> None:
    more = "\n[assignment]\nat_most = 0.3\ncosts = { managed = { lapsed = 2 } }\n"
    results = folder / "results"
    run_study(said(folder, more + "plausible_values = 3\n"), results, quiet=True)
    table = pd.read_csv(results / "membership.csv")
    assert set(table["placed_in"]) <= {"managed", "lapsed", "unassigned"}
    cost = (2 * table["probability_managed"]).clip(upper=table["probability_lapsed"])
    assert (table["expected_cost"] - cost).abs().max() < 1e-9
    drawn = pd.read_csv(results / "plausible_values.csv")
    assert list(drawn.columns) == ["case", "draw_1", "draw_2", "draw_3", "made"]
    assert drawn["made"].str.contains("attenuated").all()
    page = (results / "report.html").read_text(encoding="utf-8")
    assert "2 for managed placed in lapsed" in page
    assert "local rules and licensed practice" in page
    out = folder / "out.csv"
    code, words, _ = run("assign", results, folder / "answers.csv", "-o", out)
    assert code == 0
    assert "licensed practice" in " ".join(words.split())
    pd.testing.assert_frame_equal(pd.read_csv(out), table)
    strict = folder / "strict.csv"
    _, words, _ = run("assign", results, folder / "answers.csv", "-o", strict, "--at-most", 0.0001)
    assert "unassigned: 6" in words
    assert "(expected cost above 0.0001): a, b, c, d, e and f" in words
    code, _, error = run("assign", results, folder / "answers.csv", "-o", out, "--at-most", -1)
    assert code == 2
    assert "from 0 up" in error


@pytest.mark.parametrize(
    ("more", "why"),
    [
        ("costs = { manged = { lapsed = 2 } }", "near names: 'managed'"),
        ("costs = { managed = { lapsed = -2 } }", "greater than or equal to 0"),
        ("at_most = nan", "finite"),
        ("at_least = 0.8", "near names: 'at_most'|at_most"),
    ],
)
def test_wrong_rules_are_refused_before_sampling(folder: Path, more: str, why: str) -> None:
    with pytest.raises(StudyError, match=why):
        run_study(said(folder, f"\n[assignment]\n{more}\n"), folder / "results", quiet=True)
    assert not (folder / "results").exists()


def test_costs_need_named_classes(folder: Path) -> None:
    path = said(folder, "\n[assignment]\ncosts = { managed = { lapsed = 2 } }\n")
    text = path.read_text(encoding="utf-8")
    a, b = text.index("[model]"), text.index("[class_count]")
    path.write_text(text[:a] + text[b:], encoding="utf-8")
    with pytest.raises(StudyError, match="name the classes"):
        run_study(path, folder / "results", quiet=True)
