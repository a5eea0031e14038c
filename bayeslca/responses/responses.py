"""Responses: what was observed, as every other room reads it."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ResponsesError, near_names
from bayeslca.findings import Finding
from bayeslca.responses.assemble import Roles, assemble, set_aside_finding
from bayeslca.responses.item import Groups, Item, ItemSpec
from bayeslca.responses.sample_design import SampleDesign
from bayeslca.responses.units import Units, collapse

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.responses.raw_table import RawTable

__all__ = ["ItemSpec", "Responses"]


@dataclass(frozen=True, eq=False, repr=False)
class Responses:
    """Answers of cases to categorical items.

    A row is a case, or a response pattern with a count.

    Attributes
    ----------
    items : tuple of Item
    codes : ndarray of int16, shape (row, item)
        Category codes, ``MISSING`` (-1) where there is no answer.
    counts : ndarray of int64, shape (row,)
        Cases per row; all 1 unless the data are a table of patterns.
    case_ids : tuple of str or None
        One name per row, unique; None when no case column was given (rows are then "1".."N").
    case_name : str or None
        Name of the case column.
    groups : Groups or None
    group_codes : ndarray of int32, shape (row,)
        Index into ``groups.levels``; all 0 when there are none.
    findings : tuple of Finding
        What reading noticed and did (merged answers, rows left out, cases set aside...).
    source : str
        Where the answers came from, for the report ("committees.csv"); no folders.
    is_table_of_patterns : bool
        True when the rows came with counts.
    design : SampleDesign or None
        Weights, clusters and strata; None for a simple random sample.

    Examples
    --------
    >>> import pandas as pd
    >>> import bayeslca as lca
    >>> frame = pd.DataFrame({"fees": ["no", "yes", "yes"], "meets": ["yes", None, "no"]})
    >>> responses = lca.Responses.from_frame(frame, items=["fees", "meets"])
    >>> responses.n_cases, responses.units.n_units, responses.items[0].categories
    (3, 3, ('no', 'yes'))
    """

    items: tuple[Item, ...]
    codes: Ints
    counts: Ints
    case_ids: tuple[str, ...] | None = None
    case_name: str | None = None
    groups: Groups | None = None
    group_codes: Ints = field(default=None)  # type: ignore[arg-type]
    findings: tuple[Finding, ...] = ()
    source: str = ""
    is_table_of_patterns: bool = False
    design: SampleDesign | None = None

    def __post_init__(self) -> None:
        n_rows = len(self.codes)
        if self.group_codes is None:
            object.__setattr__(self, "group_codes", np.zeros(n_rows, dtype=np.int32))
        if self.codes.shape != (n_rows, len(self.items)):
            msg = (
                f"codes have the shape {self.codes.shape}, but there are {n_rows} rows and "
                f"{len(self.items)} items. Give a code for each item in each row."
            )
            raise ResponsesError(msg)
        for name, part in (
            ("counts", self.counts),
            ("case_ids", self.case_ids),
            ("group_codes", self.group_codes),
            ("design", None if self.design is None else self.design.weight),
        ):
            if part is not None and len(part) != n_rows:
                msg = f"{name} has {len(part)} entries for {n_rows} rows. Give one for each row."
                raise ResponsesError(msg)

    @classmethod
    def read(
        cls,
        path: str | Path,
        *,
        items: Sequence[str | ItemSpec | Item] | None = None,
        case: str | None = None,
        group: str | Groups | None = None,
        counts: str | None = None,
        keep_only: Mapping[str, Sequence[Any]] | None = None,
        no_answer: Sequence[Any] = (),
        merge: Mapping[str, Sequence[Any]] | None = None,
        sheet: str | int | None = None,
        header_row: int = 1,
        encoding: str | None = None,
        separator: str | None = None,
        weight: str | None = None,
        cluster: str | None = None,
        stratum: str | None = None,
        merge_lone_strata: bool = False,
    ) -> Responses:
        """Read answers from a file.

        Parameters
        ----------
        path : str or Path
            CSV or other separated text, Parquet, Excel, SPSS, Stata or SAS file.
        items : sequence of str, ItemSpec or Item
            The item columns. An ``Item`` (of a fitted model) is taken as it is: other answers
            than its categories are refused.
        case : str or None
            Column with one id per case.
        group : str, Groups or None
            Column that groups the cases; ``Groups`` of a fitted model are taken as they are.
        counts : str or None
            Column with the number of cases of each row, for a table of response patterns.
        keep_only : mapping of str to sequence or None
            Values of a column whose rows are kept.
        no_answer : sequence
            Values that mean that there is no answer, in all items; empty cells always do.
        merge : mapping of str to sequence or None
            Spellings that are one answer, in all items: ``{"yes": ["Yes", "Y"]}``.
        sheet, header_row, encoding, separator
            How to read the file; see :func:`bayeslca.responses.reading.read_table`.
        weight : str or None
            Column with how much of the population each case stands for; positive numbers.
        cluster : str or None
            Column with the primary sampling unit of each case: cases drawn together.
        stratum : str or None
            Column with the stratum in which each cluster (or case) was drawn.
        merge_lone_strata : bool
            A stratum with one cluster is refused, or, when True, joined with the next by name
            (the last with the one before).

        Raises
        ------
        ResponsesError
            With all that is wrong, where, and what to do.
        """
        from bayeslca.responses.reading import read_table

        table = read_table(
            path, sheet=sheet, header_row=header_row, encoding=encoding, separator=separator
        )
        roles = Roles(
            items if items is not None else (),
            case,
            group,
            counts,
            keep_only or {},
            no_answer,
            merge or {},
            weight,
            cluster,
            stratum,
            merge_lone_strata,
        )
        return cls._from_table(table, roles)

    @classmethod
    def from_frame(
        cls,
        frame: Any,
        *,
        items: Sequence[str | ItemSpec | Item] | None = None,
        case: str | None = None,
        group: str | Groups | None = None,
        counts: str | None = None,
        keep_only: Mapping[str, Sequence[Any]] | None = None,
        no_answer: Sequence[Any] = (),
        merge: Mapping[str, Sequence[Any]] | None = None,
        weight: str | None = None,
        cluster: str | None = None,
        stratum: str | None = None,
        merge_lone_strata: bool = False,
    ) -> Responses:
        """Take answers from a data frame (pandas, polars, pyarrow...), which is not changed.

        The parameters are those of :meth:`read`.
        """
        from bayeslca.responses.frames import table_from_frame

        roles = Roles(
            items if items is not None else (),
            case,
            group,
            counts,
            keep_only or {},
            no_answer,
            merge or {},
            weight,
            cluster,
            stratum,
            merge_lone_strata,
        )
        return cls._from_table(table_from_frame(frame), roles)

    @classmethod
    def _from_table(cls, table: RawTable, roles: Roles) -> Responses:
        if len(roles.items) == 0:
            from bayeslca.responses.columns import columns_like_items

            others = {roles.case, roles.counts, roles.group_name, *roles.design.values()}
            likely = [name for name in columns_like_items(table) if name not in others]
            hint = f"These columns look like items: {likely}." if likely else "No column looks so."
            msg = f"{table.title}: items is not given; say which columns are items. {hint}"
            raise ResponsesError(msg)
        return cls(**assemble(table, roles))

    @property
    def n_rows(self) -> int:
        """Number of rows: cases, or patterns of a table of patterns."""
        return len(self.codes)

    @cached_property
    def n_cases(self) -> int:
        """Number of cases, those set aside among them."""
        return int(self.counts.sum())

    @cached_property
    def n_set_aside(self) -> int:
        """Number of cases without a single answer."""
        return self.n_cases - self.units.n_cases

    @cached_property
    def row_names(self) -> tuple[str, ...]:
        """One name per row: the case ids, or "1".."N"."""
        return self.case_ids or tuple(map(str, range(1, self.n_rows + 1)))

    @cached_property
    def units(self) -> Units:
        """The distinct combinations of group and response pattern, with counts."""
        return collapse(
            self.codes,
            self.group_codes,
            self.counts,
            tuple(item.n_categories for item in self.items),
        )

    @cached_property
    def data_hash(self) -> str:
        """SHA-256 of items, categories, groups and units; the order of rows does not matter."""
        digest = hashlib.sha256()
        for item in self.items:
            digest.update(repr((item.name, item.categories)).encode())
        if self.groups is not None:
            digest.update(repr((self.groups.name, self.groups.levels)).encode())
        units = self.units
        digest.update(np.ascontiguousarray(units.pattern, dtype="<i2").tobytes())
        digest.update(np.ascontiguousarray(units.group, dtype="<i4").tobytes())
        digest.update(np.ascontiguousarray(units.count, dtype="<i8").tobytes())
        return digest.hexdigest()

    @cached_property
    def row_names_hash(self) -> str:
        """SHA-256 of which row (by name) gave which answers, and how often."""
        digest = hashlib.sha256("\0".join(self.case_ids or (str(self.n_rows),)).encode())
        digest.update(np.ascontiguousarray(self.units.unit_of_row, dtype="<i8").tobytes())
        digest.update(np.ascontiguousarray(self.counts, dtype="<i8").tobytes())
        return digest.hexdigest()

    def with_items(self, subset: Sequence[str | Item]) -> Responses:
        """Return the answers to some of the items, in the order given.

        Parameters
        ----------
        subset : sequence of str or Item
        """
        names = [item.name for item in self.items]
        wanted = [item.name if isinstance(item, Item) else item for item in subset]
        for name in wanted:
            if name not in names:
                msg = f"there is no item {name!r}{near_names(name, names)}. Items: {names}."
                raise ResponsesError(msg)
        if not wanted or len(set(wanted)) < len(wanted):
            msg = f"with_items takes one or more items, each once; found {wanted}."
            raise ResponsesError(msg)
        columns = [names.index(name) for name in wanted]
        codes = np.asfortranarray(self.codes[:, columns])
        gone = set(names) - set(wanted)
        kept = [
            finding
            for finding in self.findings
            if finding.kind != "cases_set_aside"
            and (not finding.about or set(finding.about) - gone)
        ]
        aside = set_aside_finding(codes, self.counts)
        return replace(
            self,
            items=tuple(self.items[j] for j in columns),
            codes=codes,
            findings=(*kept, *([aside] if aside else [])),
        )

    def to_frame(self) -> pd.DataFrame:
        """Return the answers as names, a row per row; missing ones are None."""
        import pandas as pd

        columns: dict[str, Any] = {}
        if self.case_name is not None:
            columns[self.case_name] = self.row_names
        if self.groups is not None:
            columns[self.groups.name] = np.array(self.groups.levels, dtype=object)[self.group_codes]
        for item, codes in zip(self.items, self.codes.T, strict=True):
            columns[item.name] = np.array([*item.categories, None], dtype=object)[codes]
        if self.is_table_of_patterns:
            columns["count"] = self.counts
        return pd.DataFrame(columns, dtype=object)

    def summary(self) -> pd.DataFrame:
        """Return how often each category was chosen; see :func:`summary_table`."""
        from bayeslca.responses.summary import summary_table

        return summary_table(self)

    def patterns(self) -> pd.DataFrame:
        """Return the response patterns with the number of cases, the most common first."""
        from bayeslca.responses.summary import pattern_table

        return pattern_table(self)

    def missing_patterns(self) -> pd.DataFrame:
        """Return which items are missing together, with the number of cases."""
        from bayeslca.responses.summary import missing_table

        return missing_table(self)

    def __repr__(self) -> str:
        from bayeslca.responses.summary import as_terminal_text

        return as_terminal_text(self)

    def _repr_html_(self) -> str:
        from bayeslca.responses.summary import as_html

        return as_html(self)
