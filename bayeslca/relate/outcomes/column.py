"""Reading an outcome: what kind it is, and what cannot be an outcome of that kind."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.exceptions import ModelError, ResponsesError, near_names
from bayeslca.findings import Finding

if TYPE_CHECKING:
    from bayeslca.relate.case_table import CaseTable
    from bayeslca.responses.responses import Responses

OutcomeKind = Literal["numeric", "binary", "count", "ordered"]
KINDS: tuple[OutcomeKind, ...] = ("numeric", "binary", "count", "ordered")
YES = ("yes", "y", "true", "1", "1.0")
NO = ("no", "n", "false", "0", "0.0")
FEWEST_CASES = 3
"""An outcome seen in fewer cases than this says nothing."""
MOST_SHOWN = 5


@dataclass(frozen=True, eq=False)
class Outcome:
    """An outcome in the order of the responses' cases.

    Attributes
    ----------
    name : str
        Column name.
    label : str
        What the report calls it; the name when empty.
    kind : {"numeric", "binary", "count", "ordered"}
    value : ndarray of float64, shape (N,)
        nan where it is missing; 0 and 1 when binary; codes 0..R-1 when ordered.
    levels : tuple of str
        Names of the codes, of binary and ordered outcomes; the second of a binary one is "yes".
    findings : tuple of Finding
    """

    name: str
    label: str
    kind: OutcomeKind
    value: Floats
    levels: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = ()

    @property
    def text(self) -> str:
        """The label, or the name where there is none."""
        return self.label or self.name

    @property
    def seen(self) -> Bools:
        """Which cases have a value, shape (N,)."""
        return np.asarray(~np.isnan(self.value))


def read_outcome(
    responses: Responses,
    data: Any,
    column: str,
    kind: OutcomeKind,
    *,
    case: str | None = None,
    levels: Sequence[Any] | None = None,
    yes: Any = None,
    label: str = "",
    no_answer: Sequence[Any] = (),
    **how_to_read: Any,
) -> Outcome:
    """Read an outcome and check that it is of its kind.

    Parameters
    ----------
    responses : Responses
    data : path or data frame
        See `bayeslca.relate.case_table.read_case_table`.
    column : str
    kind : {"numeric", "binary", "count", "ordered"}
    case : str, optional
        Column of case ids in ``data``.
    levels : sequence, optional
        Categories of an ordered outcome from the lowest to the highest; may be left out where
        they are whole numbers.
    yes : optional
        Which of two values of a binary outcome counts.
    label : str
    no_answer : sequence
        Values that mean that there is none.
    **how_to_read
        ``sheet``, ``header_row``, ``encoding``, ``separator``, ``keep_only`` of a file.

    Raises
    ------
    ModelError
        When the kind is unknown, or an option is not of this kind.
    ResponsesError
        When the column is not of its kind: text among numbers, negative or broken counts, one
        value only, more than two values of a binary outcome, levels that are not listed.
    """
    from bayeslca.relate.case_table import Kind, read_case_table

    _check_options(kind, column, levels, yes)
    kinds: Mapping[str, Kind] = {} if kind in ("numeric", "count") else {column: "category"}
    table = read_case_table(
        responses, data, [column], case=case, kinds=kinds, no_answer=no_answer, **how_to_read
    )
    names = responses.row_names
    if kind in ("numeric", "count"):
        value = _numbers(table, column, kind, names)
        found: tuple[str, ...] = ()
    else:
        value, found = _codes(table, column, kind, levels, yes, names)
    outcome = Outcome(column, label, kind, value, found, table.findings)
    _check_varies(outcome)
    return Outcome(column, label, kind, value, found, (*table.findings, *_missing(outcome, names)))


def _check_options(kind: OutcomeKind, column: str, levels: Sequence[Any] | None, yes: Any) -> None:
    if kind not in KINDS:
        msg = (
            f"outcome {column!r}: there is no kind {kind!r}{near_names(str(kind), KINDS)}. "
            f"Take one of {', '.join(KINDS)}."
        )
        raise ModelError(msg)
    if levels is not None and kind != "ordered":
        msg = f"outcome {column!r}: levels are of ordered outcomes; this one is {kind}."
        raise ModelError(msg)
    if yes is not None and kind != "binary":
        msg = f"outcome {column!r}: yes is of binary outcomes; this one is {kind}."
        raise ModelError(msg)


def _numbers(table: CaseTable, column: str, kind: str, names: Sequence[str]) -> Floats:
    value = table.numbers(column)

    def refuse(wrong: Bools, what: str, remedy: str) -> None:
        if wrong.any():
            raise ResponsesError(_at_cases(column, what, value[wrong], wrong, names, remedy))

    with np.errstate(invalid="ignore"):
        refuse(np.isinf(value), "a value without bounds", "Correct it, or leave it empty.")
        if kind == "count":
            refuse(value < 0, "a negative count", "A count is 0 or more.")
            refuse(
                np.asarray(value % 1 != 0) & ~np.isnan(value),
                "a count that is not whole",
                'Round it, or take kind="numeric".',
            )
    return value


def _at_cases(
    column: str, what: str, values: Any, wrong: Bools, names: Sequence[str], remedy: str
) -> str:
    cases = [names[i] for i in np.flatnonzero(wrong).tolist()]
    shown = ", ".join(
        f"{value} (case {case})"
        for value, case in zip(list(values)[:MOST_SHOWN], cases[:MOST_SHOWN], strict=True)
    )
    more = f" and {len(cases) - MOST_SHOWN:,} more" if len(cases) > MOST_SHOWN else ""
    return f"outcome {column!r}: {what}: {shown}{more}. {remedy}"


def _codes(
    table: CaseTable,
    column: str,
    kind: str,
    levels: Sequence[Any] | None,
    yes: Any,
    names: Sequence[str],
) -> tuple[Floats, tuple[str, ...]]:
    texts = table.frame[column].tolist()
    there = list(dict.fromkeys(text for text in texts if text is not None and text == text))
    if kind == "binary":
        order = _two_levels(column, there, yes)
    elif levels is not None:
        order = tuple(_as_text(level) for level in levels)
        if len(set(order)) < len(order) or len(order) < 2:
            msg = f"outcome {column!r}: levels must be two or more, each once; got {order}."
            raise ResponsesError(msg)
    else:
        order = _whole_numbers(column, there)
    strange = np.array([text is not None and text == text and text not in order for text in texts])
    if strange.any():
        first = next(text for text, odd in zip(texts, strange, strict=True) if odd)
        shown = [repr(text) for text, odd in zip(texts, strange, strict=True) if odd]
        remedy = (
            f"The levels are {', '.join(order)}{near_names(str(first), order)}; list all of them, "
            "or say that it means no answer."
        )
        raise ResponsesError(
            _at_cases(column, "a value that is no level", shown, strange, names, remedy)
        )
    at = {text: float(i) for i, text in enumerate(order)}
    return np.array([at.get(text, np.nan) for text in texts]), order


def _as_text(value: Any) -> str:
    from bayeslca.responses.spelling import as_text

    return str(as_text(value))


def _two_levels(column: str, there: Sequence[str], yes: Any) -> tuple[str, ...]:
    shown = ", ".join(repr(text) for text in there[:MOST_SHOWN])
    if len(there) > 2:
        msg = (
            f"outcome {column!r}: a binary outcome has two values; found {len(there):,}: {shown}. "
            "Say which mean no answer, or take another kind."
        )
        raise ResponsesError(msg)
    if yes is not None:
        wanted = _as_text(yes)
        if wanted not in there:
            msg = f"outcome {column!r}: yes={wanted!r} is not among its values ({shown})."
            raise ResponsesError(msg)
    else:
        known = [text for text in there if text.casefold() in YES]
        if len(known) != 1:
            msg = (
                f"outcome {column!r}: which of its values counts as yes ({shown})? Say so with "
                f"yes={there[0]!r}."
                if there
                else f"outcome {column!r}: has no value."
            )
            raise ResponsesError(msg)
        wanted = known[0]
    others = [text for text in there if text != wanted]
    return (others[0] if others else f"not {wanted}", wanted)


def _whole_numbers(column: str, there: Sequence[str]) -> tuple[str, ...]:
    from bayeslca.responses.spelling import number_of

    numbers = {text: number_of(text) for text in there}
    if any(number is None or number % 1 for number in numbers.values()):
        shown = ", ".join(repr(text) for text in list(there)[:MOST_SHOWN])
        msg = (
            f"outcome {column!r}: the order of its categories is not known ({shown}). List them "
            "with levels, from the lowest to the highest."
        )
        raise ResponsesError(msg)
    return tuple(sorted(numbers, key=lambda text: numbers[text] or 0.0))


def _check_varies(outcome: Outcome) -> None:
    value = outcome.value[outcome.seen]
    if value.size < FEWEST_CASES:
        msg = (
            f"outcome {outcome.name!r}: only {value.size} cases have a value; class means cannot "
            "be found from that. Check the column and the case ids."
        )
        raise ResponsesError(msg)
    if np.ptp(value) == 0.0:
        shown = outcome.levels[int(value[0])] if outcome.levels else f"{value[0]:g}"
        msg = (
            f"outcome {outcome.name!r}: is constant: all {value.size:,} cases with a value have "
            f"{shown}. Nothing follows from class in it; leave it out."
        )
        raise ResponsesError(msg)


def _missing(outcome: Outcome, names: Sequence[str]) -> tuple[Finding, ...]:
    gone = np.flatnonzero(~outcome.seen)
    if not gone.size:
        return ()
    cases = tuple(names[i] for i in gone.tolist())
    return (
        Finding(
            kind="outcome_missing",
            level="note",
            message=f"{gone.size:,} of {len(names):,} cases have no value of {outcome.text}. "
            "They keep their answers, and say nothing of the outcome.",
            remedy="If values are missing for reasons that have to do with them, means are biased.",
            about=cases,
            value=float(gone.size),
        ),
    )
