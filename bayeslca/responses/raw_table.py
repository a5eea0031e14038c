"""A table as it was read: columns of texts with the labels that came with them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Literal

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ResponsesError, near_names

ColumnType = Literal["text", "number", "boolean", "date"]
SHOWN_ROWS = 5
"""How many rows an error message names."""


@dataclass(frozen=True, eq=False)
class RawColumn:
    """One column: each distinct value once, and its index for every row.

    Attributes
    ----------
    name : str
    codes : ndarray of int32, shape (row,)
        Index into ``values``; -1 where the cell is empty or the file declares it missing.
    values : tuple of str
        The distinct values.
    type : {"text", "number", "boolean", "date"}
        What the file or frame holds.
    labels : mapping of str to str
        Value labels, in the file's order.
    order : tuple of str
        The order of the values that came with the data; empty when none did.
    ordered : bool
        True when the data say that the order has a meaning.
    label : str
        The column's own text.
    declared_missing : mapping of str to int
        Values that the file declares missing, with how many cells held them.
    """

    name: str
    codes: Ints
    values: tuple[str, ...]
    type: ColumnType = "text"
    labels: Mapping[str, str] = field(default_factory=dict)
    order: tuple[str, ...] = ()
    ordered: bool = False
    label: str = ""
    declared_missing: Mapping[str, int] = field(default_factory=dict)

    def counts(self) -> dict[str, int]:
        """Return how many rows hold each value that occurs, in the order of ``values``."""
        return dict(self._counts)

    @cached_property
    def _counts(self) -> dict[str, int]:
        found = np.bincount(self.codes[self.codes >= 0], minlength=len(self.values))
        return {value: int(n) for value, n in zip(self.values, found, strict=True) if n}

    def names(self) -> dict[str, str]:
        """Return the name of each value: its label, or the value itself."""
        return {value: self.labels.get(value, value) for value in self.values}

    def texts(self) -> list[str | None]:
        """Return the value of each row, None where there is none."""
        looked_up: list[str | None] = [*self.values, None]
        return [looked_up[code] for code in self.codes.tolist()]

    def rows_with(self, value: str) -> Ints:
        """Return the rows that hold a value."""
        return np.flatnonzero(self.codes == self.values.index(value))


@dataclass(frozen=True, eq=False)
class RawTable:
    """A table as it was read; columns are taken in when they are asked for.

    Attributes
    ----------
    source : str
        Name of the file, without folders; "" for a frame in memory.
    column_names : tuple of str
    n_rows : int
    load : callable
        Takes the position of a column and returns it.
    row_word : str
        What a row is called in this source: "line" of a text file, "row" elsewhere.
    first_row : int
        Number of the first row of answers in that counting.
    """

    source: str
    column_names: tuple[str, ...]
    n_rows: int
    load: Callable[[int], RawColumn]
    row_word: str = "row"
    first_row: int = 1
    _loaded: dict[str, RawColumn] = field(default_factory=dict)

    def __post_init__(self) -> None:
        names = self.column_names
        repeated = {name: names.count(name) for name in names if names.count(name) > 1}
        if repeated:
            places = "; ".join(
                f"{name!r} in columns "
                + ", ".join(str(i) for i, other in enumerate(names, start=1) if other == name)
                for name in repeated
            )
            msg = f"{self.title}: column names stand more than once: {places}. Rename them."
            raise ResponsesError(msg)
        if self.n_rows == 0 or not names:
            msg = (
                f"{self.title}: has no rows of answers. Check that it is the right file or sheet, "
                "and that the header row is given rightly."
            )
            raise ResponsesError(msg)

    @property
    def title(self) -> str:
        """The source as messages call it."""
        return self.source or "the data frame"

    def column(self, name: str) -> RawColumn:
        """Return a column by name."""
        if name not in self.column_names:
            raise ResponsesError(f"{self.title}: {self.no_column(name)}")  # noqa: EM102
        if name not in self._loaded:
            try:
                self._loaded[name] = self.load(self.column_names.index(name))
            except ResponsesError as error:
                msg = f"{self.title}: column {name!r}: {error}"
                raise ResponsesError(msg) from None
            except Exception as error:  # whatever the library trips over
                reason = " ".join(str(error).split())[:200] or type(error).__name__
                msg = (
                    f"{self.title}: column {name!r}: cannot be taken in ({reason}). Turn it into "
                    "text or numbers first."
                )
                raise ResponsesError(msg) from error
        return self._loaded[name]

    def no_column(self, name: str) -> str:
        """Say that a column is not there, with near names or all names."""
        near = near_names(name, self.column_names)
        if near:
            return f"there is no column {name!r}{near}."
        shown = ", ".join(repr(other) for other in self.column_names[:12])
        more = ", ..." if len(self.column_names) > 12 else ""
        if len(self.column_names) == 1 and set(self.column_names[0]) & set(",;\t|"):
            shown += " (one column: is the separator right?)"
        return f"there is no column {name!r}. The columns are {shown}{more}."

    def place(self, rows: Sequence[int] | Ints) -> str:
        """Return the place of rows in words: 'lines 3, 7 and 12 more'."""
        shown = [str(int(row) + self.first_row) for row in rows[:SHOWN_ROWS]]
        if len(rows) == 1:
            return f"{self.row_word} {shown[0]}"
        more = f" and {len(rows) - SHOWN_ROWS:,} more" if len(rows) > SHOWN_ROWS else ""
        return f"{self.row_word}s {', '.join(shown)}{more}"
