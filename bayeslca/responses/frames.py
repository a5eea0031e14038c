"""Tables in memory, of any kind that narwhals reads, and Parquet files."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.encode import encode_arrow, encode_values
from bayeslca.responses.raw_table import RawColumn, RawTable


def read_parquet(path: Path) -> RawTable:
    """Open a Parquet file; columns are read when they are asked for."""
    import pyarrow.parquet as pq

    file = pq.ParquetFile(path)
    names = tuple(file.schema_arrow.names)

    def load(position: int) -> RawColumn:
        table = file.read(columns=[names[position]])
        return encode_arrow(names[position], table.column(0))

    return RawTable(path.name, names, file.metadata.num_rows, load)


def table_from_frame(frame: Any) -> RawTable:
    """Take in a data frame; it is read, never changed.

    Parameters
    ----------
    frame : any frame that narwhals reads
        pandas, polars, pyarrow and others; lazy ones are collected.

    Raises
    ------
    ResponsesError
        When it is no data frame, or a column cannot be taken in.
    """
    import narwhals as nw

    labels = getattr(frame, "columns", None)
    if labels is not None and not callable(labels):
        repeated = _repeated([str(label) for label in labels])
        if repeated:
            msg = f"the data frame: column names stand more than once: {repeated}. Rename them."
            raise ResponsesError(msg)
    try:
        taken = nw.from_native(frame)
        if isinstance(taken, nw.LazyFrame):
            taken = taken.collect()
        names = tuple(str(name) for name in taken.columns)
        n_rows = len(taken)
    except Exception as error:  # whatever the frame's library raises
        msg = (
            f"a {type(frame).__name__} is not a data frame that can be read ({error}). Give a "
            "pandas, polars or pyarrow table, or read a file with Responses.read."
        )
        raise ResponsesError(msg) from None
    keys = taken.columns
    return RawTable(
        "", names, n_rows, lambda i: _encode_series(names[i], taken.get_column(keys[i]))
    )


def _repeated(names: list[str]) -> str:
    return ", ".join(repr(name) for name in dict.fromkeys(names) if names.count(name) > 1)


def _encode_series(name: str, series: Any) -> RawColumn:
    import narwhals as nw

    try:
        array = series.to_arrow()
    except Exception:  # cells of mixed types, which Arrow does not hold: one by one
        return encode_values(name, series.to_list())
    return encode_arrow(name, array, in_order=series.dtype == nw.Enum or _chosen_order(series))


def _chosen_order(series: Any) -> bool:
    """Tell whether a pandas categorical's order was chosen: the default is alphabetical."""
    kind = getattr(series.to_native(), "dtype", None)
    categories = getattr(kind, "categories", None)
    if categories is None or not hasattr(categories, "is_monotonic_increasing"):
        return False
    return not categories.is_monotonic_increasing
