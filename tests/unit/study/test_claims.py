"""Hypotheses and quantities of a study file: read before anything is sampled."""

from __future__ import annotations

from pathlib import Path

import pytest

from bayeslca.exceptions import StudyError
from bayeslca.study.check import check_study
from bayeslca.study.claims import check_theory
from bayeslca.study.load import load_study

THEORY = """
[[hypotheses]]
claim = "Managed ones meet"
statements = ["P(meets=yes | managed) > 0.5"]
planned = true

[quantities]
gap = "P(meets=yes | managed) - P(meets=yes | lapsed)"
"""


def with_theory(folder: Path, theory: str) -> Path:
    path = folder / "study.toml"
    path.write_text(path.read_text(encoding="utf-8") + theory, encoding="utf-8")
    return path


def test_check_says_what_will_be_asked(folder: Path) -> None:
    said = check_study(with_theory(folder, THEORY))
    assert "put 1 hypothesis and 1 quantity to the posterior" in said


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("> 0.5", "", ["[[hypotheses]] 'Managed ones meet'", "write a comparison"]),
        ("> 0.5", "~ Beta(1, 1)", ["write a comparison"]),
        ("P(meets=yes | managed) -", "P(met=yes | managed) -", ["[quantities] 'gap'", "meets"]),
        ("- P(meets=yes | lapsed)", "> 0.1", ["write no comparison"]),
        ("P(meets=yes | managed) >", "P(meets=yes | manged) >", ["near names: 'managed'", "^"]),
    ],
)
def test_what_cannot_be_asked_is_refused(folder: Path, old: str, new: str, said: list[str]) -> None:
    study = load_study(with_theory(folder, THEORY.replace(old, new)))
    with pytest.raises(StudyError) as error:
        check_theory(study)
    for part in ["study.toml", *said]:
        assert part in str(error.value)


def test_a_theory_needs_classes(folder: Path) -> None:
    path = with_theory(folder, THEORY)
    text = path.read_text(encoding="utf-8")
    path.write_text(text.replace('classes = ["managed", "lapsed"]\n', ""), encoding="utf-8")
    with pytest.raises(StudyError, match="name the classes"):
        load_study(path)
