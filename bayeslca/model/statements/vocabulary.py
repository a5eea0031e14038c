"""The names that statements may use, and what a probability made of them stands for."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

from bayeslca.exceptions import ModelError, near_names
from bayeslca.model.statements.resolved import (
    Answer,
    GroupIndex,
    MembershipTerm,
    PrevalenceTerm,
    ResponseTerm,
    Term,
)
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.syntax import AllClasses, Event, Name, Overall, Probability
from bayeslca.responses.item import Groups, Item

NameKind = Literal["class", "item", "group column"]


@dataclass(frozen=True)
class Vocabulary:
    """The names of a model: classes, items with their categories, groups.

    Attributes
    ----------
    items : tuple of Item
    classes : tuple of str
        Names of the classes; "1".."K" when ``exploratory``.
    groups : Groups or None
    exploratory : bool
        True when only the number of classes was given: statements then speak of all classes.

    Raises
    ------
    ModelError
        When a name stands for two things.
    """

    items: tuple[Item, ...]
    classes: tuple[str, ...]
    groups: Groups | None = None
    exploratory: bool = False

    def __post_init__(self) -> None:
        found: dict[str, NameKind] = {}
        for name, kind in self._named():
            if name in found:
                msg = f"'{name}' names {_two(found[name], kind)}. Give each a name of its own."
                raise ModelError(msg)
            found[name] = kind

    def _named(self) -> list[tuple[str, NameKind]]:
        """Every name with its kind; numbers that stand for classes are not names."""
        named: list[tuple[str, NameKind]] = []
        if not self.exploratory:
            named += [(name, "class") for name in self.classes]
        named += [(item.name, "item") for item in self.items]
        if self.groups is not None:
            named.append((self.groups.name, "group column"))
        return named

    @property
    def n_classes(self) -> int:
        """Number of classes, K."""
        return len(self.classes)

    @property
    def n_groups(self) -> int:
        """Number of groups of cases; 1 when there are none."""
        return len(self.groups.levels) if self.groups else 1

    def kind(self, name: Name) -> NameKind | None:
        """Tell what a name stands for; None when it is unknown."""
        return dict(self._named()).get(name.text)

    def class_index(self, name: Name) -> int:
        """Return the index of a class, or refuse the name."""
        if self.kind(name) == "class":
            return self.classes.index(name.text)
        if self.exploratory:
            msg = (
                f"there is no class '{name.text}': the model gives a number of classes, and a "
                "number names none"
            )
            remedy = "Speak of all classes, P(fees=yes | .), or give the classes names."
            raise Refusal(msg, name.position, remedy)
        raise self.unknown(name, "class", self.classes)

    def item_index(self, name: Name) -> int:
        """Return the index of an item, or refuse the name."""
        names = [item.name for item in self.items]
        if name.text in names:
            return names.index(name.text)
        raise self.unknown(name, "item", names)

    def category_index(self, item: int, name: Name) -> int:
        """Return the index of an item's category, or refuse the name."""
        categories = self.items[item].categories
        if name.text in categories:
            return categories.index(name.text)
        msg = (
            f"item '{self.items[item].name}' has no category '{name.text}'"
            f"{near_names(name.text, categories)}"
        )
        raise Refusal(msg, name.position, f"Its categories are {', '.join(categories)}.")

    def level_index(self, name: Name) -> int:
        """Return the index of a group, or refuse the name."""
        assert self.groups is not None
        levels = self.groups.levels
        if name.text in levels:
            return levels.index(name.text)
        msg = f"'{self.groups.name}' has no group '{name.text}'{near_names(name.text, levels)}"
        raise Refusal(msg, name.position, f"Its groups are {', '.join(levels)}.")

    def unknown(self, name: Name, kind: str, known: Sequence[str]) -> Refusal:
        """Return the refusal of a name that is not of the kind its place asks for."""
        actual = self.kind(name)
        if actual is not None:
            msg = f"'{name.text}' is {_article(actual)}, but {_article(kind)} belongs here"
        else:
            every = [known_name for known_name, _ in self._named()]
            msg = f"there is no {kind} '{name.text}'{near_names(name.text, every)}"
        plural = "classes" if kind == "class" else f"{kind}s"
        return Refusal(msg, name.position, f"The {plural} are {', '.join(known)}.")

    def unknown_event(self, name: Name) -> Refusal:
        """Return the refusal of a name where a class or an item could have stood."""
        if self.exploratory and self.kind(name) is None and name.text in self.classes:
            try:
                self.class_index(name)
            except Refusal as refusal:
                return refusal
        if self.kind(name) == "group column":
            msg = f"'{name.text}' is a group column, but a class or an item belongs here"
            remedy = f"Groups stand after the bar: P(... | {name.text}=...)."
            return Refusal(msg, name.position, remedy)
        known = [known_name for known_name, kind in self._named() if kind != "group column"]
        msg = f"there is no class or item '{name.text}'{near_names(name.text, known)}"
        return Refusal(msg, name.position, f"The classes and items are {', '.join(known)}.")

    def answer(self, event: Event) -> Answer:
        """Return the item and the categories that an event on an item stands for."""
        item = self.item_index(event.name)
        spec, sign = self.items[item], event.sign
        if sign == "":
            if spec.yes is None:
                msg = f"item '{spec.name}' does not declare which answer counts as yes"
                remedy = (
                    f"Write the answer, {spec.name}={spec.categories[-1]}, or declare yes for "
                    "the item."
                )
                raise Refusal(msg, event.position, remedy)
            return item, (spec.categories.index(spec.yes),)
        named = [self.category_index(item, name) for name in event.categories]
        if sign == "=":
            return item, (named[0],)
        if sign == "in":
            if len(set(named)) < len(named):
                msg = "a category is listed twice"
                raise Refusal(msg, event.categories[0].position, "List each category once.")
            return item, self._some(event, item, named)
        if not spec.ordered:
            msg = f"the categories of item '{spec.name}' have no order, so '{sign}' has no meaning"
            remedy = f"Write {spec.name} in {{...}}, or declare the item as ordered."
            raise Refusal(msg, event.position, remedy)
        at, every = named[0], range(spec.n_categories)
        chosen = {
            ">": [c for c in every if c > at],
            ">=": [c for c in every if c >= at],
            "<": [c for c in every if c < at],
            "<=": [c for c in every if c <= at],
        }[sign]
        return item, self._some(event, item, chosen)

    def _some(self, event: Event, item: int, categories: Sequence[int]) -> tuple[int, ...]:
        """Refuse an event that holds for no answer, or for every answer."""
        if 0 < len(categories) < self.items[item].n_categories:
            return tuple(sorted(categories))
        which = "every category" if categories else "no category"
        msg = f"{which} of item '{event.name.text}' is meant here, so there is nothing to learn"
        remedy = f"Its categories are {', '.join(self.items[item].categories)}."
        raise Refusal(msg, event.position, remedy)

    def conditions(self, probability: Probability) -> Conditions:
        """Sort what stands after the bar into classes, a group, and answers."""
        classes: list[tuple[int | None, int]] = []
        answers: list[tuple[Answer, int]] = []
        group: GroupIndex = "every"
        for given in probability.given:
            named_group: GroupIndex = "every"
            if isinstance(given, AllClasses):
                classes.append((None, given.position))
            elif isinstance(given, Overall):
                named_group = "overall"
            elif self.kind(given.name) == "group column":
                named_group = self._level(given)
            elif self.kind(given.name) == "item":
                answers.append((self.answer(given), given.position))
            elif given.sign:
                known = [name for name, kind in self._named() if kind != "class"]
                raise self.unknown(given.name, "item or group column", known)
            else:
                classes.append((self.class_index(given.name), given.position))
            if named_group != "every":
                if group != "every":
                    msg = "a group is given twice"
                    raise Refusal(msg, given.position, "Give one group, or 'overall'.")
                group = named_group
        return Conditions(tuple(classes), group, tuple(answers))

    def _level(self, given: Event) -> int:
        if given.sign != "=":
            msg = f"group column '{given.name.text}' stands without a group"
            assert self.groups is not None
            remedy = f"Write {given.name.text}={self.groups.levels[0]}."
            raise Refusal(msg, given.position, remedy)
        return self.level_index(given.categories[0])

    def term(self, probability: Probability) -> Term:
        """Return what a probability in a relation or a quantity stands for, or refuse it."""
        first = probability.events[0]
        if isinstance(first, AllClasses) or self.kind(first.name) == "class":
            return self._class_term(probability)
        if self.kind(first.name) == "item":
            return self._response_term(probability)
        raise self.unknown_event(first.name)

    def _class_term(self, probability: Probability) -> Term:
        first, conditions = probability.events[0], self.conditions(probability)
        if len(probability.events) > 1:
            msg = "a case is in one class, so two classes have no joint probability"
            remedy = "For 'one or the other' write a sum, P(a) + P(b)."
            raise Refusal(msg, probability.events[1].position, remedy)
        index = None if isinstance(first, AllClasses) else self.class_of_event(first)
        conditions.refuse_classes()
        if not conditions.answers:
            return PrevalenceTerm(index, conditions.group)
        if index is None:
            msg = "the probability of a class given answers needs one class"
            remedy = "Write P(managed | fees=yes), or call posterior.membership() for every case."
            raise Refusal(msg, probability.position, remedy)
        return MembershipTerm(index, conditions.distinct_answers(), conditions.group)

    def class_of_event(self, event: Event) -> int:
        """Return the class that stands before a bar; a class takes no answer."""
        if event.sign:
            msg = f"'{event.name.text}' is a class; a class takes no answer"
            raise Refusal(msg, event.position, f"Write P({event.name.text}).")
        return self.class_index(event.name)

    def _response_term(self, probability: Probability) -> ResponseTerm:
        answers: list[tuple[Answer, int]] = []
        for at, event in enumerate(probability.events):
            if isinstance(event, AllClasses):
                msg = "the dot stands for every class, and belongs after the bar"
                raise Refusal(msg, event.position, "Write P(fees=yes | .).")
            if at and not event.sign and self.kind(event.name) != "item":
                msg = "several answers to one item are listed in braces"
                name = probability.events[0]
                item = name.name.text if isinstance(name, Event) else ""
                remedy = f"Write P({item} in {{a, b}} | ...); a bare list is for ~ Dirichlet(...)."
                raise Refusal(msg, event.position, remedy)
            answers.append((self.answer(event), event.position))
        conditions = self.conditions(probability)
        conditions.refuse_answers()
        index = conditions.one_class(probability)
        if conditions.group == "overall":
            msg = "'overall' is for prevalences only"
            remedy = "Leave it out: a response probability without a group is of every group."
            raise Refusal(msg, probability.position, remedy)
        return ResponseTerm(_distinct(answers), index, conditions.group)


