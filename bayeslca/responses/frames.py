"""Tables in memory, of any kind that narwhals reads, and Parquet files."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.encode import encode_arrow, encode_values
from bayeslca.responses.raw_table import RawColumn, RawTable


def read_parquet(path: Path) -> RawTable:
    """Open a Parquet file; columns are read when they are asked for."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    schema = pq.read_schema(path)
    texts = [f.name for f in schema if pa.types.is_string(f.type)]
    # Texts stand in the file as a dictionary with indices: taken as they stand, in a third of
    # the time.
    file = pq.ParquetFile(path, read_dictionary=texts)
    names = tuple(schema.names)

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

    labels = getattr(frame, "columns", None) if hasattr(frame, "iloc") else None
    if labels is not None:  # pandas allows a name to stand twice
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

    if _mixed(series.to_native()):
        return encode_values(name, series.to_list())
    in_order = series.dtype == nw.Enum or _chosen_order(series)
    try:
        return encode_arrow(name, series.to_arrow(), in_order=in_order)
    except ResponsesError:
        raise
    except Exception:  # cells of mixed or rare types, which Arrow does not hold: one by one
        return encode_values(name, series.to_list())


def _mixed(native: Any) -> bool:
    """Tell whether a pandas column holds cells of several types: Arrow would turn True into 1.0."""
    if str(getattr(native, "dtype", "")) != "object" or not hasattr(native, "iloc"):
        return False
    import pandas as pd

    kinds = {"string", "integer", "floating", "boolean", "empty"}
    return pd.api.types.infer_dtype(native, skipna=True) not in kinds


def _chosen_order(series: Any) -> bool:
    """Tell whether a pandas categorical's order was chosen: the default is alphabetical."""
    kind = getattr(series.to_native(), "dtype", None)
    categories = getattr(kind, "categories", None)
    if categories is None or not hasattr(categories, "is_monotonic_increasing"):
        return False
    return not categories.is_monotonic_increasing
