"""The design matrix: covariates as columns of numbers, checked before anything is sampled.

Numbers are standardised (mean 0, standard deviation 1 over the cases used), so that one prior
scale suits them all; categories are compared with their commonest one. Interactions multiply
standardised numbers. All columns are centred: the intercept is at the mean of the covariates.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.relate.case_table import CaseTable
from bayeslca.relate.predictors.formula import Factor, Formula, read_formula

if TYPE_CHECKING:
    import pandas as pd

Missing = Literal["leave_out", "refuse"]
MISSING: tuple[Missing, ...] = ("leave_out", "refuse")

INTERCEPT = "intercept"
MOST_SHOWN = 5
SAME = 1e-8
"""A column that others explain up to this share of its spread is collinear with them."""


@dataclass(frozen=True, eq=False)
class Scaled:
    """A factor with what turns its values into columns.

    Attributes
    ----------
    factor : Factor
    levels : tuple of str
        Categories, the one that others are compared with first; empty for numbers.
    mean, sd : float
        Of numbers, over the cases used.
    """

    factor: Factor
    levels: tuple[str, ...] = ()
    mean: float = 0.0
    sd: float = 1.0


@dataclass(frozen=True)
class Column:
    """One column of the design.

    Attributes
    ----------
    name : str
        ``"intercept"``, ``"age"``, ``"district=lake"``, ``"district=lake x age"``.
    meaning : str
        What a step of 1 in it is: ``"a rise by 9.2 (one standard deviation)"`` or ``"lake
        against hill"``.
    """

    name: str
    meaning: str


@dataclass(frozen=True, eq=False)
class Design:
    """Covariates of the cases used, as a matrix, and how to make it of other cases.

    N cases of the responses, n of them used, P columns.

    Attributes
    ----------
    formula : Formula
    factors : tuple of Scaled
    columns : tuple of Column
        The intercept first.
    matrix : ndarray of float64, shape (n, P)
    centre : ndarray of float64, shape (P,)
        Taken off each column.
    used : ndarray of bool, shape (N,)
        Cases that have all covariates.
    frame : DataFrame
        The covariates of the cases used, as they were read.
    kinds : mapping of str to {"number", "category"}
        What each covariate holds.
    findings : tuple of Finding
    """

    formula: Formula
    factors: tuple[Scaled, ...]
    columns: tuple[Column, ...]
    matrix: Floats
    centre: Floats
    used: Bools
    frame: pd.DataFrame
    kinds: Mapping[str, str]
    findings: tuple[Finding, ...] = ()

    @property
    def covariates(self) -> tuple[str, ...]:
        """The columns of the data that the formula reads."""
        return self.formula.columns

    def matrix_of(self, frame: pd.DataFrame) -> Floats:
        """Return the design matrix (n, P) of other cases.

        Parameters
        ----------
        frame : DataFrame
            With all covariates: numbers as numbers, categories as text.

        Raises
        ------
        ModelError
            When a covariate or a value is missing, or a category was not seen in the fit.
        """
        absent = [name for name in self.covariates if name not in frame.columns]
        if absent:
            msg = f"covariate {absent[0]!r} is missing; give {', '.join(self.covariates)}."
            raise ModelError(msg)
        gone = [name for name in self.covariates if frame[name].isna().any()]
        if gone:
            n = int(frame[gone[0]].isna().sum())
            msg = f"covariate {gone[0]!r} has no value in {n} rows; nothing follows for them."
            raise ModelError(msg)
        for scaled in self.factors:
            _refuse_unseen(scaled, frame)
        return _raw_matrix(self.formula, self.factors, frame)[0] - self.centre

    def levels_of(self, covariate: str) -> tuple[str, ...]:
        """Return the categories of a covariate, the one of comparison first; () for numbers."""
        for scaled in self.factors:
            if scaled.levels and scaled.factor.columns == (covariate,):
                return scaled.levels
        return ()

    def spread_of(self, covariate: str) -> float:
        """Return the standard deviation of a covariate of numbers over the cases used."""
        return float(self.frame[covariate].to_numpy(dtype=np.float64).std())


def design_of(
    table: CaseTable, formula: str | Formula, *, missing: Missing = "leave_out"
) -> Design:
    """Make the design matrix of a formula, and check it.

    Parameters
    ----------
    table : CaseTable
        Covariates in the order of the responses' cases.
    formula : str or Formula
    missing : {"leave_out", "refuse"}
        What is done with cases that miss a covariate: left out of the regression, or the data
        are refused.

    Raises
    ------
    ModelError
        When covariates are missing and refused, constant, or say the same as others.
    """
    if missing not in MISSING:
        msg = f"missing={missing!r}: cases that miss a covariate are 'leave_out' or 'refuse'."
        raise ModelError(msg)
    if isinstance(formula, str):
        formula = read_formula(formula)
    used, findings = _used(table, formula, missing)
    frame = table.frame.loc[used, list(formula.columns)].reset_index(drop=True)
    factors = tuple(_scaled(factor, table, frame) for factor in formula.factors)
    raw, names = _raw_matrix(formula, factors, frame)
    centre = raw.mean(axis=0)
    centre[0] = 0.0
    matrix = raw - centre
    _refuse_collinear(matrix, names)
    columns = tuple(Column(name, _meaning(name, factors)) for name in names)
    kinds = {name: _kind_of(name, factors, table) for name in formula.columns}
    return Design(
        formula, factors, columns, matrix, centre, used, frame, kinds, (*table.findings, *findings)
    )


def _used(table: CaseTable, formula: Formula, missing: Missing) -> tuple[Bools, list[Finding]]:
    gone = table.missing(formula.columns)
    n, n_gone = gone.size, int(gone.sum())
    if not n_gone:
        return ~gone, []
    counts = {name: int(table.frame[name].isna().sum()) for name in formula.columns}
    per = ", ".join(f"{name} {count}" for name, count in counts.items() if count)
    if n_gone == n or missing == "refuse":
        rest = "none is left" if n_gone == n else "missing='refuse' is set"
        msg = (
            f"{n_gone} of {n} cases miss a covariate ({per}), and {rest}. Fill them in, take the "
            "covariate out of the formula, or leave these cases out (missing='leave_out')."
        )
        raise ModelError(msg)
    return ~gone, [
        Finding(
            "covariates_missing",
            "warning" if n_gone > 0.05 * n else "note",
            f"{n_gone} of {n} cases miss a covariate ({per}) and were left out of the regression.",
            remedy="Results hold for cases like those that are left; see what the others are.",
            about=tuple(name for name, count in counts.items() if count),
            value=float(n_gone),
        )
    ]


def _scaled(factor: Factor, table: CaseTable, frame: pd.DataFrame) -> Scaled:
    held = {name: table.kinds[name] for name in factor.columns}
    name = factor.columns[0]
    if factor.is_category or (factor.text == name and held[name] == "category"):
        counts = _as_categories(frame[name]).value_counts()
        if len(counts) == 1:
            msg = (
                f"covariate {name!r} is {counts.index[0]!r} in all {len(frame)} cases: take it out."
            )
            raise ModelError(msg)
        base = max(counts.index, key=lambda level: (int(counts[level]), -_rank(level, counts)))
        others = sorted((level for level in counts.index if level != base), key=_natural)
        return Scaled(factor, (str(base), *map(str, others)))
    for column, kind in held.items():
        if kind == "category":
            values = ", ".join(repr(v) for v in sorted(set(frame[column]))[:MOST_SHOWN])
            msg = f"{factor.text!r}: covariate {column!r} holds categories ({values}), not numbers."
            raise ModelError(msg)
    value = factor.value(_numbers(frame, factor))
    bad = np.flatnonzero(~np.isfinite(value))
    if bad.size:
        shown = ", ".join(f"{frame[name][row]:g}" for row in bad[:MOST_SHOWN])
        msg = (
            f"{factor.text!r} has no value for {bad.size} cases ({name} = {shown}). Use log1p, "
            "another unit, or the column as it is."
        )
        raise ModelError(msg)
    sd = float(value.std())
    if not sd > SAME * max(1.0, float(np.abs(value).max())):
        msg = f"covariate {factor.text!r} is {value[0]:g} in all {value.size} cases: take it out."
        raise ModelError(msg)
    return Scaled(factor, mean=float(value.mean()), sd=sd)


def _as_categories(values: pd.Series[Any]) -> pd.Series[Any]:
    return values.map(
        lambda value: f"{value:g}" if isinstance(value, float) else str(value).strip()
    )


def _natural(level: str) -> tuple[float, str]:
    try:
        return (float(level), level)
    except ValueError:
        return (np.inf, level)


def _rank(level: str, counts: pd.Series[Any]) -> int:
    return sorted(counts.index, key=_natural).index(level)


def _numbers(frame: pd.DataFrame, factor: Factor) -> dict[str, Floats]:
    out: dict[str, Floats] = {}
    for name in factor.columns:
        try:
            out[name] = frame[name].to_numpy(dtype=np.float64)
        except (TypeError, ValueError):
            shown = frame[name].iloc[0]
            msg = f"covariate {name!r} should hold numbers; found values such as {shown!r}."
            raise ModelError(msg) from None
    return out


def _refuse_unseen(scaled: Scaled, frame: pd.DataFrame) -> None:
    if not scaled.levels:
        return
    name = scaled.factor.columns[0]
    unseen = sorted(set(_as_categories(frame[name])) - set(scaled.levels))
    if unseen:
        msg = (
            f"covariate {name!r}: {', '.join(map(repr, unseen[:MOST_SHOWN]))} was not among the "
            f"cases of the fit, so nothing follows for it. Known are {', '.join(scaled.levels)}."
        )
        raise ModelError(msg)


def _raw_matrix(
    formula: Formula, factors: Sequence[Scaled], frame: pd.DataFrame
) -> tuple[Floats, list[str]]:
    """Code standardised numbers and categories by formulaic; return columns and their names."""
    import pandas as pd
    from formulaic import Formula as General

    stand_ins: dict[str, Any] = {}
    for i, scaled in enumerate(factors):
        if scaled.levels:
            seen = _as_categories(frame[scaled.factor.columns[0]])
            codes = np.array([scaled.levels.index(level) for level in seen], dtype=np.int64)
            stand_ins[f"f{i}"] = pd.Categorical.from_codes(
                codes, categories=pd.Index([f"c{j}" for j in range(len(scaled.levels))])
            )
        else:
            value = scaled.factor.value(_numbers(frame, scaled.factor))
            stand_ins[f"f{i}"] = (value - scaled.mean) / scaled.sd
    text = " + ".join(["1", *(":".join(f"f{i}" for i in term) for term in formula.terms)])
    coded = General(text).get_model_matrix(pd.DataFrame(stand_ins))
    names = [_name(str(column), factors) for column in coded.columns]
    return np.ascontiguousarray(coded.to_numpy(dtype=np.float64)), names


_CODED = re.compile(r"f(\d+)(?:\[(?:T\.)?c(\d+)\])?")


def _name(coded: str, factors: Sequence[Scaled]) -> str:
    if coded == "Intercept":
        return INTERCEPT
    parts = []
    for found in _CODED.finditer(coded):
        scaled = factors[int(found.group(1))]
        level = found.group(2)
        name = scaled.factor.columns[0] if scaled.levels else scaled.factor.text
        parts.append(name if level is None else f"{name}={scaled.levels[int(level)]}")
    return " x ".join(parts)


def _meaning(name: str, factors: Sequence[Scaled]) -> str:
    if name == INTERCEPT:
        return "at the mean of all covariates"
    for scaled in factors:
        if name == scaled.factor.text and not scaled.levels:
            return f"a rise by {scaled.sd:.3g} (one standard deviation)"
        column = scaled.factor.columns[0]
        for level in scaled.levels:
            if name == f"{column}={level}":
                return f"{level} against {scaled.levels[0]}"
    return "how one changes the other's effect"


def _kind_of(name: str, factors: Sequence[Scaled], table: CaseTable) -> str:
    is_category = any(scaled.levels and scaled.factor.columns == (name,) for scaled in factors)
    return "category" if is_category else table.kinds[name]


def _refuse_collinear(matrix: Floats, names: Sequence[str]) -> None:
    """Name the first column that those before it explain."""
    for p in range(1, matrix.shape[1]):
        before, column = matrix[:, :p], matrix[:, p]
        weights, *_ = np.linalg.lstsq(before, column, rcond=None)
        left = column - before @ weights
        if float(np.linalg.norm(left)) > SAME * max(float(np.linalg.norm(column)), SAME):
            continue
        same = [names[q] for q in range(1, p) if abs(weights[q]) > SAME]
        together = " together" if len(same) > 1 else ""
        what = f"says the same as {' and '.join(same)}{together}" if same else "does not vary"
        msg = (
            f"covariate {names[p]!r} {what} (the columns are collinear), so their effects cannot "
            "be told apart. Take one of them out of the formula."
        )
        raise ModelError(msg)
