"""From the grammar's rules to the syntax tree; what the grammar lets through is refused here."""

from __future__ import annotations

from typing import Any, Literal

from bayeslca.exceptions import near_names
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.syntax import (
    RESERVED,
    Absolute,
    AllClasses,
    Beta,
    BinaryOperation,
    Conjunction,
    Dirichlet,
    Distribution,
    ElicitedBeta,
    Event,
    Expression,
    Name,
    NamingRule,
    Negative,
    Number,
    Overall,
    Prior,
    Probability,
    Relation,
    Statement,
)

_BETA_FORMS = "Write Beta(9, 2), or Beta(most_likely=0.8, above=0.6, sure=0.95)."
_DIRICHLET_FORM = "Write P(managed, informal, lapsed) ~ Dirichlet(2, 2, 2)."
_ELICITED = ("most_likely", "above", "below", "sure")


class TreeBuilder:
    """What the parser calls for each rule of the grammar, with the rule's parts."""

    def start(self, parts: list[Any]) -> Statement:
        """Return the statement."""
        out: Statement = parts[0]
        return out

    def relations(self, parts: list[Any]) -> Statement:
        """Join relations; one part alone is itself."""
        relations = parts[::2]
        if len(relations) == 1:
            only: Statement = relations[0]
            return only
        for part in relations:
            if not isinstance(part, Relation):
                msg = "a part of this statement compares nothing"
                remedy = (
                    "Each part joined by 'and' needs a comparison, as in "
                    "P(fees=yes | managed) > 0.5 and P(managed) > P(lapsed)."
                )
                raise Refusal(msg, part.position, remedy)
        return Conjunction(tuple(relations), relations[0].position)

    def relation(self, parts: list[Any]) -> Relation | Expression:
        """Build a chain; an expression that is compared with nothing is itself."""
        if len(parts) == 1:
            only: Expression = parts[0]
            return only
        signs = tuple(str(sign) for sign in parts[1::2])
        return Relation(tuple(parts[::2]), signs, parts[0].position)  # type: ignore[arg-type]

    def prior(self, parts: list[Any]) -> Prior:
        """Build a prior on one probability."""
        probability, _, distribution = parts
        if not isinstance(probability, Probability):
            msg = "a prior stands on one probability"
            remedy = "Write it as P(fees=yes | managed) ~ Beta(9, 2)."
            raise Refusal(msg, probability.position, remedy)
        return Prior(probability, distribution, probability.position)

    def naming_rule(self, parts: list[Any]) -> NamingRule:
        """Build a naming rule."""
        name, probability, extreme = parts[0], parts[3], str(parts[5])
        subject = probability if isinstance(probability, Probability) else None
        return NamingRule(name, subject, extreme, name.position)  # type: ignore[arg-type]

    def operation(self, parts: list[Any]) -> BinaryOperation:
        """Build a sum, difference, product or ratio."""
        left, sign, right = parts
        return BinaryOperation(str(sign), left, right, sign.start_pos)  # type: ignore[arg-type]

    def negative(self, parts: list[Any]) -> Negative:
        """Build minus an expression."""
        return Negative(parts[1], parts[0].start_pos)

    def absolute(self, parts: list[Any]) -> Absolute:
        """Build the size of an expression."""
        return Absolute(parts[1], parts[0].start_pos)

    def inside(self, parts: list[Any]) -> Expression:
        """Return what stands in parentheses."""
        out: Expression = parts[1]
        return out

    def number(self, parts: list[Any]) -> Number:
        """Build a number."""
        return Number(_finite(parts[0]), parts[0].start_pos)

    def probability(self, parts: list[Any]) -> Probability:
        """Build P(...), split at its bar."""
        kept = [part for part in parts[1:-1] if part is not None]
        bar = next((i for i, part in enumerate(kept) if _type(part) == "BAR"), len(kept))
        before, given = kept[:bar:2], kept[bar + 1 :: 2]
        return Probability(tuple(before), tuple(given), parts[0].start_pos)

    def event(self, parts: list[Any]) -> Event | AllClasses:
        """Build what stands before a bar."""
        if _type(parts[0]) == "DOT":
            return AllClasses(parts[0].start_pos)
        sign = str(parts[1]) if len(parts) > 1 else ""
        names = tuple(part for part in parts[1:] if isinstance(part, Name))
        return Event(parts[0], sign, names)  # type: ignore[arg-type]

    def condition(self, parts: list[Any]) -> Event | AllClasses | Overall:
        """Build what stands after a bar."""
        if _type(parts[0]) == "OVERALL":
            return Overall(parts[0].start_pos)
        return self.event(parts)

    def name(self, parts: list[Any]) -> Name:
        """Build a name without its quotes."""
        token = parts[0]
        if token.type == "WORD":
            if token in RESERVED:
                msg = f"'{token}' is a word of the notation"
                remedy = f"If it is a name here, put it in quotes: '{token}'."
                raise Refusal(msg, token.start_pos, remedy)
            return Name(str(token), token.start_pos)
        if len(token) == 2:
            msg = "a name is missing between these quotes"
            raise Refusal(msg, token.start_pos, "Write the name of a class, an item or an answer.")
        quote = token[0]
        return Name(str(token[1:-1]).replace(quote * 2, quote), token.start_pos)

    def argument(self, parts: list[Any]) -> tuple[str, float, int]:
        """Return the keyword (or ""), the value and the position of an argument."""
        keyword, _, minus, number = parts
        first = next(part for part in parts if part is not None)
        value = _finite(number)
        return str(keyword or ""), -value if minus else value, first.start_pos

    def distribution(self, parts: list[Any]) -> Distribution:
        """Build a distribution from its name and arguments."""
        name = parts[0]
        arguments = [part for part in parts if isinstance(part, tuple)]
        builders = {"Beta": _beta, "Dirichlet": _dirichlet}
        if name not in builders:
            msg = f"there is no distribution '{name}'{near_names(str(name), builders)}"
            remedy = "Write ~ Beta(9, 2) for one probability, ~ Dirichlet(2, 2, 2) for several."
            raise Refusal(msg, name.start_pos, remedy)
        return builders[name](arguments, name.start_pos)


