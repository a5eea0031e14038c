"""Separated text files: encoding, separator, ragged rows; the parsing itself is Arrow's."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from itertools import islice
from pathlib import Path

import numpy as np

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.encode import encode_arrow
from bayeslca.responses.raw_table import RawTable

SEPARATORS = (",", ";", "\t")
_WORDS = {",": "comma", ";": "semicolon", "\t": "tab"}
_SAMPLE = 200


def read_text_file(
    path: Path, header_row: int, encoding: str | None, separator: str | None
) -> RawTable:
    """Read a separated text file; every cell is a text."""
    import pyarrow as pa
    from pyarrow import csv as arrow_csv

    text = _skip_to_header(path.name, _decode(path, encoding), header_row)
    separator = separator or _find_separator(text)
    reader = csv.reader(_lines(text), delimiter=separator)
    names = next(reader, [])
    if not any(name.strip() for name in names):
        msg = (
            f"{path.name}, line {header_row}: there are no column names. Give the line that holds "
            "them as header_row."
        )
        raise ResponsesError(msg)
    body = _after_lines(text, reader.line_num)
    if not body.strip():
        msg = f"{path.name}: has column names but no rows of answers. Check the file."
        raise ResponsesError(msg)
    _check_quotes(path.name, text, separator, header_row)
    keys = [str(position) for position in range(len(names))]
    dictionary = pa.dictionary(pa.int32(), pa.string())
    try:
        table = arrow_csv.read_csv(
            io.BytesIO(body.encode("utf-8")),
            read_options=arrow_csv.ReadOptions(column_names=keys, block_size=1 << 24),
            parse_options=arrow_csv.ParseOptions(
                delimiter=separator,
                newlines_in_values='"' in body,
                ignore_empty_lines=len(names) > 1,
            ),
            convert_options=arrow_csv.ConvertOptions(
                column_types=dict.fromkeys(keys, dictionary),
                strings_can_be_null=False,
            ),
        )
    except pa.ArrowInvalid as error:
        _refuse_ragged(path.name, text, separator, header_row, len(names))
        msg = f"{path.name}: cannot be read as separated text ({error}). Check quotes and lines."
        raise ResponsesError(msg) from None
    column_names = tuple(
        name if name.strip() else f"column {i + 1}" for i, name in enumerate(names)
    )
    # Lines are named as they are counted in an editor, where that is known for sure.
    by_line = body.count("\n") + (not body.endswith("\n")) == table.num_rows
    return RawTable(
        path.name,
        column_names,
        table.num_rows,
        lambda position: encode_arrow(column_names[position], table.column(position)),
        row_word="line" if by_line else "data row",
        first_row=header_row + reader.line_num if by_line else 1,
    )


def _decode(path: Path, encoding: str | None) -> str:
    raw = path.read_bytes()
    if raw.startswith((b"PK\x03\x04", b"\xd0\xcf\x11\xe0", b"PAR1", b"$FL2")):
        msg = (
            f"{path.name}: is not a text file, though its name ends in {path.suffix}. Give the "
            "file the ending of its type (.xlsx, .parquet, .sav), or save it as text."
        )
        raise ResponsesError(msg)
    if encoding is None and raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        msg = f"{path.name}: is UTF-16 text. Give encoding='utf-16', or save it as UTF-8."
        raise ResponsesError(msg)
    try:
        text = raw.decode(encoding or "utf-8-sig")
    except LookupError:
        msg = f"{path.name}: unknown encoding {encoding!r}. Usual ones: utf-8, cp1252, latin-1."
        raise ResponsesError(msg) from None
    except UnicodeError as error:
        raise ResponsesError(_wrong_encoding(path.name, raw, encoding, error)) from None
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        msg = (
            f"{path.name}, line {line}: holds a zero byte, so it is not plain text in "
            f"{encoding or 'UTF-8'}. Give its encoding=, such as 'utf-16', or save it as UTF-8."
        )
        raise ResponsesError(msg)
    text = text.removeprefix("\ufeff").replace("\r\n", "\n").replace("\r", "\n")
    if not text.strip():
        msg = f"{path.name}: the file is empty. Check that it is the right file."
        raise ResponsesError(msg)
    return text


def _wrong_encoding(name: str, raw: bytes, encoding: str | None, error: UnicodeError) -> str:
    start = error.start if isinstance(error, UnicodeDecodeError) else 0
    before = raw[:start]
    line = before.count(b"\n") + 1
    around = raw[max(before.rfind(b"\n") + 1, start - 15) : start + 15].splitlines() or [b""]
    hint = around[0].decode("cp1252", errors="replace")
    if encoding and encoding.lower().replace("_", "-") not in ("utf-8", "utf8", "utf-8-sig"):
        return (
            f"{name}, line {line}: byte {raw[start : start + 1]!r} is not {encoding} text. "
            "Leave encoding= out if the file is UTF-8, or give the encoding it was saved in."
        )
    return (
        f"{name}, line {line}: byte {raw[start : start + 1]!r} is not UTF-8 text. If the file was "
        f"saved by an older Windows program, encoding='cp1252' reads it here as {hint!r}; give "
        "encoding=, or save the file as UTF-8."
    )


def _lines(text: str) -> Iterator[str]:
    """Yield lines with their ends; unlike str.splitlines, only a line feed ends one."""
    return iter(io.StringIO(text, newline="\n"))


def _after_lines(text: str, n: int) -> str:
    position = 0
    for _ in range(n):
        found = text.find("\n", position)
        if found < 0:
            return ""
        position = found + 1
    return text[position:]


def _skip_to_header(name: str, text: str, header_row: int) -> str:
    rest = _after_lines(text, header_row - 1)
    if not rest.strip():
        n = text.count("\n") + (not text.endswith("\n"))
        msg = f"{name}: header_row is {header_row}, but the file has {n} lines. Give a lower one."
        raise ResponsesError(msg)
    return rest


def _find_separator(text: str) -> str:
    """Return the separator that gives most columns, alike in most of the first lines."""
    sample = list(islice(_lines(text), _SAMPLE))

    def fit(separator: str) -> tuple[float, int]:
        try:
            rows = [row for row in csv.reader(sample, delimiter=separator) if row]
        except csv.Error:
            return (0.0, 0)
        width = len(rows[0]) if rows else 0
        if width < 2:
            return (0.0, width)
        return (sum(len(row) == width for row in rows) / len(rows), width)

    return max(SEPARATORS, key=fit)


def _check_quotes(name: str, text: str, separator: str, header_row: int) -> None:
    """Refuse quotes that are not closed, or closed too early: they would shift what is read."""
    if '"' not in text or _quotes_are_plain(text, separator):
        return
    line = 0
    reader = csv.reader(_lines(text), delimiter=separator, strict=True)
    try:
        for _ in reader:
            line = reader.line_num
    except csv.Error:
        msg = (
            f'{name}, line {line + header_row}: a quote (") is opened there or close by and not '
            "closed rightly. Close it, or take it out."
        )
        raise ResponsesError(msg) from None


def _quotes_are_plain(text: str, separator: str) -> bool:
    """Tell whether quotes open and close in turn, each at the border of a field.

    Most quoted files are so, and are spared the slower check.
    """
    if ord(separator) > 127:
        return False
    letters = np.frombuffer(f"\n{text}\n".encode(), dtype=np.uint8)
    (at,) = np.nonzero(letters == ord('"'))
    if at.size % 2:
        return False
    border = np.zeros(256, dtype=np.bool_)
    border[[ord(separator), ord("\n")]] = True
    return bool(border[letters[at[::2] - 1]].all() and border[letters[at[1::2] + 1]].all())


def _refuse_ragged(name: str, text: str, separator: str, header_row: int, width: int) -> None:
    wrong: list[str] = []
    n_wrong = 0
    reader = csv.reader(_lines(text), delimiter=separator)
    start = 1
    for row in reader:
        if len(row) not in (0, width):
            n_wrong += 1
            if len(wrong) < 5:
                wrong.append(f"line {start + header_row - 1} has {len(row)}")
        start = reader.line_num + 1
    if not n_wrong:
        return
    more = f" and {n_wrong - 5} more lines" if n_wrong > 5 else ""
    word = _WORDS.get(separator, repr(separator))
    msg = (
        f"{name}: rows are ragged: the header has {width} column{'s' * (width != 1)} (separated "
        f"by {word}), but {', '.join(wrong)}{more}. Put texts that hold a {word} in quotes, repair "
        "the lines, or give separator=."
    )
    raise ResponsesError(msg)
