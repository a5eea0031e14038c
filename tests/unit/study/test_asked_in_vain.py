"""What a study asks for and cannot get is refused by `check` and `run` alike; the plan names it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

Run = Callable[..., tuple[int, str, str]]


def said(folder: Path, old: str, new: str) -> Path:
    path = folder / "study.toml"
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("counts", "more", "why"),
    [
        ("compare = []\nfolds = 2", "", "[class_count] folds: it is of the numbers"),
        ("compare = []\nexact = true", "", "[class_count] exact"),
        ('compare = []\nalso_under = ["uniform"]', "", "[class_count] also_under"),
        ("compare = [1, 2]\nfolds = 7", "", "folds=7 for 6 cases"),
        ('compare = [2]\nalso_under = ["uniform", "uniform"]', "", "'uniform' more than once"),
        ("compare = [2]", '[priors]\nsensitivity = false\nrefit = ["uniform"]', "sensitivity"),
        ("compare = [2]", '[priors]\nrefit = ["uniform", "uniform"]', "more than once"),
        ("compare = [1, 3]", "[maximum_likelihood]\nbootstrap = 9", "no two numbers in a row"),
        ("compare = [2]", "[assignment]\ncosts = { managd = { lapsed = 2 } }", "'managed'"),
        ("compare = [2]", "[assignment]\nat_most = 20", "20 is above the highest cost, 1"),
    ],
)
def test_what_cannot_be_got_is_refused(
    folder: Path, run: Run, counts: str, more: str, why: str
) -> None:
    path = said(folder, "compare = [1, 2]", f"{counts}\n\n{more}\n")
    for words in (("check", path), ("run", path, "-o", folder / "results")):
        code, _, error = run(*words)
        assert code == 2
        assert why in " ".join(error.split())


def test_the_plan_names_what_takes_long(folder: Path, run: Run) -> None:
    asked = 'compare = [1, 2]\nfolds = 3\nexact = true\nalso_under = ["uniform"]\n'
    more = (
        '[priors]\nrefit = ["Jeffreys"]\n\n[maximum_likelihood]\nbootstrap = 99\n\n[assignment]\n'
    )
    code, out, _ = run("check", said(folder, "compare = [1, 2]", f"{asked}\n{more}"))
    words = " ".join(out.split())
    assert code == 0
    for part in (
        "by 3 folds",
        "without one case of every response pattern",
        "each again under priors: uniform",
        "model again under priors: Jeffreys",
        "99 tables drawn",
        "expected cost is at most 0.2",
        "and more for what is refitted",
    ):
        assert part in words