_Argument = tuple[str, float, int]
"""Keyword or "", value, position."""


def _type(part: Any) -> str:
    """Return the terminal's name of a token, "" for anything else."""
    return str(getattr(part, "type", ""))


def _finite(token: Any) -> float:
    value = float(token)
    if value == float("inf"):
        msg = "this number is too large"
        raise Refusal(msg, token.start_pos, "Write a finite number.")
    return value


def _beta(arguments: list[_Argument], position: int) -> Distribution:
    if any(keyword for keyword, _, _ in arguments):
        return _elicited(arguments, position)
    if len(arguments) != 2:
        msg = f"Beta takes two numbers, not {len(arguments)}"
        remedy = f"{_BETA_FORMS} Decimals have a point: 0.5." if len(arguments) > 2 else _BETA_FORMS
        raise Refusal(msg, position, remedy)
    a, b = _positive(arguments, "Beta")
    return Beta(a, b, position)


def _elicited(arguments: list[_Argument], position: int) -> ElicitedBeta:
    given: dict[str, float] = {}
    for keyword, value, at in arguments:
        if not keyword:
            msg = "Beta takes either two numbers or keywords, not both"
            raise Refusal(msg, at, _BETA_FORMS)
        if keyword not in _ELICITED:
            msg = f"Beta has no keyword '{keyword}'{near_names(keyword, _ELICITED)}"
            raise Refusal(msg, at, _BETA_FORMS)
        if keyword in given:
            msg = f"'{keyword}' is given twice"
            raise Refusal(msg, at, "Give each keyword once.")
        given[keyword] = value
    if len(given) != 3 or not {"most_likely", "sure"} <= set(given):
        msg = "Beta needs most_likely, one bound (above or below), and sure"
        raise Refusal(msg, position, _BETA_FORMS)
    side: Literal["above", "below"] = "above" if "above" in given else "below"
    return ElicitedBeta(given["most_likely"], side, given[side], given["sure"], position)


def _dirichlet(arguments: list[_Argument], position: int) -> Dirichlet:
    for keyword, _, at in arguments:
        if keyword:
            msg = f"Dirichlet has no keyword '{keyword}'"
            raise Refusal(msg, at, _DIRICHLET_FORM)
    if not arguments:
        msg = "Dirichlet needs a number for each name"
        raise Refusal(msg, position, _DIRICHLET_FORM)
    return Dirichlet(_positive(arguments, "Dirichlet"), position)


def _positive(arguments: list[_Argument], distribution: str) -> tuple[float, ...]:
    for _, value, at in arguments:
        if value <= 0:
            msg = f"the numbers in {distribution} must be larger than 0; found {value:g}"
            remedy = "1 is flat; 0.5 and 0.5 is Jeffreys' prior; larger numbers say more."
            raise Refusal(msg, at, remedy)
    return tuple(value for _, value, _ in arguments)
