"""Saying in plain words what is wrong with a statement that cannot be read.

The reader knows only which sign it did not expect and what it would have taken; the habits that
bring people there (``==``, ``20%``, a decimal comma) are recognised from the text around it.
"""

from __future__ import annotations

import re
from collections.abc import Callable

EXAMPLE = "P(fees=yes | managed)"


class Refusal(Exception):
    """Why a statement is refused, before its text is put beside it.

    Attributes
    ----------
    problem, remedy : str
    position : int
    """

    def __init__(self, problem: str, position: int, remedy: str) -> None:
        super().__init__(problem)
        self.problem = problem
        self.position = position
        self.remedy = remedy


_WRONG_SIGNS = {
    "==": ("'==' is not a sign of the notation", "Write one equals sign: a = b."),
    "=>": ("'=>' is not a sign of the notation", "Write >= for 'at least'."),
    "=<": ("'=<' is not a sign of the notation", "Write <= for 'at most'."),
    "!=": ("'!=' is not a sign of the notation", "{unequal}"),
    "<>": ("'<>' is not a sign of the notation", "{unequal}"),
    "~=": ("'~=' is not a sign of the notation", "{unequal}"),
    "≠": ("'≠' is not a sign of the notation", "{unequal}"),
    "≥": ("'≥' is not a sign of the notation", "Write >= for 'at least'."),
    "≤": ("'≤' is not a sign of the notation", "Write <= for 'at most'."),
    "≈": ("'≈' is not a sign of the notation", "Write abs(a - b) < 0.1 for 'nearly equal'."),
    ">>": ("'>>' is not a sign of the notation", "Write > for 'larger than'."),
    "<<": ("'<<' is not a sign of the notation", "Write < for 'smaller than'."),
    "&&": ("'&&' is not a sign of the notation", "Join statements by the word and."),
    "&": ("'&' is not a sign of the notation", "Join statements by the word and."),
    "||": ("'||' is not a sign of the notation", "{no_or}"),
    "**": ("'**' is not a sign of the notation", "Multiply it out: a * a."),
    "^": ("'^' is not a sign of the notation", "Multiply it out: a * a."),
    "−": ("this minus sign is not the one on the keyboard", "Write a hyphen: a - b."),
    "–": ("this is a dash, not a minus sign", "Write a hyphen: a - b."),
    "—": ("this is a dash, not a minus sign", "Write a hyphen: a - b."),
    "×": ("'×' is not a sign of the notation", "Write a * b."),
    "·": ("'·' is not a sign of the notation", "Write a * b."),
    "÷": ("'÷' is not a sign of the notation", "Write a / b."),
}
_PUT_IN = {
    "{unequal}": (
        "That two probabilities differ is no statement of the notation: say which is larger "
        "(a > b), or by how much at least (abs(a - b) > 0.1)."
    ),
    "{no_or}": (
        "Statements are joined by 'and' only. Give each alternative as a hypothesis of its own "
        "and let them compete as rivals."
    ),
}
_IN_WORDS = (
    ({"PROBABILITY_OPEN", "ABS_OPEN", "NUMBER", "OPEN"}, f"a probability such as {EXAMPLE}"),
    ({"NUMBER"}, "a number"),
    ({"PROBABILITY_OPEN"}, f"a probability such as {EXAMPLE}"),
    ({"WORD", "QUOTED"}, "a name"),
    ({"DISTRIBUTION"}, "a distribution, Beta(...) or Dirichlet(...)"),
    ({"KEYWORD"}, "a keyword such as most_likely="),
    ({"SIGN", "EQUALS"}, "a comparison (>, <, >=, <= or =)"),
    ({"EQUALS"}, "'='"),
    ({"PLUS", "MINUS", "TIMES", "OVER"}, "a sign of arithmetic (+, -, * or /)"),
    ({"AND"}, "'and'"),
    ({"BAR"}, "a bar '|'"),
    ({"COMMA"}, "a comma"),
    ({"CLOSE"}, "a closing parenthesis"),
    ({"BRACE_OPEN"}, "an opening brace '{'"),
    ({"BRACE_CLOSE"}, "a closing brace '}'"),
    ({"OPEN"}, "an opening parenthesis"),
    ({"TILDE"}, "'~'"),
    ({"IN"}, "'in'"),
    ({"IS"}, "'is'"),
    ({"WHERE"}, "'where'"),
    ({"EXTREME"}, "'highest' or 'lowest'"),
    ({"PREVALENCE"}, "the word prevalence"),
    ({"$END"}, "the end of the statement"),
)


def explain(text: str, position: int, expected: set[str]) -> Refusal:
    """Return why the text cannot be read at a position.

    Parameters
    ----------
    text : str
    position : int
        Where reading stopped; ``len(text)`` when the text ended too early.
    expected : set of str
        The terminals of the grammar that could have stood there.
    """
    for recognise in _HABITS:
        refusal = recognise(text, position, expected)
        if refusal is not None:
            return refusal
    if position >= len(text):
        msg = f"the statement ends too early; expected {in_words(expected)}"
    else:
        found = re.match(r"\w+|.", text[position:], re.DOTALL)
        msg = f"found {found.group() if found else ''!r} where {in_words(expected)} was expected"
    return Refusal(msg, position, _form(text))


