"""The invented herd example: it comes out the same, can be read, and says that it is invented."""

from __future__ import annotations

import runpy
import shutil
from pathlib import Path

from bayeslca.study.check import check_study
from bayeslca.study.load import load_study

EXAMPLE = Path(__file__).parents[3] / "examples" / "herd_tests"


def test_the_data_come_out_the_same(tmp_path: Path) -> None:
    shutil.copy(EXAMPLE / "generate.py", tmp_path)
    runpy.run_path(str(tmp_path / "generate.py"), run_name="__main__")
    assert (tmp_path / "herds.csv").read_bytes() == (EXAMPLE / "herds.csv").read_bytes()


def test_the_study_can_be_read() -> None:
    study = load_study(EXAMPLE / "study.toml")
    assert study.responses.n_cases == 300
    assert study.responses.groups is not None
    assert study.responses.groups.levels == ("coast", "ridge", "valley")
    assert study.model is not None
    assert study.model.symmetry.prior_group.is_identity
    assert "invented: three veterinarians" in check_study(EXAMPLE / "study.toml")


def test_it_says_that_it_is_invented() -> None:
    assert "Invented data" in (EXAMPLE / "README.md").read_text(encoding="utf-8")
