"""The notation of statements: from text to a syntax tree and back.

One notation serves priors, constraints, hypotheses, quantities and naming rules. Reading knows
no names: whether ``managed`` is a class is for the vocabulary to say.
"""

from __future__ import annotations

import re
from functools import cache
from typing import Any

from bayeslca.exceptions import StatementError
from bayeslca.model.statements.statement_errors import Refusal, explain
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
    children,
)
from bayeslca.model.statements.tree_builder import TreeBuilder

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
NUMBER.2: /(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?(?!\w|\.\w)/
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

    return Lark(GRAMMAR, parser="lalr", maybe_placeholders=True, transformer=TreeBuilder())


def _refuse_deep(statement: Statement) -> None:
    """Refuse what is too deep to be worked on recursively; no real statement is."""
    waiting: list[tuple[Statement, int]] = [(statement, 0)]
    while waiting:
        node, depth = waiting.pop()
        if depth > DEEPEST:
            msg = f"this statement is nested more than {DEEPEST} levels deep"
            raise Refusal(msg, node.position, "Say it in several statements.")
        waiting.extend((child, depth + 1) for child in children(node))


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
    return quoted(name.text)


def quoted(name: str) -> str:
    """Return a name as it stands in a statement, in quotes where it needs them."""
    if _WORD.fullmatch(name) and name not in RESERVED:
        return name
    quote = '"' if "'" in name and '"' not in name else "'"
    return quote + name.replace(quote, quote * 2) + quote


def _number(value: float) -> str:
    text = repr(float(value))
    return text.removesuffix(".0")
