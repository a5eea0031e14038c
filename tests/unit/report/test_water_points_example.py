"""The demo: the file comes from its generator, and says that it is invented."""

from __future__ import annotations

import csv
import runpy
import shutil
import tomllib
from pathlib import Path

FOLDER = Path(__file__).parents[3] / "examples" / "water_points"
PRACTICES = ["fees", "accounts", "spare_parts", "mechanic", "fenced", "meets", "tests_water"]


def read() -> list[dict[str, str]]:
    with (FOLDER / "committees.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_the_generator_writes_the_file_that_is_there(tmp_path: Path) -> None:
    shutil.copy(FOLDER / "generate.py", tmp_path)
    runpy.run_path(str(tmp_path / "generate.py"), run_name="__main__")
    assert (tmp_path / "committees.csv").read_bytes() == (FOLDER / "committees.csv").read_bytes()


def test_there_are_118_committees_with_seven_practices_and_a_few_missing_answers() -> None:
    rows = read()
    answers = [row[name] for row in rows for name in PRACTICES]
    assert len(rows) == len({row["committee"] for row in rows}) == 118
    assert set(answers) == {"yes", "no", ""}
    assert 3 <= answers.count("") <= 30


def test_the_study_asks_about_those_practices() -> None:
    study = tomllib.loads((FOLDER / "study.toml").read_text(encoding="utf-8"))
    assert study["answers"]["items"] == PRACTICES
    assert study["model"]["classes"] == ["managed", "informal", "lapsed"]
    assert all("source" in s for s in study["model"]["statements"] if isinstance(s, dict))


def test_the_readme_says_that_it_is_invented() -> None:
    assert "invented" in (FOLDER / "README.md").read_text(encoding="utf-8").splitlines()[0]
