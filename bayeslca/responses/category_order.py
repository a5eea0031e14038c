"""The order of an item's categories, and which of two answers counts as yes."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass
from typing import Literal

from bayeslca.responses.spelling import folded, number_of

Rule = Literal["data", "number", "known pair", "known scale", "alphabet"]

# Low end first; spelled as `folded` leaves them. Words of the trade (common practice, no source).
_PAIRS = (
    ("no", "yes"),
    ("n", "y"),
    ("false", "true"),
    ("f", "t"),
    ("negative", "positive"),
    ("neg", "pos"),
    ("-", "+"),
    ("absent", "present"),
    ("off", "on"),
    ("0", "1"),
    ("notmentioned", "mentioned"),
    ("notselected", "selected"),
    ("unchecked", "checked"),
    ("never", "ever"),
    ("uninfected", "infected"),
    ("fail", "pass"),
    ("incorrect", "correct"),
    ("wrong", "right"),
    ("disagree", "agree"),
    ("nein", "ja"),
    ("nee", "ja"),
    ("nej", "ja"),
    ("non", "oui"),
    ("no", "si"),
    ("nao", "sim"),
    ("hapana", "ndiyo"),
)
# These have an order, but saying P(item) for their high end would puzzle a reader.
_NOT_YES = {
    ("off", "on"),
    ("never", "ever"),
    ("fail", "pass"),
    ("wrong", "right"),
    ("incorrect", "correct"),
}
_SCALES = (
    (
        "stronglydisagree",
        "disagree",
        "neitheragreenordisagree",
        "neutral",
        "agree",
        "stronglyagree",
    ),
    ("completelydisagree", "disagree", "neutral", "agree", "completelyagree"),
    ("verydissatisfied", "dissatisfied", "neutral", "satisfied", "verysatisfied"),
    ("never", "almostnever", "rarely", "seldom", "sometimes", "often", "veryoften", "always"),
    ("never", "rarely", "occasionally", "frequently", "always"),
    ("none", "alittle", "some", "alot"),
    ("none", "few", "some", "many", "all"),
    ("notatall", "alittle", "somewhat", "quiteabit", "alot", "verymuch"),
    ("verylow", "low", "medium", "high", "veryhigh"),
    ("low", "moderate", "high"),
    ("low", "middle", "high"),
    ("verypoor", "poor", "fair", "good", "verygood", "excellent"),
    ("verybad", "bad", "fair", "good", "verygood"),
    ("none", "mild", "moderate", "severe"),
    ("no", "partly", "yes"),
    ("no", "sometimes", "yes"),
    ("no", "maybe", "yes"),
    ("small", "medium", "large"),
    ("daily", "weekly", "monthly", "yearly"),
)


@dataclass(frozen=True)
class CategoryOrder:
    """Categories in their order, and where the order is from.

    Attributes
    ----------
    categories : tuple of str
    rule : str
        "data", "number", "known pair", "known scale" or "alphabet".
    """

    categories: tuple[str, ...]
    rule: Rule


def order_categories(names: Collection[str], in_data: Sequence[str] = ()) -> CategoryOrder:
    """Put an item's categories in order.

    Parameters
    ----------
    names : collection of str
        The categories that occur.
    in_data : sequence of str
        The order that came with the data (value labels, a categorical column); it need not hold
        every name.
    """
    if in_data and set(names) <= set(in_data):
        return CategoryOrder(tuple(name for name in in_data if name in names), "data")
    numbers = {name: number_of(name) for name in names}
    if all(number is not None for number in numbers.values()):
        ordered = sorted(names, key=lambda name: (numbers[name] or 0.0, name))
        return CategoryOrder(tuple(ordered), "number")
    by_fold = {folded(name): name for name in names}
    if len(by_fold) == len(names):
        for pair in _PAIRS:
            if set(by_fold) == set(pair):
                return CategoryOrder(tuple(by_fold[word] for word in pair), "known pair")
        for scale in _SCALES:
            if set(by_fold) <= set(scale):
                words = [word for word in scale if word in by_fold]
                return CategoryOrder(tuple(by_fold[word] for word in words), "known scale")
    return CategoryOrder(tuple(sorted(names, key=lambda n: (n.casefold(), n))), "alphabet")


def infer_yes(categories: Sequence[str]) -> str | None:
    """Return the category that counts as yes when the two answers say so, else None.

    Examples
    --------
    >>> infer_yes(["no", "yes"]), infer_yes(["0", "1"]), infer_yes(["1", "2"])
    ('yes', '1', None)
    """
    if len(categories) != 2:
        return None
    by_fold = {folded(name): name for name in categories}
    for low, high in _PAIRS:
        if set(by_fold) == {low, high} and (low, high) not in _NOT_YES:
            return by_fold[high]
    return None


_SYNONYMS = (
    ("yes", ("yes", "y", "1", "true", "t", "x", "oui", "si", "ja", "sim")),
    ("no", ("no", "n", "0", "false", "f", "non", "nein", "nao")),
)
"""Spellings that usually mean yes and no; proposed to the analyst, never merged unasked."""


def same_meaning(names: Sequence[str]) -> dict[str, tuple[str, ...]]:
    """Return answers that probably mean the same, in a column about yes and no.

    Parameters
    ----------
    names : sequence of str
        Distinct answers; the first of several that mean the same is the one kept.

    Examples
    --------
    >>> same_meaning(["yes", "no", "Y"]), same_meaning(["yes", "no"])
    ({'yes': ('Y',)}, {})
    """
    fold = {name: folded(name) for name in names}
    known = {word for _, words in _SYNONYMS for word in words}
    if len(names) < 3 or not all(word in known for word in fold.values()):
        return {}
    found = {}
    for _, words in _SYNONYMS:
        members = [name for name in names if fold[name] in words]
        if len(members) > 1:
            found[members[0]] = tuple(members[1:])
    return found
