"""Items and groups: the columns of answers, as the model sees them."""

from __future__ import annotations

from dataclasses import dataclass

from bayeslca.exceptions import ResponsesError


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
