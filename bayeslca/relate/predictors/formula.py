"""Formulas of covariates: what they may say, and what each factor is worth.

Formulas are read by formulaic (``district + age + log(distance)``, ``a:b``, ``a*b``, ``C(code)``
for codes that are categories, names with spaces in backticks). Factors are evaluated here, with a
short list of functions and nothing else: a study file cannot run code.
"""

from __future__ import annotations

import ast
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, near_names

FUNCTIONS: Mapping[str, Callable[[Any], Any]] = {
    "log": np.log,
    "log2": np.log2,
    "log10": np.log10,
    "log1p": np.log1p,
    "sqrt": np.sqrt,
    "exp": np.exp,
    "abs": np.abs,
    "I": lambda value: value,
}
CATEGORY = "C"
"""``C(code)`` takes the values of a column as categories."""

_ALLOWED = (
    ast.Expression,
    ast.BinOp,
    ast.UnaryOp,
    ast.operator,
    ast.unaryop,
    ast.Name,
    ast.Load,
    ast.Constant,
    ast.Call,
)
_QUOTED = re.compile(r"`([^`]*)`")


@dataclass(frozen=True)
class Factor:
    """One factor of a formula, such as ``age`` or ``log(distance)``.

    Attributes
    ----------
    text : str
        As it is shown.
    expression : str
        As it is evaluated: names with spaces in backticks.
    columns : tuple of str
        Columns that it reads.
    is_category : bool
        True for ``C(...)``.
    """

    text: str
    expression: str
    columns: tuple[str, ...]
    is_category: bool = False

    def value(self, columns: Mapping[str, Floats]) -> Floats:
        """Return the numbers (N,) of a factor that is not one of categories."""
        if self.columns == (self.text,):
            return np.asarray(columns[self.text], dtype=np.float64)
        tree, names = _parsed(self.expression)
        known = {safe: columns[name] for safe, name in names.items() if name in columns}
        with np.errstate(all="ignore"):
            found = _evaluate(tree.body, known)
        n = len(next(iter(columns.values())))
        return np.broadcast_to(np.asarray(found, dtype=np.float64), (n,)).copy()


@dataclass(frozen=True)
class Formula:
    """A formula that was read.

    Attributes
    ----------
    text : str
    factors : tuple of Factor
        Each once.
    terms : tuple of tuple of int
        Factors that are multiplied in each term, by position; the intercept left out.
    """

    text: str
    factors: tuple[Factor, ...]
    terms: tuple[tuple[int, ...], ...]

    @property
    def columns(self) -> tuple[str, ...]:
        """All columns that the formula reads, each once."""
        return tuple(dict.fromkeys(name for factor in self.factors for name in factor.columns))


def read_formula(text: str) -> Formula:
    """Read a formula of covariates.

    Parameters
    ----------
    text : str
        Such as ``"district + age + log(distance)"``; the class is what is explained and is not
        written.

    Raises
    ------
    ModelError
        Where it cannot be read, with what to write instead.
    """
    from formulaic import Formula as General

    where = f"formula {text!r}"
    if "~" in text:
        msg = f"{where}: write the covariates alone, without '~': it is the class they explain."
        raise ModelError(msg)
    if "|" in text:
        msg = f"{where}: '|' has no meaning here; covariates are joined by '+', ':' or '*'."
        raise ModelError(msg)
    try:
        terms = [
            tuple(str(factor.expr) for factor in term.factors if str(factor.expr) != "1")
            for term in General(text)
        ]
        has_intercept = any(len(term) == 0 for term in terms)
    except Exception as error:  # whatever formulaic raises
        first = re.sub(r"\x1b\[[0-9;]*m|[⧛⧚]", "", str(error)).strip().splitlines()
        msg = (
            f"{where} cannot be read ({first[0] if first else type(error).__name__}). Write it "
            "like 'district + age + log(distance)'; a name with spaces stands between backticks: "
            "`age in years`."
        )
        raise ModelError(msg) from None
    if not has_intercept:
        msg = f"{where}: leaves out the intercept, but classes differ in size. Write it without."
        raise ModelError(msg)
    terms = [term for term in terms if term]
    if not terms:
        msg = f"{where} names no covariate. Write it like 'district + age + log(distance)'."
        raise ModelError(msg)
    texts = list(dict.fromkeys(factor for term in terms for factor in term))
    factors = tuple(_factor(one, where) for one in texts)
    return Formula(text, factors, tuple(tuple(texts.index(one) for one in term) for term in terms))


