"""What a page is made of: sections that hold blocks of text, tables and figures.

All text is plain; the template escapes it. Nothing here knows any mark-up.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, TypeAlias

from bayeslca.report.figures import Figure


@dataclass(frozen=True)
class Paragraph:
    """A paragraph of text."""

    text: str
    kind: Literal["paragraph"] = "paragraph"


@dataclass(frozen=True)
class Lead:
    """The sentence that answers the question; marked when it is not to be trusted."""

    text: str
    trustworthy: bool = True
    kind: Literal["lead"] = "lead"


@dataclass(frozen=True)
class Banner:
    """A warning that must be seen before what follows."""

    heading: str
    texts: tuple[str, ...]
    kind: Literal["banner"] = "banner"


@dataclass(frozen=True)
class Bullets:
    """A list; each entry may have a term that it is about."""

    entries: tuple[tuple[str, str], ...]
    kind: Literal["bullets"] = "bullets"


@dataclass(frozen=True)
class Subheading:
    """A heading within a section."""

    text: str
    kind: Literal["subheading"] = "subheading"


@dataclass(frozen=True)
class Verbatim:
    """Text shown as it was written: statements, a command, a study file."""

    text: str
    summary: str = ""
    kind: Literal["verbatim"] = "verbatim"


@dataclass(frozen=True)
class Head:
    """The head of a column: words, and one line that explains it."""

    words: str
    gloss: str = ""
    numeric: bool = True


@dataclass(frozen=True)
class PageTable:
    """A table as the page shows it: every cell is text already.

    Attributes
    ----------
    caption : str
    heads : tuple of Head
    rows : tuple of tuple of str
        The first cell of a row is its head.
    notes : tuple of str
        Lines under the table.
    folded : bool
        True when the table is long and is shown only when asked for.
    """

    caption: str
    heads: tuple[Head, ...]
    rows: tuple[tuple[str, ...], ...]
    notes: tuple[str, ...] = ()
    folded: bool = False
    kind: Literal["table"] = "table"


@dataclass(frozen=True)
class Picture:
    """A figure with its caption."""

    figure: Figure
    kind: Literal["figure"] = "figure"


@dataclass(frozen=True)
class Answered:
    """A question that a reviewer will ask.

    Attributes
    ----------
    question, answer : str
    places : tuple of (str, str)
        Anchor and heading of the sections where the answer stands.
    guidelines : str
        Items of reporting guidelines that ask for it ("BARG 1C; STARD-BLCM 14b").
    done : bool
        False when the study did not do it.
    """

    question: str
    answer: str
    places: tuple[tuple[str, str], ...] = ()
    guidelines: str = ""
    done: bool = True


@dataclass(frozen=True)
class Questions:
    """Questions with their answers."""

    entries: tuple[Answered, ...]
    kind: Literal["questions"] = "questions"


Block: TypeAlias = (
    Paragraph | Lead | Banner | Bullets | Subheading | Verbatim | PageTable | Picture | Questions
)


@dataclass(frozen=True)
class Section:
    """A section of the page."""

    anchor: str
    heading: str
    blocks: tuple[Block, ...]
