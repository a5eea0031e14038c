"""From a raw table and the columns' roles to the parts of :class:`Responses`."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ResponsesError, near_names
from bayeslca.findings import Finding
from bayeslca.responses.design_columns import read_design
from bayeslca.responses.item import Groups, Item, ItemSpec
from bayeslca.responses.item_column import ItemColumn, keep_rows
from bayeslca.responses.problems import Problems
from bayeslca.responses.raw_table import RawColumn, RawTable
from bayeslca.responses.role_columns import read_case_ids, read_counts, read_groups
from bayeslca.responses.spelling import as_text, find_value


@dataclass(frozen=True)
class Roles:
    """Which column does what, as the analyst said it.

    Attributes
    ----------
    items : sequence of str, ItemSpec or Item
    case, counts : str or None
    group : str, Groups or None
        With ``Groups`` (of a fitted model) exactly its levels are taken.
    keep_only : mapping of str to sequence
        Values of a column whose rows are kept.
    no_answer : sequence
        Values that mean 'no answer' in every item and in the group column.
    merge : mapping of str to sequence
        Spellings that are one answer, in every item.
    weight, cluster, stratum : str or None
        Columns of the sample's design.
    merge_lone_strata : bool
        Join strata that have one cluster with the next by name.
    """

    items: Sequence[Any]
    case: str | None = None
    group: str | Groups | None = None
    counts: str | None = None
    keep_only: Mapping[str, Sequence[Any]] = field(default_factory=dict)
    no_answer: Sequence[Any] = ()
    merge: Mapping[str, Sequence[Any]] = field(default_factory=dict)
    weight: str | None = None
    cluster: str | None = None
    stratum: str | None = None
    merge_lone_strata: bool = False

    def __post_init__(self) -> None:
        for key, values in (("items", self.items), ("no_answer", self.no_answer)):
            _refuse_single(key, values)
        for key, mapping in (("keep_only", self.keep_only), ("merge", self.merge)):
            if not isinstance(mapping, Mapping):
                msg = f"{key}={mapping!r} is no mapping; write {{name: [values]}}."
                raise ResponsesError(msg)
        for kept, spellings in self.merge.items():
            _refuse_single(f"merge, {kept!r}", spellings)

    @property
    def design(self) -> dict[str, str]:
        """Columns of the sample's design by their role."""
        said = {"weight": self.weight, "cluster": self.cluster, "stratum": self.stratum}
        return {role: name for role, name in said.items() if name is not None}

    @property
    def group_name(self) -> str | None:
        """Name of the group column."""
        return self.group.name if isinstance(self.group, Groups) else self.group


def _refuse_single(key: str, values: object) -> None:
    """Refuse one value where a list of values belongs."""
    if isinstance(values, (str, bytes)) or not isinstance(values, Collection):
        msg = f"{key}={values!r} is not a list of values; write [{values!r}]."
        raise ResponsesError(msg)


def assemble(table: RawTable, roles: Roles) -> dict[str, Any]:
    """Read all columns that have a role and return the fields of :class:`Responses`.

    Raises
    ------
    ResponsesError
        With everything that is wrong, each with its place and what to do.
    """
    problems = Problems(table.title)
    specs = [_spec(item, roles) for item in roles.items]
    _check_roles(table, roles, [spec.name for spec, _ in specs], problems)
    if not _other_roles(roles) <= set(table.column_names):
        problems.stop_if_any()
    specs = [known for known in specs if known[0].name in table.column_names]
    findings: list[Finding] = []
    n_before = len(problems.messages)
    rows = _kept_rows(table, roles, problems, findings)
    if len(problems.messages) > n_before:
        problems.stop_if_any()  # without the right rows, nothing more can be said

    weights: Ints = np.ones(rows.size, dtype=np.int64)
    if roles.counts is not None:
        rows, weights = read_counts(table, roles.counts, rows, problems, findings)
    case_ids = None
    if roles.case is not None:
        case_ids = read_case_ids(table, roles.case, rows, problems)
    groups: Groups | None = None
    group_codes: Ints = np.zeros(rows.size, dtype=np.int32)
    if roles.group is not None:
        known = roles.group if isinstance(roles.group, Groups) else None
        groups, group_codes = read_groups(
            table, str(roles.group_name), known, rows, weights, roles.no_answer, problems, findings
        )
    design = read_design(
        table,
        roles.weight,
        roles.cluster,
        roles.stratum,
        rows,
        merge_lone_strata=roles.merge_lone_strata,
        problems=problems,
        findings=findings,
    )
    items, codes = _items(table, specs, rows, weights, problems, findings)
    problems.stop_if_any()
    found = set_aside_finding(codes, weights)
    return {
        "items": tuple(items),
        "codes": codes,
        "counts": weights,
        "case_ids": case_ids,
        "case_name": roles.case,
        "groups": groups,
        "group_codes": group_codes,
        "findings": (*findings, *([found] if found else [])),
        "source": table.source,
        "is_table_of_patterns": roles.counts is not None,
        "design": design,
    }