@dataclass(frozen=True, slots=True)
class Conditions:
    """What stands after the bar of a probability, each with its position."""

    classes: tuple[tuple[int | None, int], ...]
    group: GroupIndex
    answers: tuple[tuple[Answer, int], ...] = field(default=())

    def refuse_classes(self) -> None:
        """Refuse a class after the bar when one stands before it."""
        for _, position in self.classes:
            msg = "a class given a class is no probability of the model"
            remedy = "After the bar of P(managed | ...) stand a group or answers."
            raise Refusal(msg, position, remedy)

    def refuse_answers(self) -> None:
        """Refuse answers after the bar when answers stand before it."""
        for _, position in self.answers:
            msg = "given the class, answers do not depend on other answers"
            remedy = "Leave it out, or write the joint probability P(fees=yes, accounts=yes | a)."
            raise Refusal(msg, position, remedy)

    def one_class(self, probability: Probability) -> int | None:
        """Return the class after the bar; None for the dot."""
        if not self.classes:
            msg = "the class is missing: in which class does the answer have this probability?"
            remedy = "Write P(fees=yes | managed), or P(fees=yes | .) for every class."
            raise Refusal(msg, probability.position, remedy)
        if len(self.classes) > 1:
            msg = "a case is in one class, not in two"
            raise Refusal(msg, self.classes[1][1], "Write one statement for each class.")
        return self.classes[0][0]

    def distinct_answers(self) -> tuple[Answer, ...]:
        """Return the answers, each item once."""
        return _distinct(self.answers)


def _distinct(answers: Sequence[tuple[Answer, int]]) -> tuple[Answer, ...]:
    seen: set[int] = set()
    for (item, _), position in answers:
        if item in seen:
            msg = "an item appears twice"
            remedy = "Name each item once; for one of several answers write item in {a, b}."
            raise Refusal(msg, position, remedy)
        seen.add(item)
    return tuple(answer for answer, _ in answers)


def _article(kind: str) -> str:
    return f"an {kind}" if kind[0] in "aeiou" else f"a {kind}"


def _two(first: str, second: str) -> str:
    if first == second:
        return f"two {'classes' if first == 'class' else first + 's'}"
    return f"both {_article(first)} and {_article(second)}"
