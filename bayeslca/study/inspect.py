"""What a file holds: every column in a few lines, for reading in a terminal."""

from __future__ import annotations

import shlex
import textwrap
from pathlib import Path

from bayeslca.responses.columns import ColumnReport, describe_columns
from bayeslca.responses.reading import read_table

WIDTH = 79

KIND_IN_WORDS = {
    "item": "item",
    "id": "case id",
    "group": "group",
    "count": "count",
    "free_text": "free text",
    "number": "number",
    "date": "date",
    "constant": "constant",
    "empty": "empty",
    "too_many_categories": "too many answers",
    "weight": "weight",
    "cluster": "cluster",
    "stratum": "stratum",
}


def inspection(
    path: Path,
    *,
    sheet: str | int | None = None,
    header_row: int = 1,
    encoding: str | None = None,
    separator: str | None = None,
) -> str:
    """Say what a file holds, column by column.

    Raises
    ------
    ResponsesError
        When the file cannot be read.
    """
    raw = read_table(
        path, sheet=sheet, header_row=header_row, encoding=encoding, separator=separator
    )
    reports = describe_columns(raw)
    lines = [f"{path.name}: {raw.n_rows:,} rows, {len(reports)} columns", ""]
    for report in reports:
        lines += [*_column(report), ""]
    items = [report.name for report in reports if report.kind == "item"]
    lines += textwrap.wrap(
        f"{len(items)} columns look like items: {', '.join(items) or 'none'}.", WIDTH
    )
    names = raw.column_names
    unnamed = sum(name == f"column {i}" for i, name in enumerate(names, start=1))
    if 2 * unnamed >= len(names):
        lines += textwrap.wrap(
            f"{unnamed} of {len(names)} columns have no name in row {header_row}: if the names "
            f"stand further down, below a title, say so: --header-row {header_row + 1}.",
            WIDTH,
        )
    options = {
        "sheet": sheet,
        "header-row": None if header_row == 1 else header_row,
        "encoding": encoding,
        "separator": separator,
    }
    given = [f"--{key} {shlex.quote(str(v))}" for key, v in options.items() if v is not None]
    command = ["bayeslca draft", shlex.quote(path.name), *given, "-o study.toml"]
    lines.append(f"Next: {' '.join(command)}")
    return "\n".join(lines)


def _column(report: ColumnReport) -> list[str]:
    title = f"{report.name}  [{KIND_IN_WORDS[report.kind]}]"
    if report.label and report.label != report.name:
        title += f"  {report.label}"
    lines = [textwrap.shorten(title, WIDTH, placeholder=" ...")]
    lines += _indented(f"{report.reason}; {report.n_missing:,} without an answer")
    if report.kind in ("item", "group", "constant", "too_many_categories", "free_text"):
        shown = [f"{_short(value)} {n:,}" for value, n in report.values.items()]
        more = ", ..." if report.n_values > len(report.values) else ""
        lines += _indented("answers: " + ", ".join(shown) + more)
    for kept, others in report.merge.items():
        lines += _indented(f"probably one answer: {kept!r} and {', '.join(map(repr, others))}")
    if report.no_answer:
        lines += _indented(f"probably no answer: {', '.join(map(repr, report.no_answer))}")
    return lines


def _short(value: str) -> str:
    return textwrap.shorten(value, 30, placeholder="...") or repr(value)


def _indented(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="    ")
