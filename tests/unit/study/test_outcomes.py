"""Outcomes in a study file: what is wrong is said before anything is sampled."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

DAYS = [3, 1, 30, 12, 0, 44]
WEIGHT = "[sampling]"


def with_outcome(folder: Path, lines: str, days: list[object] = DAYS) -> Path:  # type: ignore[assignment]
    answers = (folder / "answers.csv").read_text("utf-8").splitlines()
    rows = [f"{answers[0]},days", *(f"{a},{d}" for a, d in zip(answers[1:], days, strict=True))]
    (folder / "answers.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    study = folder / "study.toml"
    text = study.read_text("utf-8").replace(WEIGHT, f"[[outcomes]]\n{lines}\n{WEIGHT}")
    study.write_text(text, encoding="utf-8")
    return study


COUNT = 'column = "days"\nkind = "count"\n'


@pytest.mark.parametrize(
    ("lines", "days", "says"),
    [
        (COUNT.replace("days", "dais"), DAYS, "there is no column 'dais' (near names: 'days')"),
        (COUNT.replace("count", "counts"), DAYS, "kind"),
        (COUNT, [3, 1, -30, 12, 0, 44], "negative count: -30.0 (case c)"),
        (COUNT, [3, 1, "many", 12, 0, 44], "'many'"),
        (COUNT, [3] * 6, "is constant"),
        (COUNT + 'orders = ["managed < laps"]', DAYS, "no class 'laps' (near names: 'lapsed')"),
        (COUNT + 'adjusted_for = "distric"', DAYS, "'distric'"),
        (COUNT + 'levels = ["1", "2"]', DAYS, "levels are of ordered outcomes"),
        (COUNT.replace("days", "fees"), DAYS, "is an item of [answers]"),
        (COUNT + "ways = []", DAYS, "ways is empty"),
        (COUNT + 'wayz = ["cut"]', DAYS, "unknown key 'wayz' (near names: 'ways')"),
        (COUNT + "\n[[outcomes]]\n" + COUNT, DAYS, "stands twice"),
    ],
)
def test_what_is_wrong_is_said_first(
    folder: Path,
    run: Callable[..., tuple[int, str, str]],
    lines: str,
    days: list[object],
    says: str,
) -> None:
    study = with_outcome(folder, lines, days)
    code, out, err = run("check", study)
    assert code == 2
    assert says in " ".join((out + err).split())
    assert "Traceback" not in out + err


def test_check_says_what_run_will_do(
    folder: Path, run: Callable[..., tuple[int, str, str]]
) -> None:
    study = with_outcome(folder, COUNT + 'label = "Days out"\norders = ["managed < lapsed"]')
    code, out, _ = run("check", study)
    assert code == 0
    assert "- relate the count outcome Days out to class" in out


def test_check_says_which_values_are_missing(
    folder: Path, run: Callable[..., tuple[int, str, str]]
) -> None:
    study = with_outcome(folder, COUNT, [3, 1, "", 12, 0, 44])
    code, out, _ = run("check", study)
    assert code == 0
    assert "1 of 6 cases have no value of days" in " ".join(out.split())


def test_one_section_in_place_of_a_list_is_refused_in_words(
    folder: Path, run: Callable[..., tuple[int, str, str]]
) -> None:
    study = with_outcome(folder, COUNT)
    study.write_text(study.read_text("utf-8").replace("[[outcomes]]", "[outcomes]"), "utf-8")
    code, _, err = run("check", study)
    assert code == 2
    assert "write it as [[outcomes]]" in err
