"""The notation of statements: from text to a syntax tree and back.

One notation serves priors, constraints, hypotheses, quantities and naming rules. Reading knows
no names: whether ``managed`` is a class is for the vocabulary to say.
"""

from __future__ import annotations

import re
from functools import cache
from typing import Any, Literal

from bayeslca.exceptions import StatementError, near_names
from bayeslca.model.statement_errors import Refusal, explain
from bayeslca.model.syntax import (
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
    children,
)

GRAMMAR = r"""
start: relations | prior | naming_rule

relations: relation (AND relation)*
relation: expression ((SIGN | EQUALS) expression)*
prior: expression TILDE distribution
naming_rule: name IS WHERE (probability | PREVALENCE) IS EXTREME

?expression: product | expression (PLUS | MINUS) product -> operation
?product: signed | product (TIMES | OVER) signed -> operation
?signed: atom | MINUS signed -> negative
?atom: NUMBER -> number
    | probability
    | ABS_OPEN expression CLOSE -> absolute
    | OPEN expression CLOSE -> inside

probability: PROBABILITY_OPEN event (COMMA event)* [BAR condition (COMMA condition)*] CLOSE
event: name | name (SIGN | EQUALS) name | name IN BRACE_OPEN name (COMMA name)* BRACE_CLOSE | DOT
condition: name | name EQUALS name | DOT | OVERALL
name: WORD | QUOTED

distribution: DISTRIBUTION OPEN [argument (COMMA argument)*] CLOSE
argument: [KEYWORD EQUALS] [MINUS] NUMBER

PROBABILITY_OPEN.3: /P\s*\(/
ABS_OPEN.3: /abs\s*\(/
NUMBER.2: /(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?(?![\w.])/
AND.1: /and\b/
OVERALL.1: /overall(?![\w.\-])/
IN.1: /in\b/
IS.1: /is\b/
WHERE.1: /where\b/
PREVALENCE.1: /prevalence\b/
EXTREME.1: /(?:highest|lowest)\b/
DISTRIBUTION: /[^\W\d]\w*/
KEYWORD: /[^\W\d]\w*/
WORD: /\w[\w.\-]*/
QUOTED: /'(?:[^']|'')*'|"(?:[^"]|"")*"/
SIGN: />=|<=|>|</
EQUALS: "="
TILDE: "~"
PLUS: "+"
MINUS: "-"
TIMES: "*"
OVER: "/"
OPEN: "("
CLOSE: ")"
BRACE_OPEN: "{"
BRACE_CLOSE: "}"
COMMA: ","
BAR: "|"
DOT: "."
%ignore /\s+/
"""

DEEPEST = 100
"""Levels of nesting in one statement; more is refused."""
_WORD = re.compile(r"\w[\w.\-]*")
_PRECEDENCE = {"+": 1, "-": 1, "*": 2, "/": 2}
_BETA_FORMS = "Write Beta(9, 2), or Beta(most_likely=0.8, above=0.6, sure=0.95)."
_DIRICHLET_FORM = "Write P(managed, informal, lapsed) ~ Dirichlet(2, 2, 2)."
_ELICITED = ("most_likely", "above", "below", "sure")


def parse(text: str) -> Statement:
    """Read a statement.

    Parameters
    ----------
    text : str
        Such as ``"P(fees=yes | managed) > P(fees=yes | informal)"``.

    Returns
    -------
    Statement
        A prior, a naming rule, a relation, several joined by ``and``, or an expression.

    Raises
    ------
    StatementError
        With the place, what was expected there, and the right form.

    Examples
    --------
    >>> to_text(parse("P(fees=yes|managed)>.8"))
    'P(fees=yes | managed) > 0.8'
    """
    from lark.exceptions import UnexpectedCharacters, UnexpectedToken

    if not isinstance(text, str):
        msg = f"a statement is a text, not {type(text).__name__}"
        raise StatementError(
            msg, statement=repr(text), position=0, remedy="Write it between quotes."
        )
    try:
        statement: Statement = _parser().parse(text)
        _refuse_deep(statement)
    except Refusal as refusal:
        raise statement_error(refusal, text) from None
    except UnexpectedToken as error:
        ended = error.token.type == "$END"
        at = len(text.rstrip()) if ended else int(error.token.start_pos or 0)
        expected = set(error.accepts or error.expected)
        raise statement_error(explain(text, at, expected), text) from None
    except UnexpectedCharacters as error:
        expected, at = set(error.allowed or ()), int(error.pos_in_stream or 0)
        raise statement_error(explain(text, at, expected), text) from None
    return statement