def _spec(item: Any, roles: Roles) -> tuple[ItemSpec, Item | None]:
    """Return what is said about an item, with what is said about all of them."""
    known = item if isinstance(item, Item) else None
    if isinstance(item, Item):
        spec = ItemSpec(item.name)
    elif isinstance(item, ItemSpec):
        spec = item
        if item.fitted:
            known = Item(
                item.name, tuple(item.categories or ()), item.label, item.ordered, item.yes
            )
    elif isinstance(item, str):
        spec = ItemSpec(item)
    else:
        msg = (
            f"items holds {item!r} of type {type(item).__name__}; name columns, or describe them "
            "with ItemSpec(name, ...)."
        )
        raise ResponsesError(msg)
    everywhere = ItemSpec(spec.name, no_answer=roles.no_answer, merge=roles.merge)
    merge = {
        kept: (*everywhere.merge.get(kept, ()), *spec.merge.get(kept, ()))
        for kept in dict.fromkeys([*everywhere.merge, *spec.merge])
    }
    no_answer = (*everywhere.no_answer, *spec.no_answer)
    return replace(spec, no_answer=no_answer, merge=merge), known


def _check_roles(table: RawTable, roles: Roles, item_names: list[str], problems: Problems) -> None:
    named = [(name, "items") for name in item_names]
    named += [
        (name, role)
        for name, role in (
            (roles.case, "case"),
            (roles.group_name, "group"),
            (roles.counts, "counts"),
        )
        if name is not None
    ]
    used: dict[str, str] = {}
    for name, role in named:
        if not isinstance(name, str):
            problems.add(f"{role}={name!r} is no column name. Give the name as text.")
        elif name not in table.column_names:
            problems.add(f"{role}: {table.no_column(name)}")
        elif name in used and used[name] == role:
            problems.add(f"column {name!r} stands twice in {role}. Name it once.")
        elif name in used:
            problems.add(
                f"column {name!r} is named as {used[name]} and as {role}; a column has one role. "
                "Take it out of one of them."
            )
        else:
            used[name] = role
    for name in roles.keep_only:
        if name not in table.column_names:
            problems.add(f"keep_only: {table.no_column(str(name))}")
    _check_design_roles(table, roles, used, problems)


def _check_design_roles(
    table: RawTable, roles: Roles, used: Mapping[str, str], problems: Problems
) -> None:
    """Check the columns of the sample's design; groups may be strata or clusters as well."""
    taken = {name: role for name, role in used.items() if role != "group"}
    for role, name in roles.design.items():
        if not isinstance(name, str):
            problems.add(f"{role}={name!r} is no column name. Give the name as text.")
        elif name not in table.column_names:
            problems.add(f"{role}: {table.no_column(name)}")
        elif name in taken:
            problems.add(
                f"column {name!r} is named as {taken[name]} and as {role}; take it out of one."
            )
        elif role == "weight" and name == roles.group_name:
            problems.add(f"column {name!r} is named as group and as weight; take it out of one.")
        taken[name] = role
    if roles.counts is not None and roles.design:
        named = ", ".join(f"{role}={name!r}" for role, name in roles.design.items())
        problems.add(
            f"counts={roles.counts!r} and {named}: a row with a count stands for several cases, "
            "each with a weight, cluster and stratum of its own. Give a file with one row a case, "
            "or take one of them out."
        )
    if roles.merge_lone_strata and roles.stratum is None:
        problems.add("merge_lone_strata needs strata; name their column with stratum.")