def _factor(text: str, where: str) -> Factor:
    bare = text.strip("`")
    if text.startswith("`") and text.count("`") == 2 and text.endswith("`"):
        return Factor(bare, text, (bare,))
    if re.fullmatch(r"[^\W\d]\w*", text) or not re.search(r"[()+\-*/]", text):
        return Factor(text, text, (text,))
    try:
        tree, names = _parsed(text)
    except SyntaxError:
        return Factor(text, text, (text,))  # a name with unusual signs
    body = tree.body
    for node in ast.walk(tree):
        unknown = isinstance(node, ast.operator | ast.unaryop) and type(node) not in _OPERATORS
        no_number = isinstance(node, ast.Constant) and not isinstance(node.value, int | float)
        if unknown or no_number or not isinstance(node, _ALLOWED):
            msg = (
                f"{where}: {text!r} is not arithmetic of columns. Allowed are + - * / ** and "
                f"{', '.join([*FUNCTIONS, CATEGORY])}."
            )
            raise ModelError(msg)
        if isinstance(node, ast.Call):
            _check_call(node, body, where)
    called = [node.func for node in ast.walk(tree) if isinstance(node, ast.Call)]
    used = [n for n in ast.walk(tree) if isinstance(n, ast.Name) and n not in called]
    columns = tuple(dict.fromkeys(names.get(node.id, node.id) for node in used))
    if not columns:
        msg = f"{where}: {text!r} names no column."
        raise ModelError(msg)
    is_category = isinstance(body, ast.Call) and _name(body) == CATEGORY
    return Factor(text.replace("`", ""), text, columns, is_category)


def _check_call(node: ast.Call, body: ast.expr, where: str) -> None:
    name = _name(node)
    known = [*FUNCTIONS, CATEGORY]
    if name not in known:
        msg = (
            f"{where}: there is no function {name!r}{near_names(name, known)}. Known are "
            f"{', '.join(known)}; make other columns in the data."
        )
        raise ModelError(msg)
    if len(node.args) != 1 or node.keywords:
        msg = f"{where}: {name} takes one column, and nothing else."
        raise ModelError(msg)
    if name == CATEGORY and (node is not body or not isinstance(node.args[0], ast.Name)):
        msg = f"{where}: {CATEGORY}(...) stands by itself, around one column."
        raise ModelError(msg)


def _name(node: ast.Call) -> str:
    return node.func.id if isinstance(node.func, ast.Name) else ast.unparse(node.func)


def _parsed(text: str) -> tuple[ast.Expression, dict[str, str]]:
    """Parse a factor; return also the column behind each name that stands in it."""
    names: dict[str, str] = {}

    def safe(found: re.Match[str]) -> str:
        name = f"_column_{len(names)}"
        names[name] = found.group(1)
        return name

    tree = ast.parse(_QUOTED.sub(safe, text).strip(), mode="eval")
    for node in ast.walk(tree):
        if isinstance(node, ast.Name) and node.id not in names:
            names[node.id] = node.id
    return tree, names


_OPERATORS: Mapping[type, Callable[..., Any]] = {
    ast.Add: np.add,
    ast.Sub: np.subtract,
    ast.Mult: np.multiply,
    ast.Div: np.divide,
    ast.Pow: np.power,
    ast.USub: np.negative,
    ast.UAdd: np.positive,
}


def _evaluate(node: ast.expr, known: Mapping[str, Any]) -> Any:
    if isinstance(node, ast.Constant):
        return float(node.value)  # type: ignore[arg-type]
    if isinstance(node, ast.Name):
        return known[node.id]
    if isinstance(node, ast.Call):
        return FUNCTIONS[_name(node)](_evaluate(node.args[0], known))
    if isinstance(node, ast.UnaryOp):
        return _OPERATORS[type(node.op)](_evaluate(node.operand, known))
    assert isinstance(node, ast.BinOp)
    return _OPERATORS[type(node.op)](_evaluate(node.left, known), _evaluate(node.right, known))