def statement_error(refusal: Refusal, text: str) -> StatementError:
    """Return the error for a statement; line breaks are shown as spaces to keep the caret true."""
    return StatementError(
        refusal.problem,
        statement=re.sub(r"\s", " ", text),
        position=refusal.position,
        remedy=refusal.remedy,
    )


@cache
def _parser() -> Any:
    """Build the parser when the first statement is read."""
    from lark import Lark

    return Lark(GRAMMAR, parser="lalr", maybe_placeholders=True, transformer=_Builder())


def _refuse_deep(statement: Statement) -> None:
    """Refuse what is too deep to be worked on recursively; no real statement is."""
    waiting: list[tuple[Statement, int]] = [(statement, 0)]
    while waiting:
        node, depth = waiting.pop()
        if depth > DEEPEST:
            msg = f"this statement is nested more than {DEEPEST} levels deep"
            raise Refusal(msg, node.position, "Say it in several statements.")
        waiting.extend((child, depth + 1) for child in children(node))


class _Builder:
    """What the parser calls for each rule of the grammar, with the rule's parts."""

    def start(self, parts: list[Any]) -> Statement:
        out: Statement = parts[0]
        return out

    def relations(self, parts: list[Any]) -> Statement:
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
        if len(parts) == 1:
            only: Expression = parts[0]
            return only
        signs = tuple(str(sign) for sign in parts[1::2])
        return Relation(tuple(parts[::2]), signs, parts[0].position)  # type: ignore[arg-type]

    def prior(self, parts: list[Any]) -> Prior:
        probability, _, distribution = parts
        if not isinstance(probability, Probability):
            msg = "a prior stands on one probability"
            remedy = "Write it as P(fees=yes | managed) ~ Beta(9, 2)."
            raise Refusal(msg, probability.position, remedy)
        return Prior(probability, distribution, probability.position)

    def naming_rule(self, parts: list[Any]) -> NamingRule:
        name, probability, extreme = parts[0], parts[3], str(parts[5])
        subject = probability if isinstance(probability, Probability) else None
        return NamingRule(name, subject, extreme, name.position)  # type: ignore[arg-type]

    def operation(self, parts: list[Any]) -> BinaryOperation:
        left, sign, right = parts
        return BinaryOperation(str(sign), left, right, sign.start_pos)  # type: ignore[arg-type]

    def negative(self, parts: list[Any]) -> Negative:
        return Negative(parts[1], parts[0].start_pos)

    def absolute(self, parts: list[Any]) -> Absolute:
        return Absolute(parts[1], parts[0].start_pos)

    def inside(self, parts: list[Any]) -> Expression:
        out: Expression = parts[1]
        return out

    def number(self, parts: list[Any]) -> Number:
        return Number(_finite(parts[0]), parts[0].start_pos)

    def probability(self, parts: list[Any]) -> Probability:
        kept = [part for part in parts[1:-1] if part is not None]
        bar = next((i for i, part in enumerate(kept) if _type(part) == "BAR"), len(kept))
        before, given = kept[:bar:2], kept[bar + 1 :: 2]
        return Probability(tuple(before), tuple(given), parts[0].start_pos)

    def event(self, parts: list[Any]) -> Event | AllClasses:
        if _type(parts[0]) == "DOT":
            return AllClasses(parts[0].start_pos)
        sign = str(parts[1]) if len(parts) > 1 else ""
        names = tuple(part for part in parts[1:] if isinstance(part, Name))
        return Event(parts[0], sign, names)  # type: ignore[arg-type]

    def condition(self, parts: list[Any]) -> Event | AllClasses | Overall:
        if _type(parts[0]) == "OVERALL":
            return Overall(parts[0].start_pos)
        return self.event(parts)

    def name(self, parts: list[Any]) -> Name:
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
        keyword, _, minus, number = parts
        first = next(part for part in parts if part is not None)
        value = _finite(number)
        return str(keyword or ""), -value if minus else value, first.start_pos

    def distribution(self, parts: list[Any]) -> Distribution:
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
            msg = f"the numbers in {distribution} must be larger than 0; found {_number(value)}"
            remedy = "1 is flat; 0.5 and 0.5 is Jeffreys' prior; larger numbers say more."
            raise Refusal(msg, at, remedy)
    return tuple(value for _, value, _ in arguments)