def in_words(expected: set[str]) -> str:
    """Say in plain words what could have stood somewhere."""
    left = set(expected) - {"ABS_OPEN"} if "PROBABILITY_OPEN" in expected else set(expected)
    words = []
    for terminals, phrase in _IN_WORDS:
        if terminals - {"ABS_OPEN"} <= left:
            words.append(phrase)
            left -= terminals
    if not words:
        return "something else"
    return words[0] if len(words) == 1 else ", ".join(words[:-1]) + " or " + words[-1]


def _form(text: str) -> str:
    """Show the right form of the kind of statement that the text seems to be."""
    if "~" in text:
        return f"A prior is written {EXAMPLE} ~ Beta(9, 2)."
    if re.search(r"\bwhere\b|^\s*\w+\s+is\b", text):
        return "A naming rule is written: managed is where P(fees=yes) is highest."
    return f"A statement is written {EXAMPLE} > P(fees=yes | lapsed)."


def _empty(text: str, position: int, expected: set[str]) -> Refusal | None:
    if text.strip():
        return None
    return Refusal("the statement is empty", 0, _form(text))


def _wrong_sign(text: str, position: int, expected: set[str]) -> Refusal | None:
    for start, length in ((position - 1, 2), (position, 2), (position, 1)):
        sign = text[max(start, 0) : start + length]
        if start >= 0 and sign in _WRONG_SIGNS:
            problem, remedy = _WRONG_SIGNS[sign]
            return Refusal(problem, start, _PUT_IN.get(remedy, remedy))
    return None


def _percent(text: str, position: int, expected: set[str]) -> Refusal | None:
    if text[position : position + 1] != "%":
        return None
    before = re.search(r"([0-9]+(?:\.[0-9]+)?)\s*$", text[:position])
    share = f"{float(before.group(1)) / 100:g}" if before else "0.2"
    return Refusal(
        "probabilities are numbers from 0 to 1, not percentages", position, f"Write {share}."
    )


def _decimal_comma(text: str, position: int, expected: set[str]) -> Refusal | None:
    for found in re.finditer(r"([0-9]+),([0-9]+)", text):
        if found.start() <= position <= found.end() and "COMMA" not in expected:
            remedy = f"Write {found.group(1)}.{found.group(2)}."
            msg = "decimals are written with a point, not a comma"
            return Refusal(msg, found.start(2) - 1, remedy)
    return None


def _word_of_logic(text: str, position: int, expected: set[str]) -> Refusal | None:
    found = re.match(r"(or|not|AND|OR|NOT)\b", text[position:])
    if found is None:
        before = re.search(r"(?<![\w.\-])(not)\s+$", text[:position], re.IGNORECASE)
        if before is None:
            return None
        found, position = before, before.start()
    word = found.group().strip()
    if word == "AND":
        return Refusal("'AND' is not a word of the notation", position, "Write and.")
    if word.lower() == "or":
        return Refusal("'or' is not a word of the notation", position, _PUT_IN["{no_or}"])
    remedy = "Turn the comparison round: write a <= b for 'not a > b'."
    return Refusal("'not' is not a word of the notation", position, remedy)


def _quote(text: str, position: int, expected: set[str]) -> Refusal | None:
    sign = text[position : position + 1]
    if sign and sign in "'\"":
        if text.count(sign, position) > 1:
            return None
        other = '"' if sign == "'" else "'"
        remedy = f"Close it; a name that holds {sign} itself stands in {other} quotes."
        return Refusal("the quote that opens here is never closed", position, remedy)
    if sign and sign in "“”„‘’‚«»`´":
        msg = f"{sign} is not a quote of the notation"
        return Refusal(msg, position, "Put names in straight quotes, ' or \".")
    return None


def _probability_sign(text: str, position: int, expected: set[str]) -> Refusal | None:
    before, sign = text[:position].rstrip(), text[position : position + 1]
    spelt = re.search(r"(?<!\w)(p|pr|prob|probability)$", before, re.IGNORECASE)
    if sign == "(" and spelt and "P(" not in text[spelt.start() : position + 1]:
        msg = f"'{spelt.group()}(' does not begin a probability"
        return Refusal(msg, spelt.start(), f"Write a capital P: {EXAMPLE}.")
    spelt = re.match(r"(p|pr|prob|probability)\s*\(", text[position:], re.IGNORECASE)
    if spelt and "PROBABILITY_OPEN" in expected:
        msg = f"'{spelt.group()}' does not begin a probability"
        return Refusal(msg, position, f"Write a capital P: {EXAMPLE}.")
    if sign and sign in "[{" and re.search(r"(?<!\w)P$", before):
        msg = f"a probability stands in round parentheses, not '{sign}'"
        return Refusal(msg, position, f"Write {EXAMPLE}.")
    return None


