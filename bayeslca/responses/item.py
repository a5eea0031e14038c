"""Items and groups: the columns of answers, as the model sees them."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from bayeslca.exceptions import ResponsesError
from bayeslca.responses.spelling import as_text


@dataclass(frozen=True, slots=True)
class Item:
    """A categorical item (indicator) and its possible answers.

    Attributes
    ----------
    name : str
        Column name; how statements call the item.
    categories : tuple of str
        The possible answers in their order, at least two, all different.
    label : str
        The item's text for the report; the name when empty.
    ordered : bool
        True when the order of the categories has a meaning.
    yes : str or None
        The category that counts as yes, so that ``P(fees | managed)`` may be written.

    Raises
    ------
    ResponsesError
        With fewer than two categories, repeated categories, or a ``yes`` that is not one.
    """

    name: str
    categories: tuple[str, ...]
    label: str = ""
    ordered: bool = False
    yes: str | None = None

    def __post_init__(self) -> None:
        if len(self.categories) < 2:
            msg = (
                f"item '{self.name}' has {len(self.categories)} category; an item needs at least "
                "two to tell cases apart. Leave it out, or give its full list of categories."
            )
            raise ResponsesError(msg)
        repeated = sorted({c for c in self.categories if self.categories.count(c) > 1})
        if repeated:
            msg = (
                f"item '{self.name}' lists the category {repeated[0]!r} more than once. "
                "Give each answer a name of its own."
            )
            raise ResponsesError(msg)
        if self.yes is not None and self.yes not in self.categories:
            msg = (
                f"item '{self.name}' counts {self.yes!r} as yes, but its categories are "
                f"{', '.join(self.categories)}. Set yes to one of these."
            )
            raise ResponsesError(msg)

    @property
    def text(self) -> str:
        """The label, or the name where there is none."""
        return self.label or self.name

    @property
    def n_categories(self) -> int:
        """Number of possible answers."""
        return len(self.categories)


@dataclass(frozen=True, slots=True)
class ItemSpec:
    """What the analyst says about an item before the answers are read.

    Attributes
    ----------
    name : str
        Column name.
    categories : sequence of str or None
        All possible answers in their order; None to take those found in the data. A list is a
        promise: answers outside it are refused, and what it names is kept as an answer.
    label : str
        The item's text for the report; the file's own text when empty.
    ordered : bool
        True when the order of the categories has a meaning.
    yes : str or None
        The category that counts as yes.
    merge : mapping of str to sequence of str
        Spellings that are one answer: ``{"yes": ["Yes", "Y", "1"]}``.
    no_answer : sequence of str
        Values of this item that mean that there is no answer.
    fitted : bool
        True for new cases of a fitted model: ``categories`` are the model's, and it is no error
        that some of them, or all, do not occur.
    """

    name: str
    categories: Sequence[Any] | None = None
    label: str = ""
    ordered: bool = False
    yes: Any = None
    merge: Mapping[str, Sequence[Any]] = field(default_factory=dict)
    no_answer: Sequence[Any] = ()
    fitted: bool = False

    def __post_init__(self) -> None:
        if not isinstance(self.name, str) or not self.name:
            msg = f"an item's name is {self.name!r}; give the name of its column as text."
            raise ResponsesError(msg)
        if self.fitted and self.categories is None:
            msg = f"item '{self.name}': fitted=True needs the fitted model's categories. Give them."
            raise ResponsesError(msg)
        # Numbers and truth values are taken as they would be read from a file: 1, 1.0 -> "1".
        if self.categories is not None:
            object.__setattr__(self, "categories", self._texts("categories", self.categories))
        object.__setattr__(self, "yes", None if self.yes is None else as_text(self.yes))
        object.__setattr__(self, "no_answer", self._texts("no_answer", self.no_answer))
        if not isinstance(self.merge, Mapping):
            msg = (
                f"item '{self.name}': merge={self.merge!r} is no mapping; write "
                "{answer: [spellings]}."
            )
            raise ResponsesError(msg)
        merge = {
            str(as_text(kept)): self._texts("merge", spellings)
            for kept, spellings in self.merge.items()
        }
        object.__setattr__(self, "merge", merge)

    def _texts(self, key: str, values: Sequence[Any]) -> tuple[str, ...]:
        if isinstance(values, (str, bytes)) or not isinstance(values, Collection):
            msg = f"item '{self.name}': {key}={values!r} is not a list; write [{values!r}]."
            raise ResponsesError(msg)
        return tuple("" if (text := as_text(value)) is None else text for value in values)


@dataclass(frozen=True, slots=True)
class Groups:
    """The grouping of cases that was declared: a column and its levels.

    Attributes
    ----------
    name : str
        Column name; how statements call it (``P(managed | district=north)``).
    levels : tuple of str
        The groups, in the order of tables and arrays.
    """

    name: str
    levels: tuple[str, ...]
