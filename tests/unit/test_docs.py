"""Every code block of README and docs runs, and prints what the page shows.

The blocks of a page run in order, in an empty folder that holds the files the page names in a
comment (``<!-- files: ... -->``, copied by name; ``<!-- files in place: ... -->``, copied with
their folders).

- ``python`` blocks share one namespace.
- ``console`` blocks: lines that begin with ``$ `` are commands of bayeslca, the others are what
  the last of them prints. ``<!-- exit code: 2 -->`` before the block says which code is right.
- ``toml`` blocks are checked as study files or parts of one; one whose first line is a file name
  (``# study.toml``) is written to that file.
- ``text`` blocks are what the block before them prints.

In what is shown, ``...`` stands for anything. Whole numbers must be exact; numbers with a point
come from sampling, and may differ by 2 in the last digit or by 3 %. Blocks that cannot run say why:
``<!-- not run: reason -->``.
"""

from __future__ import annotations

import contextlib
import io
import re
import shlex
import shutil
import sys
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

import bayeslca.cli
from bayeslca.study.load import load_study
from bayeslca.study.schema import StudyFile

ROOT = Path(__file__).parents[2]
PAGES = [ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md"))]
NEED_PYMC = {"pymc.md"}
NUMBER = r"[+-]?(?:\d[\d,]*)(?:\.\d+)?"
FENCE = re.compile(
    r"(?:<!-- (?P<said>[^\n]*?) -->\n+)?```(?P<kind>\w*)\n(?P<text>.*?)^```$", re.M | re.S
)
TEST_NAME = re.compile(r"`(tests/[\w/]+\.py)(?:::(\w+))?`")
LINK = re.compile(r"\]\((?!https?:|#)([^)#\s]+)")


@dataclass(frozen=True)
class Block:
    """A code block of a page."""

    kind: str
    text: str
    said: str
    line: int


def blocks_of(page: Path) -> list[Block]:
    text = page.read_text(encoding="utf-8")
    return [
        Block(m["kind"], m["text"], m["said"] or "", text.count("\n", 0, m.start("text")) + 1)
        for m in FENCE.finditer(text)
    ]


def copy_files(page: Path, folder: Path) -> None:
    text = page.read_text(encoding="utf-8")
    for in_place, names in re.findall(r"<!-- files( in place)?: (.*?) -->", text):
        for name in names.split(", "):
            target = folder / (name if in_place else Path(name).name)
            target.parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(ROOT / name, target)


def assert_printed(shown: str, printed: str, where: str) -> None:
    """Compare what a page shows with what was printed."""
    expected: list[str] = []
    pattern = []
    parts = re.split(rf"(\.\.\.|\s+|(?<![\w.]){NUMBER})", shown.strip())
    for part in filter(None, parts):
        if part == "...":
            if pattern and pattern[-1] == r"\s+":
                pattern[-1] = r"\s*"  # there may be nothing in its place
            pattern.append(r".*?")
        elif part.isspace():
            pattern.append(r"\s+")
        elif re.fullmatch(NUMBER, part):
            expected.append(part)
            pattern.append(f"({NUMBER})")
        else:
            pattern.append(re.escape(part))
    match = re.fullmatch("".join(pattern), printed.strip(), re.S)
    assert match, f"{where}: shown\n{shown}\nprinted\n{printed}"
    for said, found in zip(expected, match.groups(), strict=True):
        assert is_close(said, found), f"{where}: shown {said}, printed {found}\n{printed}"


def is_close(said: str, found: str) -> bool:
    if "." not in said:
        return said == found
    a, b = (float(text.replace(",", "")) for text in (said, found))
    last_digit = 10.0 ** -len(said.partition(".")[2])
    return abs(a - b) <= max(2.01 * last_digit, 0.03 * abs(a))


def run_console(block: Block, where: str) -> None:
    code = int(said.removeprefix("exit code: ")) if "exit code" in (said := block.said) else 0
    for piece in re.split(r"^\$ ", block.text, flags=re.M)[1:]:
        command, _, shown = piece.partition("\n")
        got, printed = run_command(command)
        assert got == code, f"{where}: {command} ended with {got}\n{printed}"
        if shown.strip():
            assert_printed(shown, printed, where)


def run_command(command: str) -> tuple[int, str]:
    """Run a command line of bayeslca in this process; return its exit code and all it printed."""
    words = shlex.split(command)
    assert words[0] == "bayeslca", f"{command}: not a command of bayeslca"
    printed = io.StringIO()
    code = 0
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(sys, "argv", words)
        with contextlib.redirect_stdout(printed), contextlib.redirect_stderr(printed):
            try:
                bayeslca.cli.main()
            except SystemExit as leaving:
                code = int(leaving.code or 0)
    return code, printed.getvalue()


def run_toml(block: Block) -> None:
    """Check a study file, or a part of one: its keys must exist."""
    content = tomllib.loads(block.text)
    named = re.match(r"# (\S+\.toml)\n", block.text)
    if named:
        path = Path(named[1])
        path.write_text(block.text, encoding="utf-8")
        if block.said.startswith("wrong on purpose"):
            return
        study = load_study(path)
        assert study.responses.n_cases
        assert study.model is None or study.model.n_classes
        return
    answers = {"file": "none.csv", "items": list(content.get("items", {})) or ["none"]}
    StudyFile.model_validate({**content, "answers": {**answers, **content.get("answers", {})}})


def run_page(page: Path) -> Iterator[str]:
    """Run the blocks of a page in order; yield what was done."""
    namespace: dict[str, Any] = {"__name__": "__main__"}
    printed = ""
    for block in blocks_of(page):
        where = f"{page.name}, line {block.line}"
        if block.said.startswith("not run: "):
            continue
        if block.kind == "python":
            out = io.StringIO()
            with contextlib.redirect_stdout(out):
                exec(compile("\n" * block.line + block.text, str(page), "exec"), namespace)
            printed = out.getvalue()
        elif block.kind == "console":
            run_console(block, where)
        elif block.kind == "toml":
            run_toml(block)
        elif block.kind == "text":
            assert_printed(block.text, printed, where)
        else:
            pytest.fail(f"{where}: a block of kind {block.kind!r} is not run by anything")
        yield block.kind


@pytest.mark.parametrize(
    "page",
    [
        pytest.param(
            page,
            id=page.relative_to(ROOT).as_posix(),
            marks=[pytest.mark.pymc] * (page.name in NEED_PYMC),
        )
        for page in PAGES
    ],
)
@pytest.mark.filterwarnings("ignore")
def test_blocks_run(page: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    copy_files(page, tmp_path)
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("MPLBACKEND", "agg")
    for _ in run_page(page):
        pass


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.relative_to(ROOT).as_posix())
def test_links_lead_somewhere(page: Path) -> None:
    gone = [
        link
        for link in LINK.findall(page.read_text(encoding="utf-8"))
        if not (page.parent / link).exists()
    ]
    assert not gone


def test_tests_that_are_named_exist() -> None:
    named = TEST_NAME.findall((ROOT / "docs" / "validation.md").read_text(encoding="utf-8"))
    assert len(named) > 30
    for file, name in named:
        assert f"def {name}" in (ROOT / file).read_text(encoding="utf-8"), f"{file}::{name}"


def test_every_key_of_a_study_file_is_explained() -> None:
    text = (ROOT / "docs" / "study-file.md").read_text(encoding="utf-8")
    keys = {"label", "categories", "ordered", "yes", "merge", "no_answer"}  # of an item
    for section, field in StudyFile.model_fields.items():
        kept = getattr(field.annotation, "model_fields", None)
        if kept is not None:
            assert f"`[{section}]`" in text
            keys |= set(kept)
    assert [key for key in sorted(keys) if f"`{key}`" not in text] == []


def test_every_finding_about_model_and_sampling_is_explained() -> None:
    text = "".join(page.read_text(encoding="utf-8") for page in PAGES)
    sources = [
        "model/cautions.py", "sampling/nuts.py", "sampling/relabel.py",
        "assess/convergence/diagnosis.py",
        "assess/comparison/comparison.py", "relate/outcomes/words.py",
        "relate/outcomes/class_outcomes.py",
        "relate/outcomes/column.py", "relate/outcomes/work.py",
        "assess/left_out/influence_words.py",
    ]  # fmt: skip
    kinds = {
        kind
        for source in sources
        for kind in re.findall(r'kind="(\w+)",', (ROOT / "bayeslca" / source).read_text("utf-8"))
    }
    assert len(kinds) > 15
    assert [kind for kind in sorted(kinds) if f"`{kind}`" not in text] == []


def test_sections_of_the_report_are_called_as_explained() -> None:
    text = (ROOT / "docs" / "report.md").read_text(encoding="utf-8")
    explained = re.findall(r"^\| (.*?) \|", text.split("## Files")[0], re.M)[2:]
    sections = ROOT / "bayeslca" / "report" / "sections"
    source = "".join(path.read_text(encoding="utf-8") for path in sections.glob("*.py"))
    assert len(explained) > 10
    assert [heading for heading in explained if f'"{heading}"' not in source] == []


def test_most_blocks_run_and_reasons_are_given() -> None:
    left_out = [b for page in PAGES for b in blocks_of(page) if b.said.startswith("not run: ")]
    assert all(len(block.said.removeprefix("not run: ")) > 10 for block in left_out)
    assert len(left_out) <= 8


@pytest.mark.parametrize(
    ("shown", "printed"),
    [
        ("118 cases", "117 cases"),
        ("0.44", "0.52"),
        ("managed ... lapsed", "managed 0.4"),
        ("two classes", "three classes"),
        ("  0.50\n", "0.50 and more"),
    ],
)
def test_what_is_shown_wrongly_is_found(shown: str, printed: str) -> None:
    with pytest.raises(AssertionError):
        assert_printed(shown, printed, "here")


def test_what_sampling_may_move_is_let_through() -> None:
    assert_printed("4.1 ± 3.5 in 7 of ... left", "4.0   ± 3.4 in 7 of 118\nand 3 left", "here")
    assert_printed("nothing more ...", "nothing more", "here")