def _other_roles(roles: Roles) -> set[str]:
    """Return the columns without which no row can be read."""
    named = {roles.case, roles.group_name, roles.counts, *roles.keep_only, *roles.design.values()}
    return {name for name in named if name is not None}


def _kept_rows(table: RawTable, roles: Roles, problems: Problems, findings: list[Finding]) -> Ints:
    """Return the positions of the rows that keep_only keeps."""
    n_before = len(problems.messages)
    kept = np.ones(table.n_rows, dtype=np.bool_)
    for name, wanted in roles.keep_only.items():
        if isinstance(wanted, (str, bytes)) or not isinstance(wanted, Collection):
            wanted = [wanted]
        column = table.column(name)
        kept &= _holds(column, wanted, problems)
    rows: Ints = np.flatnonzero(kept)
    if not rows.size and len(problems.messages) == n_before:
        said = "; ".join(f"{name}: {list(values)}" for name, values in roles.keep_only.items())
        problems.add(f"keep_only ({said}) keeps no row. Check the values and their combination.")
    if rows.size < table.n_rows:
        n = table.n_rows - rows.size
        findings.append(
            Finding(
                "rows_left_out",
                "note",
                f"{n:,} of {table.n_rows:,} rows left out, as keep_only says.",
                about=tuple(roles.keep_only),
                value=float(n),
            )
        )
    return rows


def _holds(column: RawColumn, wanted: Collection[Any], problems: Problems) -> Any:
    names = {value: column.labels.get(value, value) for value in column.values}
    chosen = np.zeros(len(column.values) + 1, dtype=np.bool_)
    for value in wanted:
        text = as_text(value) or ""
        found = find_value(text, names)
        if not found:
            there = list(dict.fromkeys(names.values()))
            problems.add(
                f"keep_only: column {column.name!r} has no value {text!r}"
                f"{near_names(text, there)}. It has {', '.join(map(repr, there[:8]))}"
                f"{', ...' if len(there) > 8 else ''}."
            )
        for code in found:
            chosen[column.values.index(code)] = True
    return chosen[column.codes]


def _items(
    table: RawTable,
    specs: list[tuple[ItemSpec, Item | None]],
    rows: Ints,
    weights: Ints,
    problems: Problems,
    findings: list[Finding],
) -> tuple[list[Item], Ints]:
    items: list[Item] = []
    # Column by column in memory: that is how they are written here and read when collapsed.
    codes = np.empty((rows.size, len(specs)), dtype=np.int16, order="F")
    everything = rows.size == table.n_rows
    inferred: list[Item] = []
    for j, (spec, known) in enumerate(specs):
        column = table.column(spec.name)
        reader = ItemColumn(
            table,
            column if everything else keep_rows(column, rows),
            rows,
            weights,
            spec,
            known,
            problems,
        )
        read = reader.read()
        findings.extend(reader.findings)
        if read is not None:
            items.append(read[0])
            codes[:, j] = read[1]
            if reader.inferred_yes:
                inferred.append(read[0])
    findings.extend(_yes_findings(inferred))
    return items, codes


def _yes_findings(items: list[Item]) -> list[Finding]:
    """Return one finding for each pair of answers of which one was taken for yes."""
    by_pair: dict[tuple[str, ...], list[str]] = {}
    for item in items:
        other = next(name for name in item.categories if name != item.yes)
        by_pair.setdefault((other, str(item.yes)), []).append(item.name)
    return [
        Finding(
            "yes_inferred",
            "note",
            f"{yes!r} counts as yes where the two answers are {other!r} and {yes!r}: "
            f"{', '.join(names)}.",
            "Give yes for an item to say otherwise.",
            tuple(names),
        )
        for (other, yes), names in by_pair.items()
    ]


def set_aside_finding(codes: Ints, counts: Ints) -> Finding | None:
    """Return a finding on cases without a single answer, None when there are none."""
    silent = (codes < 0).all(axis=1)
    n = int(counts[silent].sum())
    if not n:
        return None
    message = (
        f"{n:,} case{'s' * (n != 1)} without a single answer: set aside, kept in the case table."
    )
    return Finding("cases_set_aside", "note", message, value=float(n))
