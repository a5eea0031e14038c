"""Files of statistical packages (SPSS, Stata, SAS), read with pyreadstat."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from bayeslca._typing import Bools
from bayeslca.responses.encode import encode_arrow, encode_values
from bayeslca.responses.raw_table import RawColumn, RawTable
from bayeslca.responses.spelling import as_text, number_of

_PADDING = 1e-9


def read_statistical_file(path: Path, encoding: str | None) -> RawTable:
    """Read a .sav, .zsav, .dta, .sas7bdat or .xpt file with labels and declared missing values."""
    import pyreadstat

    ending = path.suffix.lower()
    # SPSS hands over declared missing values, so that they can be counted; the tagged missing
    # values of Stata and SAS come as plain missing.
    if ending in (".sav", ".zsav"):
        frame, about = pyreadstat.read_sav(path, encoding=encoding, user_missing=True)
    elif ending == ".dta":
        frame, about = pyreadstat.read_dta(path, encoding=encoding)
    elif ending == ".sas7bdat":
        frame, about = pyreadstat.read_sas7bdat(path, encoding=encoding)
    else:
        frame, about = pyreadstat.read_xport(path, encoding=encoding)
    names = tuple(str(name) for name in frame.columns)
    texts = dict(zip(about.column_names, about.column_labels, strict=False))

    def load(position: int) -> RawColumn:
        name = names[position]
        return _with_labels(
            _plain(name, frame.iloc[:, position]),
            str(texts.get(name) or ""),
            about.variable_value_labels.get(name, {}),
            getattr(about, "missing_ranges", {}).get(name, []),
        )

    return RawTable(path.name, names, len(frame), load)


def _plain(name: str, series: Any) -> RawColumn:
    import pyarrow as pa

    try:
        return encode_arrow(name, pa.array(series, from_pandas=True))
    except pa.ArrowException:  # cells of mixed types
        return encode_values(name, series.tolist())


def _with_labels(
    column: RawColumn,
    text: str,
    value_labels: Mapping[Any, str],
    ranges: Sequence[Mapping[str, Any]],
) -> RawColumn:
    missing = np.array([_declared(value, ranges) for value in column.values], dtype=bool)
    counts = column.counts()
    labels = {
        str(as_text(code)): str(label)
        for code, label in value_labels.items()
        if as_text(code) is not None and str(label).strip()
    }
    declared = {
        value: counts.get(value, 0)
        for value, gone in zip(column.values, missing, strict=True)
        if gone
    }
    return RawColumn(
        column.name,
        _without(column, missing),
        column.values,
        column.type,
        labels=labels,
        order=_in_order(labels),
        label=text,
        declared_missing=declared,
    )


def _in_order(labels: Mapping[str, str]) -> tuple[str, ...]:
    """Return the labelled codes as numbers count, where all are numbers; else as they stand."""
    numbers = {code: number_of(code) for code in labels}
    if any(number is None for number in numbers.values()):
        return tuple(labels)
    return tuple(sorted(labels, key=lambda code: numbers[code] or 0.0))


def _declared(value: str, ranges: Sequence[Mapping[str, Any]]) -> bool:
    for bounds in ranges:
        low, high = bounds["lo"], bounds["hi"]
        if isinstance(low, str) or isinstance(high, str):
            if str(low).rstrip() <= value <= str(high).rstrip():
                return True
            continue
        try:
            if low - _PADDING <= float(value) <= high + _PADDING:
                return True
        except ValueError:
            continue
    return False


def _without(column: RawColumn, missing: Bools) -> Any:
    gone = np.append(missing, False)  # the last entry answers code -1
    return np.where(gone[column.codes], np.int32(-1), column.codes)
