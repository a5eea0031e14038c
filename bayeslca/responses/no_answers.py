"""Values that look like 'no answer' without having been declared so."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable

from bayeslca.responses.spelling import number_of

_PHRASES = (
    # the usual words of codebooks (common practice, no source)
    r"do(es)? ?n[o']? ?t know|dont know|didn'?t know|dk|d k|dnk|dk na|dk refused|dk nr",
    r"refused( to (answer|say))?|refuses|refusal|declined( to (answer|say))?",
    r"prefer(s|red)? not to (answer|say|respond)|would rather not say",
    r"no answer|no response|no reply|non ?response|not answered|not recorded|unanswered",
    r"not applicable|inapplicable|does not apply|n a|na|n\.a\.|n app|inap|iap|nap",
    r"not available|no data|no information|no info|missing|missing value|sysmiss|system missing",
    r"unknown|not known|not stated|not ascertained|not asked|not sure|unsure|skipped|skip",
    # laboratories: not done, not determined ("n.d."; "nd" alone may be an abbreviation of a name)
    r"not done|not tested|not determined|n d",
    r"null|nan|nil response|undefined|value|div 0|ref|name",
    # the same in some other languages
    r"weiss nicht|weiß nicht|keine angabe|k a|keine antwort|trifft nicht zu",
    r"ne sait pas|nsp|sans reponse|pas de reponse|refus|non concerne",
    r"no sabe|no responde|ns nr|ns nc|no aplica|no contesta|nao sabe|nao se aplica|nao respondeu",
)
_WHOLE = re.compile("|".join(f"(?:{phrase})" for phrase in _PHRASES))
_WITHIN = re.compile(
    r"\b(do(es)? ?n[o']? ?t know|dont know|refused to|prefer not to|no answer|no response|"
    r"not applicable|not answered)\b"
)
_SIGNS = {".", "..", "...", "?", "??", "???", "-", "--", "*", "**", "/", "#", "_", "–", "—"}
_SPREADSHEET_ERRORS = {"#n/a", "#value!", "#div/0!", "#ref!", "#name?", "#null!", "#num!"}
_TAGGED = re.compile(r"\.[a-z]")
_SMALL = (7, 8, 9)
_LARGE = (77, 88, 97, 98, 99, 777, 888, 997, 998, 999, 7777, 8888, 9997, 9998, 9999)
_NEGATIVE = (-1, -2, -3, -4, -5, -6, -7, -8, -9, -77, -88, -97, -98, -99, -777, -888)
_NEGATIVE_LONG = (-997, -998, -999, -9997, -9998, -9999)
_SMALL_GAP = 3
_LARGE_GAP = 10


def says_no_answer(text: str) -> bool:
    """Tell whether a text is one of the usual words or signs for 'no answer'.

    Examples
    --------
    >>> says_no_answer("Don't know"), says_no_answer("N/A"), says_no_answer("none")
    (True, True, False)
    """
    bare = text.strip()
    if bare in _SIGNS or bare.casefold() in _SPREADSHEET_ERRORS or _TAGGED.fullmatch(bare.lower()):
        return True
    letters = unicodedata.normalize("NFKD", bare.replace("’", "'").casefold())
    letters = "".join(sign for sign in letters if not unicodedata.combining(sign))
    words = " ".join(re.sub(r"[^\w']+", " ", letters).split())
    without_code = re.sub(r"^-?\d+ ", "", words)  # "99 - refused"
    return bool(_WHOLE.fullmatch(without_code) or _WITHIN.search(words))


def codes_for_no_answer(values: Iterable[str]) -> tuple[str, ...]:
    """Return the number codes that codebooks keep for 'no answer' and that stand apart.

    A code such as 9, 99 or -1 is only suspicious when it lies outside the others: 9 beside 1 and
    2 is (a gap of 3 or more), 9 on a scale from 0 to 10 is not; two-digit codes and longer need a
    gap of 10; negative codes need all others to be nought or more.

    Examples
    --------
    >>> codes_for_no_answer(["1", "2", "9"]), codes_for_no_answer(["7", "8", "9", "10"])
    (('9',), ())
    >>> codes_for_no_answer(["no", "yes", "99"])
    ('99',)
    """
    values = list(values)
    numbers = {value: number for value in values if (number := number_of(value)) is not None}
    candidates = {*_SMALL, *_LARGE, *_NEGATIVE, *_NEGATIVE_LONG}
    rest = [number for number in numbers.values() if number not in candidates]
    words = [value for value in values if value not in numbers]
    if not rest and words:
        # Codes for 'no answer' among words; "1 to 6", "7", "8" are no such words.
        return () if any(re.search(r"\d", word) for word in words) else tuple(numbers)
    if not rest:
        rest = [min((n for n in numbers.values() if n >= 0), default=0.0)]
        rest = [] if rest[0] in (*_SMALL, *_LARGE) else rest
    if not rest:
        return ()
    top, bottom = max(rest), min(rest)
    # Codes next to the scale carry on the scale: 6, 7 after 1 to 5.
    for number in sorted(n for n in numbers.values() if n in _SMALL):
        if number - top < _SMALL_GAP:
            top = max(top, number)
    found = []
    for value, number in numbers.items():
        if number in _SMALL and number - top >= _SMALL_GAP:
            found.append(value)
        elif number in _LARGE and number - top >= _LARGE_GAP:
            found.append(value)
        elif number in (*_NEGATIVE, *_NEGATIVE_LONG) and bottom >= 0:
            found.append(value)
    return tuple(found)


def undeclared_no_answers(names: dict[str, str]) -> tuple[str, ...]:
    """Return the names of answers that look like 'no answer'.

    Parameters
    ----------
    names : dict of str to str
        The name of each code; a code without a label is its own name.
    """
    by_text = {name for name in names.values() if says_no_answer(name)}
    # A label says what its code means; a code without one is judged beside all others.
    by_code = {code for code in codes_for_no_answer(names) if names[code] == code}
    return tuple(dict.fromkeys(n for n in names.values() if n in by_text or n in by_code))
