"""How numbers are put into words: one place for percentages, intervals, counts and lists."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

NOTHING = "–"
"""What stands where there is no number."""

LEAST_SHOWN = 1e-8
"""A number nearer to 0 is shown as 0."""
_SMALL = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")


def whole(number: float) -> str:
    """Return a whole number with separators: ``1,200``."""
    return f"{round(number):,}"


def decimal(number: float, places: int = 1) -> str:
    """Return a number with a fixed number of places and a true minus sign."""
    if not math.isfinite(number):
        return NOTHING
    text = f"{number:,.{places}f}"
    if text.startswith("-"):
        is_zero = not text.strip("-0.,")
        return text[1:] if is_zero else "−" + text[1:]
    return text


def significant(number: float, digits: int = 2) -> str:
    """Return a number with so many significant digits, without an exponent where it can be."""
    if not math.isfinite(number):
        return NOTHING
    if abs(number) < LEAST_SHOWN:
        return "0"
    places = max(0, digits - 1 - math.floor(math.log10(abs(number))))
    return decimal(number, min(places, 8))


def percent_value(share: float) -> str:
    """Return a share as a percentage without its sign: ``41``, ``0.4``, ``99.6``."""
    if not math.isfinite(share):
        return NOTHING
    value = 100 * share
    if 0 < value < 0.05:
        return "below 0.1"
    if 99.95 < value < 100:
        return "above 99.9"
    if 0 < value < 0.95 or 99.05 < value < 100:
        return f"{value:.1f}"
    return f"{value:.0f}"


def percent(share: float) -> str:
    """Return a share as a percentage: ``41 %``."""
    return NOTHING if not math.isfinite(share) else f"{percent_value(share)} %"


def chance(probability: float) -> str:
    """Return a probability found from draws: never 0 or 100 %, which no number of draws shows."""
    return percent(min(max(probability, 1e-9), 1.0 - 1e-9))


def percent_interval(median: float, lower: float, upper: float) -> str:
    """Return a share with its interval: ``41 % (30 to 52)``."""
    if not math.isfinite(median):
        return NOTHING
    return f"{percent(median)} ({percent_bound(lower)} to {percent_bound(upper)})"


def percent_bound(share: float) -> str:
    """Return an interval's end as a percentage without its sign, 0 and 100 when it is as near."""
    value = percent_value(share)
    return {"below 0.1": "0", "above 99.9": "100"}.get(value, value)


def number_interval(median: float, lower: float, upper: float, places: int = 2) -> str:
    """Return a number with its interval: ``0.83 (0.75 to 0.90)``."""
    if not math.isfinite(median):
        return NOTHING
    return f"{decimal(median, places)} ({decimal(lower, places)} to {decimal(upper, places)})"


def about_of(share: float, total: int) -> str:
    """Return a share as cases: ``about 48 of 118``."""
    return f"about {whole(share * total)} of {whole(total)}"


def counted(number: int, one: str, many: str = "") -> str:
    """Return a count with its noun: ``1 case``, ``118 cases``."""
    return f"{whole(number)} {one if number == 1 else many or one + 's'}"


def in_words(number: int) -> str:
    """Return a small count as a word, a larger one in digits."""
    return _SMALL[number] if 0 < number < len(_SMALL) else whole(number)


def counted_in_words(number: int, one: str, many: str = "") -> str:
    """Return a count with its noun, the count as a word where it is small: ``three classes``."""
    return f"{in_words(number)} {one if number == 1 else many or one + 's'}"


def listed(parts: Iterable[str], *, last: str = "and") -> str:
    """Return a list as text: ``a, b and c``."""
    names = list(parts)
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} {last} {names[-1]}"


def listed_up_to(parts: Sequence[str], most: int) -> str:
    """Return a list as text that stops after ``most`` parts and counts the others."""
    if len(parts) <= most:
        return listed(parts)
    return listed([*parts[:most], f"{whole(len(parts) - most)} more"])


def called(latent_class: str) -> str:
    """Return how a class is called in a sentence: ``managed``, but ``class 1``."""
    return f"class {latent_class}" if latent_class.isdigit() else latent_class


def sentence(text: str) -> str:
    """Return text with a capital at its start and a full stop at its end."""
    text = text.strip()
    if not text:
        return ""
    text = text[0].upper() + text[1:]
    return text if text[-1] in ".!?:" else text + "."


def level(interval: float) -> str:
    """Return an interval's level: ``95 %``."""
    return f"{round(100 * interval, 1):g} %"


def duration(seconds: float) -> str:
    """Return a time in words: ``0.4 seconds``, ``3 minutes``."""
    if seconds < 90:
        return f"{significant(seconds)} seconds"
    return counted(round(seconds / 60), "minute")
