"""Everything that bayeslca raises or warns with.

Every message says what is wrong, where (file, row, column, statement), and what to do.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable


class BayesLCAError(Exception):
    """Base of all errors that bayeslca raises on purpose."""


class ResponsesError(BayesLCAError, ValueError):
    """The answers cannot be used as they are: a file, a column or a value is wrong."""


class ModelError(BayesLCAError, ValueError):
    """The model as stated cannot be built, or does not fit the responses."""


class StatementError(ModelError):
    """A statement cannot be read or used; the message shows it with a caret.

    Parameters
    ----------
    problem : str
        What is wrong, in one sentence.
    statement : str
        The text of the statement as the user wrote it.
    position : int
        Zero-based column of ``statement`` at which the problem stands.
    remedy : str
        What to do about it.
    """

    def __init__(self, problem: str, *, statement: str, position: int, remedy: str) -> None:
        self.problem = problem
        self.statement = statement
        self.position = position
        self.remedy = remedy
        super().__init__(problem, statement, position, remedy)

    def __str__(self) -> str:
        caret = " " * self.position + "^"
        return f"{self.problem}\n    {self.statement}\n    {caret}\n{self.remedy}"


class StudyError(BayesLCAError, ValueError):
    """A study file is wrong; the message names the file and the key."""


class SamplingError(BayesLCAError, RuntimeError):
    """Sampling cannot start or cannot go on."""


class StorageError(BayesLCAError, OSError):
    """A saved posterior cannot be read, or a result would be overwritten."""


class BayesLCAWarning(UserWarning):
    """Something the analyst should know; also kept as a finding."""


def near_names(name: str, known: Iterable[str], *, most: int = 3, likeness: float = 0.6) -> str:
    """Return `` (near names: 'a', 'b')`` for a name that was not found, or ''.

    Parameters
    ----------
    name : str
        The name that was not found.
    known : iterable of str
        The names that exist.
    most : int
        How many to suggest at the most.
    likeness : float
        How alike they must be, from 0 to 1; more for names that share an ending.
    """
    by_folded = {candidate.casefold(): candidate for candidate in known}
    close = difflib.get_close_matches(name.casefold(), list(by_folded), n=most, cutoff=likeness)
    if not close:
        return ""
    return " (near names: " + ", ".join(repr(by_folded[name]) for name in close) + ")"
