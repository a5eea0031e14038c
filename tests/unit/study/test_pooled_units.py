"""Pooled units in a study file: keys, what they fit, the report's section, refusals in words."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from bayeslca.exceptions import StudyError
from bayeslca.study.load import load_study

GROUPED = 'case = "committee"\ngroup = "district"'


def change(folder: Path, *pairs: tuple[str, str]) -> Path:
    path = folder / "study.toml"
    text = path.read_text(encoding="utf-8")
    for old, new in pairs:
        assert old in text
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("key", "message"),
    [
        ("pooled = true", "needs groups; name their column"),
        ("spread_prior = [2, 2]", "spread_prior is about pooled units"),
        ("pooled = 1", "pooled"),
        ("pooled = true\nspread_prior = [0, 1]", "spread_prior"),
    ],
)
def test_what_cannot_be_pooled_is_refused_by_its_key(folder, key, message):
    path = change(folder, ("[model]", f"[model]\n{key}"))
    with pytest.raises(StudyError, match=message):
        load_study(path)


def test_pooled_units_with_weights_are_refused_before_anything_is_sampled(folder):
    keys = GROUPED + '\nweight = "w"'
    path = change(folder, ('case = "committee"', keys), ("[model]", "[model]\npooled = true"))
    with pytest.raises(StudyError, match=r"weight and \[model\] pooled do not go together"):
        load_study(path)


def test_the_model_and_the_compared_counts_are_pooled(folder):
    path = change(
        folder,
        ('case = "committee"', GROUPED),
        ("[model]", "[model]\npooled = true\nspread_prior = [1, 3]"),
    )
    study = load_study(path)
    assert study.model is not None
    assert study.model.pooled
    assert study.model.spread_prior == (1.0, 3.0)
    assert study.pooling(1) == {}
    assert study.pooling(3) == {"pooled": True, "spread_prior": (1.0, 3.0)}


@pytest.fixture
def many(folder: Path) -> Path:
    """Write a study of 40 committees in 8 districts."""
    rng = np.random.default_rng(20261216)
    lines = ["committee,fees,accounts,meets,district"]
    for number in range(40):
        district = "ABCDEFGH"[number % 8]
        managed = rng.random() < (0.8 if district < "E" else 0.3)
        answers = ["yes" if rng.random() < (0.9 if managed else 0.1) else "no" for _ in range(3)]
        lines.append(f"c{number}," + ",".join(answers) + f",{district}")
    (folder / "answers.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    change(
        folder,
        ('case = "committee"', GROUPED),
        ("[model]", "[model]\npooled = true"),
        ("compare = [1, 2]", "compare = []"),
        ("seed = 7", "seed = 7\ndraws = 200\ness = 200\n[groups]\ncompare_pooled = true"),
    )
    return folder


def test_a_run_reports_unit_by_unit_and_saves_what_it_fitted(many, run):
    code, out, err = run("check", many / "study.toml")
    assert code == 0, err
    assert "Pooled over 8 units (district)" in out
    assert "leaving one unit out" in out

    code, out, err = run("run", many / "study.toml", "-o", many / "results")
    assert code in (0, 1), err
    page = (many / "results" / "report.html").read_text(encoding="utf-8")
    for text in (
        "How common each class is, district by district",
        "In a district that was not observed, expect",
        "Would another prior on the spread change this?",
        "One unit left out at a time",
        "Do cases of one district go together",
    ):
        assert text in page, text
    tables = many / "results" / "tables"
    for name in ("units", "between_units", "spread_sensitivity", "units_left_out"):
        assert (tables / f"{name}.csv").exists()
    assert (many / "results" / "fits" / "units-alone.nc").exists()
    assert (many / "results" / "figures" / "units.png").exists()

    code, out, err = run(
        "ask", many / "results", "P(managed | district=A) > P(managed | district=H)"
    )
    assert code == 0, err
    assert "has the probability" in " ".join(out.split())