def to_text(statement: Statement) -> str:
    """Write a statement; ``parse`` reads it back to an equal tree."""
    match statement:
        case Prior(probability, distribution):
            return f"{to_text(probability)} ~ {_distribution(distribution)}"
        case NamingRule(name, probability, extreme):
            subject = "prevalence" if probability is None else to_text(probability)
            first = _name(name)
            if first[0].isdigit():  # at the beginning of a statement digits are a number
                first = f"'{first}'"
            return f"{first} is where {subject} is {extreme}"
        case Conjunction(parts):
            return " and ".join(to_text(part) for part in parts)
        case Relation(terms, signs):
            rest = (f" {s} {to_text(t)}" for s, t in zip(signs, terms[1:], strict=True))
            return to_text(terms[0]) + "".join(rest)
        case Number(value):
            return _number(value)
        case Negative(operand):
            return "-" + _within(operand, 3)
        case Absolute(operand):
            return f"abs({to_text(operand)})"
        case BinaryOperation(sign, left, right):
            level = _PRECEDENCE[sign]
            return f"{_within(left, level)} {sign} {_within(right, level + 1)}"
        case Probability(events, given):
            before = ", ".join(_event(event) for event in events)
            after = ", ".join(_event(event) for event in given)
            return f"P({before} | {after})" if given else f"P({before})"


def _within(expression: Expression, level: int) -> str:
    """Write a part, in parentheses when it binds less tightly than what it stands in."""
    text = to_text(expression)
    own = 4
    if isinstance(expression, BinaryOperation):
        own = _PRECEDENCE[expression.sign]
    elif isinstance(expression, Negative):
        own = 3
    return f"({text})" if own < level else text


def _event(event: Event | AllClasses | Overall) -> str:
    if isinstance(event, AllClasses):
        return "."
    if isinstance(event, Overall):
        return "overall"
    name, categories = _name(event.name), [_name(category) for category in event.categories]
    if event.sign == "in":
        return f"{name} in {{{', '.join(categories)}}}"
    return f"{name}{event.sign}{categories[0]}" if event.sign else name


def _distribution(distribution: Distribution) -> str:
    match distribution:
        case Beta(a, b):
            return f"Beta({_number(a)}, {_number(b)})"
        case ElicitedBeta(most_likely, side, bound, sure):
            return (
                f"Beta(most_likely={_number(most_likely)}, {side}={_number(bound)}, "
                f"sure={_number(sure)})"
            )
        case Dirichlet(concentration):
            return f"Dirichlet({', '.join(_number(a) for a in concentration)})"


def _name(name: Name) -> str:
    if _WORD.fullmatch(name.text) and name.text not in RESERVED:
        return name.text
    quote = '"' if "'" in name.text and '"' not in name.text else "'"
    return quote + name.text.replace(quote, quote * 2) + quote


def _number(value: float) -> str:
    text = repr(float(value))
    return text.removesuffix(".0")
