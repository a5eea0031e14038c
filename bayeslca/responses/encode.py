"""Columns of any type, from Arrow arrays to distinct texts with an index for each row."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ResponsesError
from bayeslca.responses.raw_table import ColumnType, RawColumn
from bayeslca.responses.spelling import as_text, whole_numbers_without_point


def encode_arrow(name: str, array: Any, *, in_order: bool = False) -> RawColumn:
    """Encode an Arrow array; only distinct values are turned into texts.

    Parameters
    ----------
    name : str
    array : pyarrow Array or ChunkedArray
    in_order : bool
        True when the order of a dictionary's entries was chosen by someone.
    """
    import pyarrow as pa
    import pyarrow.compute as pc

    kind = array.type
    ordered = bool(pa.types.is_dictionary(kind) and kind.ordered)
    if pa.types.is_nested(kind):
        msg = f"holds {kind} in its cells; a cell holds one value. Spread it over columns first."
        raise ResponsesError(msg)
    if pa.types.is_null(kind):
        return RawColumn(name, np.full(len(array), -1, dtype=np.int32), ())
    if pa.types.is_floating(kind):
        array = pc.if_else(pc.is_nan(array), None, array)
    if not pa.types.is_dictionary(array.type):
        array = pc.dictionary_encode(array)
    if isinstance(array, pa.ChunkedArray):
        array = array.unify_dictionaries().combine_chunks()
        if isinstance(array, pa.ChunkedArray):  # older Arrow gives one chunk in a wrapper
            array = array.chunk(0)
    indices = pc.fill_null(array.indices.cast(pa.int64()), -1).to_numpy(zero_copy_only=False)
    texts = _distinct_texts(array.dictionary)
    column = _column(name, texts, indices, _column_type(array.dictionary.type))
    if not (in_order or ordered):
        return column
    given = dict.fromkeys(text for text in texts if text is not None)
    plain = whole_numbers_without_point(given)
    order = tuple(plain.get(text, text) for text in given)
    return RawColumn(name, column.codes, column.values, column.type, order=order, ordered=ordered)


def encode_values(name: str, values: Iterable[Any]) -> RawColumn:
    """Encode cells of mixed types one by one: for worksheets and mixed columns of frames."""
    seen: dict[str, int] = {}
    codes: list[int] = []
    kinds: set[ColumnType] = set()
    for value in values:
        text = as_text(value)
        if text is None:
            codes.append(-1)
            continue
        kinds.add(_cell_type(value))
        codes.append(seen.setdefault(text, len(seen)))
    kind: ColumnType = kinds.pop() if len(kinds) == 1 else "text"
    return _column(name, list(seen), np.asarray(codes, dtype=np.int64), kind)


def _column(name: str, texts: list[str | None], indices: Ints, kind: ColumnType) -> RawColumn:
    """Give each text one code (blank texts none), whatever the number of entries that write it."""
    plain = (
        whole_numbers_without_point({text for text in texts if text is not None})
        if kind == "text"
        else {}
    )
    position: dict[str, int] = {}
    new_code = np.full(len(texts) + 1, -1, dtype=np.int32)  # the last entry answers index -1
    for old, text in enumerate(texts):
        if text is not None:
            new_code[old] = position.setdefault(plain.get(text, text), len(position))
    return RawColumn(name, new_code[indices], tuple(position), kind)


def _distinct_texts(dictionary: Any) -> list[str | None]:
    import pyarrow as pa

    kind = dictionary.type
    if pa.types.is_floating(kind):
        # As numpy numbers: the shortest text of a 32-bit number is that of 32 bits.
        return [as_text(value) for value in dictionary.to_numpy(zero_copy_only=False)]
    if pa.types.is_timestamp(kind) and kind.unit == "ns":
        dictionary = dictionary.cast(pa.timestamp("us", kind.tz), safe=False)
    return [as_text(value) for value in dictionary.to_pylist()]


def _column_type(kind: Any) -> ColumnType:
    import pyarrow as pa

    types = pa.types
    if types.is_boolean(kind):
        return "boolean"
    if types.is_integer(kind) or types.is_floating(kind) or types.is_decimal(kind):
        return "number"
    return "date" if types.is_temporal(kind) else "text"


def _cell_type(value: Any) -> ColumnType:
    if isinstance(value, (str, bytes)):
        return "text"
    if isinstance(value, (bool, np.bool_)):
        return "boolean"
    return "date" if hasattr(value, "isoformat") else "number"
