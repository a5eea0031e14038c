"""A first study file for a file of answers: every column appears, items are proposed."""

from __future__ import annotations

import json
import os
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path

from bayeslca.exceptions import StudyError
from bayeslca.responses.columns import ColumnReport, describe_columns
from bayeslca.responses.reading import read_table
from bayeslca.study.inspect import KIND_IN_WORDS
from bayeslca.study.results import write_text_aside

WIDTH = 79


def write_draft(
    path: Path,
    output: Path,
    *,
    sheet: str | int | None = None,
    header_row: int = 1,
    encoding: str | None = None,
    separator: str | None = None,
    replace: bool = False,
) -> str:
    """Write a commented study file and say what to do next.

    Raises
    ------
    ResponsesError
        When the answers cannot be read.
    StudyError
        When no column looks like an item.
    StorageError
        When the study file is there already and ``replace`` is False.
    """
    raw = read_table(
        path, sheet=sheet, header_row=header_row, encoding=encoding, separator=separator
    )
    reports = describe_columns(raw)
    items = [report for report in reports if report.kind == "item"]
    if not items:
        msg = (
            f"{path.name}: no column looks like an item. `bayeslca inspect {path.name}` shows why "
            "for each; a study file can still name the items by hand."
        )
        raise StudyError(msg)
    reading = {
        "sheet": sheet,
        "header_row": None if header_row == 1 else header_row,
        "encoding": encoding,
        "separator": separator,
    }
    file = os.path.relpath(path.resolve(), output.resolve().parent)
    text = _study_text(path, file, reports, reading)
    write_text_aside(output, text, replace=replace)
    return _next_steps(output, reports, items)


def _study_text(
    path: Path, file: str, reports: Sequence[ColumnReport], reading: Mapping[str, object]
) -> str:
    lines = [
        f"# A first study file for {path.name}, to be edited: lines that begin with # do nothing.",
        "# `bayeslca check` says whether it can be read and what it means.",
        "",
        "[study]",
        f"title = {_quoted(path.stem.replace('_', ' ').capitalize())}",
        'question = "What kinds of cases are there, and how common is each?"',
        "# diagnostic = true              # when the items are diagnostic tests",
        "",
        *_answers(Path(file).as_posix(), reports, reading),
        "",
        *_item_sections(reports),
        *_OPEN_MODEL,
    ]
    return "\n".join(lines) + "\n"


_OPEN_MODEL = (
    "[model]",
    "# Left open: the report shows every number of classes that the data support. With a theory,",
    "# name the classes and say what tells them apart:",
    '# classes = ["managed", "lapsed"]',
    '# chosen_because = "..."',
    '# statements = ["managed is where P(item=answer) is highest"]',
    "",
    "[class_count]",
    "compare = [1, 2, 3, 4, 5, 6]",
    "",
    "[sampling]",
    "seed = 1",
    "",
    "[report]",
    "interval = 0.95",
    "show_cases = false               # true: single cases may be shown by name",
)


def _answers(
    file: str, reports: Sequence[ColumnReport], reading: Mapping[str, object]
) -> list[str]:
    lines = ["[answers]", f"file = {_quoted(file)}"]
    lines += [f"{key} = {_value(value)}" for key, value in reading.items() if value is not None]
    lines += _role("case", [r for r in reports if r.kind == "id"], active=True)
    lines += _role("group", [r for r in reports if r.kind == "group"], active=False)
    lines += _role("count", [r for r in reports if r.kind == "count"], active=False)
    for part in ("weight", "cluster", "stratum"):
        lines += _role(part, [r for r in reports if r.kind == part], active=False)
    lines.append("items = [")
    for report in reports:
        note = f"{KIND_IN_WORDS[report.kind]}: {report.reason}"
        if report.kind == "item":
            entry = f"    {_quoted(report.name)},"
        else:
            entry = f"  # {_quoted(report.name)},"
        lines.append(f"{entry:<34}# {_one_line(note)}")
    lines.append("]")
    return lines


def _role(key: str, candidates: Sequence[ColumnReport], *, active: bool) -> list[str]:
    """Propose a column for a role: the first is used where that is safe, others are offered."""
    lines = []
    for at, report in enumerate(candidates):
        mark = "" if active and at == 0 else "# "
        lines.append(f"{mark}{key} = {_quoted(report.name)}")
    return lines


def _item_sections(reports: Iterable[ColumnReport]) -> list[str]:
    lines: list[str] = []
    for report in reports:
        if report.kind == "item":
            lines += [*_item_section(report), ""]
    return lines


def _item_section(report: ColumnReport) -> list[str]:
    lines = [f"[items.{_key(report.name)}]"]
    lines += _comment(
        "answers found: "
        + ", ".join(f"{value} ({n})" for value, n in report.values.items())
        + f"; {report.n_missing} without"
    )
    label = _quoted(report.label) if report.label else '"..."'
    lines.append(f"{'' if report.label else '# '}label = {label}")
    lines.append(f"categories = {_list(report.categories)}")
    if report.order_rule == "alphabet" and len(report.categories) > 2:
        lines += _comment("the order is the alphabet's: put the categories into their own")
    if len(report.categories) > 2:
        asked = "" if report.ordered else "# "
        lines.append(f"{asked}ordered = true                 # when the order has a meaning")
    if report.yes is not None:
        lines.append(f"yes = {_quoted(report.yes)}")
    if report.merge:
        lines += _comment("different spellings that are probably one answer; please confirm")
        merges = [f"{_key(kept)} = {_list(others)}" for kept, others in report.merge.items()]
        lines.append(f"merge = {{ {', '.join(merges)} }}")
    if report.no_answer:
        lines += _comment("read as no answer; to keep one as an answer, move it to categories")
        lines.append(f"no_answer = {_list(report.no_answer)}")
    return lines


def _next_steps(
    output: Path, reports: Sequence[ColumnReport], items: Sequence[ColumnReport]
) -> str:
    left_out = len(reports) - len(items)
    lines = [f"Wrote {output}: {len(items)} items proposed, {left_out} other columns commented."]
    merged = [report.name for report in items if report.merge]
    silent = [report.name for report in items if report.no_answer]
    if merged:
        lines.append(f"Please confirm the merges proposed for {', '.join(merged)}.")
    if silent:
        lines.append(f"Please confirm what was read as no answer in {', '.join(silent)}.")
    lines += [
        "Next:",
        "  1. edit it: title, question, items, labels, the classes you expect",
        f"  2. bayeslca check {output}",
        f"  3. bayeslca run {output} -o results",
    ]
    return "\n".join(
        line if line.startswith("  ") else textwrap.fill(line, WIDTH) for line in lines
    )


def _quoted(text: str) -> str:
    """Write text as a TOML basic string, which JSON's strings are but for the DEL sign."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _key(text: str) -> str:
    bare = text.isascii() and text.replace("_", "").replace("-", "").isalnum()
    return text if bare else _quoted(text)


def _value(value: object) -> str:
    return str(value) if isinstance(value, int) else _quoted(str(value))


def _list(values: Iterable[str]) -> str:
    return "[" + ", ".join(_quoted(value) for value in values) + "]"


def _comment(text: str) -> list[str]:
    return textwrap.wrap(_one_line(text), WIDTH, initial_indent="# ", subsequent_indent="#   ")


def _one_line(text: str) -> str:
    """Keep text from a file out of the next line, where it would be read as TOML."""
    return "".join(c if c.isprintable() else " " for c in text)