def _bare_event(text: str, position: int, expected: set[str]) -> Refusal | None:
    """Recognise a name where a probability was meant: ``managed > lapsed``."""
    name = re.match(r"\s*([^\W\d][\w.\-]*)", text)
    if name is not None and expected == {"IS"}:
        word = name.group(1)
        remedy = f"Write P({word}) ..., or a rule: {word} is where P(fees=yes) is highest."
        msg = "a statement begins with a probability, P(...), not with a name"
        return Refusal(msg, name.start(1), remedy)
    if "PROBABILITY_OPEN" in expected and re.match(r"[^\W\d]", text[position:]):
        name = re.match(r"\w[\w.\-]*", text[position:])
        word = name.group() if name else ""
        msg = f"'{word}' stands where a probability or a number was expected"
        return Refusal(msg, position, f"Write a probability as P({word}) or {EXAMPLE}.")
    return None


def _absolute_bars(text: str, position: int, expected: set[str]) -> Refusal | None:
    if text[position : position + 1] == "|" and "ABS_OPEN" in expected:
        msg = "the size of a difference is not written between bars"
        return Refusal(msg, position, "Write abs(a - b) < 0.1.")
    return None


def _inside_probability(text: str, position: int, expected: set[str]) -> Refusal | None:
    """Two names beside each other, or a probability that is not closed."""
    if "BAR" not in expected and "CLOSE" not in expected:
        return None
    opened = text.rfind("P(", 0, position)
    inside = text[opened:position]
    if opened < 0 or ")" in inside:
        if position >= len(text) and "CLOSE" in expected:
            msg = "a closing parenthesis is missing"
            return Refusal(msg, position, "Close every parenthesis that was opened.")
        return None
    if re.match(r"[\w'\"]", text[position:]):
        if "BAR" in expected:
            msg = "a bar '|' is missing, or a name with a space has no quotes"
            return Refusal(msg, position, f"Write {EXAMPLE}, or P('pays fees'=yes | managed).")
        msg = "a comma is missing, or a name with a space has no quotes"
        return Refusal(msg, position, "Write P(fees=yes | managed, district=north).")
    if position < len(text) and text[position] in "><=" and _closes(text[position:]):
        msg = "a comparison stands after the bar"
        remedy = "After the bar stand a class and groups: P(fees=yes | managed, district=north)."
        return Refusal(msg, position, remedy)
    if position >= len(text) or text[position] in "><=~+*/":
        msg = "the probability that begins here is not closed"
        return Refusal(msg, opened, f"Close its parenthesis: {EXAMPLE}.")
    return None


def _closes(rest: str) -> bool:
    """Tell whether a parenthesis closes before the next probability opens."""
    close, opened = rest.find(")"), rest.find("P(")
    return close >= 0 and (opened < 0 or close < opened)


def _braces(text: str, position: int, expected: set[str]) -> Refusal | None:
    if not expected & {"BRACE_OPEN", "BRACE_CLOSE"}:
        return None
    msg = f"found {text[position : position + 1]!r} where {in_words(expected)} was expected"
    return Refusal(msg, position, "Write P(trust in {agree, 'strongly agree'} | open).")


def _after_the_end(text: str, position: int, expected: set[str]) -> Refusal | None:
    if not expected & {"$END", "AND"} or position >= len(text):
        return None
    sign = text[position]
    if sign == ")":
        return Refusal("this parenthesis closes nothing", position, "Leave it out.")
    if sign in ";,.":
        msg = f"the statement is complete before '{sign}'"
        return Refusal(msg, position, "Give each statement by itself, or join them by 'and'.")
    if re.match(r"is\b", text[position:]):
        msg = "a naming rule begins with the class"
        remedy = "Write it as: managed is where P(fees=yes) is highest."
        return Refusal(msg, position, remedy)
    if sign == "~":
        msg = "'~' gives a prior to one probability, and stands alone"
        return Refusal(msg, position, f"Write {EXAMPLE} ~ Beta(9, 2) as a statement of its own.")
    if "AND" not in expected and re.match(r"and\b", text[position:]):
        msg = "a prior or a naming rule stands alone"
        return Refusal(msg, position, "Give each as a statement of its own.")
    if "$END" in expected and re.match(r"\w", sign):
        msg = "the statement is complete before this"
        return Refusal(msg, position, "Put a sign between the two, or join statements by 'and'.")
    return None


_HABITS: tuple[Callable[[str, int, set[str]], Refusal | None], ...] = (
    _empty,
    _wrong_sign,
    _percent,
    _decimal_comma,
    _word_of_logic,
    _quote,
    _probability_sign,
    _absolute_bars,
    _bare_event,
    _inside_probability,
    _braces,
    _after_the_end,
)
"""Tried in this order; the first that recognises what was meant gives the message."""
