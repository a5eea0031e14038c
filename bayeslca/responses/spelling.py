"""How values are spelled: one text for one value, and texts that differ only in spelling."""

from __future__ import annotations

import json
import math
import re
import unicodedata
from collections.abc import Iterable, Mapping
from typing import Any

from bayeslca.exceptions import ResponsesError

_NUMBER = re.compile(r"[+-]?(\d+([.,]\d*)?|[.,]\d+)([eE][+-]?\d+)?")
_WHOLE_WITH_POINT = re.compile(r"[+-]?\d+\.0{0,2}")
# Three noughts may be thousands: "1.000" stays as it is written.


def as_text(value: Any) -> str | None:
    """Return the one text of a cell's value; None when the cell is empty.

    A whole number reads the same from every type: 1, 1.0 and Decimal("1.00") are all "1".

    Examples
    --------
    >>> as_text(1.0), as_text(True), as_text("1.0"), as_text(float("nan"))
    ('1', 'True', '1.0', None)
    """
    import datetime
    import decimal
    import numbers

    if isinstance(value, str):
        return value if value.strip() else None
    if value is None or type(value).__name__ in ("NAType", "NaTType"):
        return None
    if isinstance(value, bool) or type(value).__name__ in ("bool", "bool_"):
        return str(bool(value))
    if isinstance(value, numbers.Integral):
        return str(int(value))
    if isinstance(value, (numbers.Real, decimal.Decimal)):
        return _number_text(value)
    if isinstance(value, datetime.datetime):
        midnight = value.time() == datetime.time(0) and value.tzinfo is None
        return value.date().isoformat() if midnight else value.isoformat(sep=" ")
    if isinstance(value, (datetime.date, datetime.time, datetime.timedelta)):
        return str(value)
    if isinstance(value, bytes):
        return _bytes_text(value)
    msg = (
        f"found a value of type {type(value).__name__} in a cell; a cell holds a text, a number, "
        "a truth value or a date. Turn it into one of these first."
    )
    raise ResponsesError(msg)


def _number_text(value: Any) -> str | None:
    if math.isnan(value):
        return None
    try:
        if value == int(value):
            return str(int(value))
    except OverflowError:  # infinite
        pass
    text = str(value)
    if "." in text and "e" not in text.lower():
        text = text.rstrip("0")
    return text


def _bytes_text(value: bytes) -> str | None:
    try:
        text = value.decode("utf-8")
    except UnicodeDecodeError:
        msg = f"found bytes that are not UTF-8 text ({value[:12]!r}); turn the column into text."
        raise ResponsesError(msg) from None
    return text if text.strip() else None


def number_of(text: str) -> float | None:
    """Return the number that a text writes, with a decimal point or comma; None for other text."""
    text = text.strip()
    if not _NUMBER.fullmatch(text):
        return None
    return float(text.replace(",", "."))


def whole_numbers_without_point(values: Iterable[str]) -> dict[str, str]:
    """Return ``{"1.0": "1"}`` for whole numbers that a column writes with a point.

    A column of numbers with empty cells is often saved as 0.0 and 1.0. The point goes where the
    number has one spelling in the column; two spellings ("1" and "1.0") stay as they are, and are
    asked about.
    """
    values = list(values)
    pointed = [value for value in values if _WHOLE_WITH_POINT.fullmatch(value)]
    if not pointed:
        return {}
    spellings: dict[float, int] = {}
    for value in values:
        number = number_of(value)
        if number is not None:
            spellings[number] = spellings.get(number, 0) + 1
    plain = {value: str(int(value.split(".")[0])) for value in pointed}
    return {value: text for value, text in plain.items() if spellings[float(value)] == 1}


def folded(text: str) -> str:
    """Return a text without case, accents, spaces and number format.

    Examples
    --------
    >>> folded("  Sí ") == folded("si"), folded("01") == folded("1,0")
    (True, True)
    """
    decomposed = unicodedata.normalize("NFKD", text)
    bare = "".join(letter for letter in decomposed if not unicodedata.combining(letter))
    bare = "".join(bare.casefold().split())
    number = number_of(bare)
    if number is None or number in (float("inf"), float("-inf")):
        return bare or "".join(text.split())
    return as_text(number + 0.0) or bare  # + 0.0: minus nought is nought


def spelling_variants(names: Iterable[str]) -> list[tuple[str, ...]]:
    """Return the sets of names that differ only in case, spaces, accents or number format."""
    together: dict[str, list[str]] = {}
    for name in names:
        together.setdefault(folded(name), []).append(name)
    return [tuple(same) for same in together.values() if len(same) > 1]


def cleanest(same: Iterable[str], counts: Mapping[str, int]) -> str:
    """Return the spelling to keep: without odd spaces, in small letters, then the commonest.

    Small letters go before frequency so that all items of a file end up with the same words.
    """
    return max(
        same, key=lambda name: (name == " ".join(name.split()), name.islower(), counts[name])
    )


def merge_remedy(kept: str, others: Iterable[str]) -> str:
    """Return the ``merge`` that makes one answer of several, as a study file writes it."""
    return f"merge = {{ {_quoted(kept)} = [{', '.join(map(_quoted, others))}] }}"


def _quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)


def find_value(wanted: str, values: Mapping[str, str]) -> list[str]:
    """Return the values that ``wanted`` means: by code, by label, or as the same number.

    Parameters
    ----------
    wanted : str
        What the analyst wrote.
    values : mapping of str to str
        Name (value label, or the code itself) of each code.
    """
    exact = [code for code, name in values.items() if wanted in (code, name)]
    if exact:
        return exact
    plain = whole_numbers_without_point([wanted]).get(wanted)
    return [plain] if plain is not None and plain in values else []
