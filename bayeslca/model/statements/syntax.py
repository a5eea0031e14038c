"""The syntax tree of a statement: what was written, before any name is looked up.

Positions (zero-based columns of the text) are for error messages only: two trees are equal when
they say the same, wherever it stands.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

Comparison = Literal[">", "<", ">=", "<=", "="]
ArithmeticSign = Literal["+", "-", "*", "/"]
EventSign = Literal["", "=", ">", "<", ">=", "<=", "in"]
Extreme = Literal["highest", "lowest"]

RESERVED = frozenset({"and", "in", "is", "not", "or", "overall", "where"})
"""Words of the notation; as names of classes, items or categories they stand in quotes."""


def _position() -> int:
    return field(default=0, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Name:
    """A name as written, without its quotes."""

    text: str
    position: int = _position()


@dataclass(frozen=True, slots=True)
class AllClasses:
    """The dot: every class, each on its own."""

    position: int = _position()


@dataclass(frozen=True, slots=True)
class Overall:
    """The word ``overall``: groups weighted by their sizes."""

    position: int = _position()


@dataclass(frozen=True, slots=True)
class Event:
    """A name, or a name with a sign and categories.

    Attributes
    ----------
    name : Name
        A class, an item, a group column, or (after ``item=a``) one more category.
    sign : str
        ``""`` when the name stands alone.
    categories : tuple of Name
        None for ``""``, one for the comparisons, one or more for ``in``.
    """

    name: Name
    sign: EventSign = ""
    categories: tuple[Name, ...] = ()

    @property
    def position(self) -> int:
        """Where the event begins."""
        return self.name.position


@dataclass(frozen=True, slots=True)
class Probability:
    """``P(events | given)``.

    Attributes
    ----------
    events : tuple of Event or AllClasses
        What stands before the bar, at least one.
    given : tuple of Event, AllClasses or Overall
        What stands after the bar; empty without a bar.
    """

    events: tuple[Event | AllClasses, ...]
    given: tuple[Event | AllClasses | Overall, ...] = ()
    position: int = _position()


@dataclass(frozen=True, slots=True)
class Number:
    """A number, 0 or more."""

    value: float
    position: int = _position()


@dataclass(frozen=True, slots=True)
class Negative:
    """Minus an expression."""

    operand: Expression
    position: int = _position()


@dataclass(frozen=True, slots=True)
class Absolute:
    """``abs(expression)``."""

    operand: Expression
    position: int = _position()


@dataclass(frozen=True, slots=True)
class BinaryOperation:
    """A sum, difference, product or ratio; ``position`` is that of the sign."""

    sign: ArithmeticSign
    left: Expression
    right: Expression
    position: int = _position()


Expression: TypeAlias = "Number | Probability | Negative | Absolute | BinaryOperation"


@dataclass(frozen=True, slots=True)
class Relation:
    """A chain of comparisons, all of which are meant: ``a > b >= c``.

    Attributes
    ----------
    terms : tuple of Expression
        At least two.
    signs : tuple of str
        The sign between each two neighbouring terms.
    """

    terms: tuple[Expression, ...]
    signs: tuple[Comparison, ...]
    position: int = _position()

    def links(self) -> Iterator[tuple[Expression, Comparison, Expression]]:
        """Yield the chain's comparisons one by one."""
        yield from zip(self.terms[:-1], self.signs, self.terms[1:], strict=True)


@dataclass(frozen=True, slots=True)
class Conjunction:
    """Two or more relations joined by ``and``."""

    parts: tuple[Relation, ...]
    position: int = _position()


@dataclass(frozen=True, slots=True)
class Beta:
    """``Beta(a, b)``."""

    a: float
    b: float
    position: int = _position()


@dataclass(frozen=True, slots=True)
class ElicitedBeta:
    """``Beta(most_likely=0.8, above=0.6, sure=0.95)``, or ``below`` in the place of ``above``."""

    most_likely: float
    side: Literal["above", "below"]
    bound: float
    sure: float
    position: int = _position()


@dataclass(frozen=True, slots=True)
class Dirichlet:
    """``Dirichlet(a, b, ...)``."""

    concentration: tuple[float, ...]
    position: int = _position()


Distribution: TypeAlias = "Beta | ElicitedBeta | Dirichlet"


@dataclass(frozen=True, slots=True)
class Prior:
    """``P(...) ~ distribution``."""

    probability: Probability
    distribution: Distribution
    position: int = _position()


@dataclass(frozen=True, slots=True)
class NamingRule:
    """``managed is where P(fees=yes) is highest``.

    Attributes
    ----------
    latent_class : Name
        The class that gets its name by the rule.
    probability : Probability or None
        What is compared between classes; None for the prevalence.
    extreme : {"highest", "lowest"}
    """

    latent_class: Name
    probability: Probability | None
    extreme: Extreme
    position: int = _position()


Statement: TypeAlias = "Prior | NamingRule | Relation | Conjunction | Expression"


def children(node: Statement) -> tuple[Expression, ...]:
    """Return the expressions that a statement or an expression is made of."""
    match node:
        case Negative(operand) | Absolute(operand):
            return (operand,)
        case BinaryOperation(_, left, right):
            return (left, right)
        case Relation(terms):
            return terms
        case Conjunction(parts):
            return tuple(term for part in parts for term in part.terms)
        case Prior(probability):
            return (probability,)
        case NamingRule(_, probability):
            return () if probability is None else (probability,)
        case Number() | Probability():
            return ()


def probabilities(statement: Statement) -> Iterator[Probability]:
    """Yield every ``P(...)`` of a statement, from left to right."""
    waiting: list[Statement] = [statement]
    while waiting:
        node = waiting.pop()
        if isinstance(node, Probability):
            yield node
        waiting.extend(reversed(children(node)))
