"""Colours, markers and patterns of the figures, and how text gets into them unharmed.

The colours are those of Okabe and Ito (2008), which readers with any common form of colour
blindness can tell apart; a marker, a pattern or a line style always says the same as the colour.
"""

from __future__ import annotations

import textwrap

CLASS_COLOURS = (
    "#0072B2",
    "#D55E00",
    "#009E73",
    "#CC79A7",
    "#E69F00",
    "#56B4E9",
    "#000000",
    "#7F7F7F",
)
CLASS_MARKERS = ("o", "s", "^", "D", "v", "P", "X", "*")
LINE_STYLES = ("-", "--", "-.", ":")

INK = "#222222"
FAINT = "#D9D9D9"
BAND = "#F4F4F2"

PRIOR_MARK = "†"
"""Put beside a number, or a marker, that rests mostly on the prior."""


def class_colour(index: int) -> str:
    """Return the colour of a class."""
    return CLASS_COLOURS[index % len(CLASS_COLOURS)]


def class_marker(index: int) -> str:
    """Return the marker of a class; shifted past eight, so that colour and marker stay a pair."""
    return CLASS_MARKERS[(index + index // len(CLASS_COLOURS)) % len(CLASS_MARKERS)]


def line_style(index: int) -> str:
    """Return the line style of a chain."""
    return LINE_STYLES[index % len(LINE_STYLES)]


def shade(position: int, count: int) -> tuple[float, float, float]:
    """Return a shade for one of the ordered answers, from light to dark blue."""
    at = 0.0 if count < 2 else position / (count - 1)
    light, dark = (0.90, 0.94, 0.97), (0.03, 0.25, 0.42)
    red, green, blue = (a + at * (b - a) for a, b in zip(light, dark, strict=True))
    return red, green, blue


def ink_on(colour: tuple[float, float, float]) -> str:
    """Return black or white, whichever is readable on a shade."""
    red, green, blue = colour
    return "white" if 0.299 * red + 0.587 * green + 0.114 * blue < 0.55 else "black"


def plain(text: str, width: int | None = None, lines: int = 2) -> str:
    """Return text that matplotlib shows as it is, never read as a formula.

    Parameters
    ----------
    text : str
        Any text from the data.
    width : int or None
        Characters on a line; longer text is wrapped, and cut with an ellipsis after ``lines``.
    lines : int
        Lines at the most.
    """
    text = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    if width is not None:
        text = "\n".join(
            textwrap.wrap(text, width, max_lines=lines, placeholder=" …", break_long_words=True)
        )
    return text.replace("$", r"\$")
