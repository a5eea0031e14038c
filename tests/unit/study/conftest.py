"""A small study in a folder of its own."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from bayeslca import cli

Run = Callable[..., tuple[int, str, str]]

ANSWERS = """\
committee,fees,accounts,meets,district
a,yes,yes,yes,hill
b,yes,no,yes,hill
c,no,no,no,plain
d,no,no,,plain
e,yes,yes,yes,hill
f,no,yes,no,plain
"""

STUDY = """\
[study]
title = "Small"

[answers]
file = "answers.csv"
case = "committee"
items = ["fees", "accounts", "meets"]

[model]
classes = ["managed", "lapsed"]
statements = ["managed is where P(fees=yes) is highest"]

[class_count]
compare = [1, 2]

[sampling]
seed = 7
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Return a folder with answers.csv and study.toml."""
    (tmp_path / "answers.csv").write_text(ANSWERS, encoding="utf-8")
    (tmp_path / "study.toml").write_text(STUDY, encoding="utf-8")
    return tmp_path


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Run:
    """Return a function that runs the command line and gives exit code, output and errors."""

    def call(*words: object) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["bayeslca", *map(str, words)])
        code = 0
        try:
            cli.main()
        except SystemExit as leaving:
            code = int(leaving.code or 0)
        said = capsys.readouterr()
        return code, said.out, said.err

    return call
