"""A finding: one thing that was noticed about the data, the model or the sampling.

Findings are data. They are collected where the thing is noticed, carried by the object they
concern, and put into words in one place: tables, report and command line only print them.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

Level = Literal["note", "warning", "problem"]


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that was noticed.

    Attributes
    ----------
    kind : str
        A stable name in snake case, such as ``"sparse_category"`` or ``"modes_differ"``.
    level : {"note", "warning", "problem"}
        ``"problem"`` means that results which rest on it are not to be trusted.
    message : str
        One sentence for the analyst: what, where, and with which number.
    remedy : str
        What can be done about it; empty when there is nothing to do.
    about : tuple of str
        The names (items, classes, cases, quantities) that it concerns.
    value : float or None
        The number it rests on, where there is one.
    """

    kind: str
    level: Level
    message: str
    remedy: str = ""
    about: tuple[str, ...] = field(default=())
    value: float | None = None
