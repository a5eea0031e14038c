"""Drafting a study file: what it proposes can be read; text from the data stays text."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pandas as pd
import pytest

from bayeslca.exceptions import BayesLCAError, StorageError, StudyError
from bayeslca.study.draft import write_draft
from bayeslca.study.inspect import inspection
from bayeslca.study.load import load_study


def test_every_column_of_a_messy_spreadsheet_appears(messy: Path, tmp_path: Path) -> None:
    said = write_draft(messy, tmp_path / "study.toml")
    text = (tmp_path / "study.toml").read_text(encoding="utf-8")
    for column in pd.read_excel(messy).columns:
        assert f'"{column}"' in text
    assert "case id: every row" in text or "case id: all 118 rows" in text
    assert "free text" in text
    assert "5 items proposed, 2 other columns" in " ".join(said.split())
    assert "confirm the merges" in said
    assert "confirm what was read as no answer" in said


def test_the_draft_of_a_messy_spreadsheet_can_be_read_as_it_is(messy: Path, tmp_path: Path) -> None:
    write_draft(messy, tmp_path / "study.toml")
    study = load_study(tmp_path / "study.toml")
    responses = study.responses
    assert responses.n_cases == 118
    assert [item.categories for item in responses.items[:4]] == [("no", "yes")] * 4
    fees = pd.read_excel(messy)["Pays fees?"].str.strip().str.lower()
    table = responses.summary()
    counts = table[table["item"] == "Pays fees?"].set_index("category")["count"]
    assert counts["yes"] == (fees == "yes").sum()
    assert counts["no"] == (fees == "no").sum()
    water = [item.name for item in responses.items].index("Water test")
    assert responses.items[water].categories == ("0", "1")  # 99 is no answer


def test_text_from_the_file_stays_text(tmp_path: Path) -> None:
    evil = 'a"\n[model]\nclasses = 9 #'
    pd.DataFrame(
        {evil: ["yes", "no"] * 5, 'q"2': ['"""', "\\no\\"] * 5, "q]3": ["x\ty", "]"] * 5}
    ).to_parquet(tmp_path / "evil.parquet")
    write_draft(tmp_path / "evil.parquet", tmp_path / "study.toml")
    content = tomllib.loads((tmp_path / "study.toml").read_text(encoding="utf-8"))
    assert "classes" not in content["model"]
    assert content["answers"]["items"] == [evil, 'q"2', "q]3"]
    assert load_study(tmp_path / "study.toml").responses.n_cases == 10


def test_a_study_file_is_not_overwritten_unless_asked(folder: Path) -> None:
    before = (folder / "study.toml").read_text(encoding="utf-8")
    with pytest.raises(StorageError, match="is there already"):
        write_draft(folder / "answers.csv", folder / "study.toml")
    assert (folder / "study.toml").read_text(encoding="utf-8") == before
    write_draft(folder / "answers.csv", folder / "study.toml", replace=True)
    assert (folder / "study.toml").read_text(encoding="utf-8") != before


def test_a_file_without_items_is_refused(tmp_path: Path) -> None:
    (tmp_path / "ids.csv").write_text(
        "id,km\n" + "\n".join(f"c{i},{i * 1.37}" for i in range(80)), encoding="utf-8"
    )
    with pytest.raises(StudyError, match="no column looks like an item"):
        write_draft(tmp_path / "ids.csv", tmp_path / "study.toml")
    assert not (tmp_path / "study.toml").exists()


def test_an_output_in_no_folder_is_refused(folder: Path) -> None:
    with pytest.raises(BayesLCAError, match="does not exist"):
        write_draft(folder / "answers.csv", folder / "nowhere" / "study.toml")


def test_inspection_fits_a_terminal_and_names_what_is_odd(messy: Path) -> None:
    text = inspection(messy)
    assert max(len(line) for line in text.splitlines()) <= 80
    assert "118 rows, 7 columns" in text
    assert "probably one answer: 'yes'" in text
    assert 'probably no answer: "don\'t know"' in text
    assert "'99'" in text
