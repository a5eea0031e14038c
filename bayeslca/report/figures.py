"""Figures as files and as mark-up: SVG inside the page, PNG at 300 dpi beside it."""

from __future__ import annotations

import io
import warnings
import xml.etree.ElementTree as ElementTree
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.figure import Figure as Drawing

STYLE: dict[str, object] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans", "Arial", "Helvetica"],
    "font.size": 10,
    "axes.labelsize": 9.5,
    "xtick.labelsize": 9,
    "ytick.labelsize": 9.5,
    "axes.edgecolor": "#555555",
    "axes.facecolor": "none",
    "text.usetex": False,
    "svg.fonttype": "none",
    "figure.dpi": 100,
    "savefig.bbox": "standard",
    "hatch.linewidth": 0.8,
}
"""The figures' style, used in a context of its own: no global setting is touched."""


WIDTH = 5.6
"""Inches: narrow enough to be read on a telephone, where a wide figure would have to be moved."""


@dataclass(frozen=True)
class Figure:
    """A finished figure.

    Attributes
    ----------
    name : str
        File name without its ending.
    caption : str
        What it shows and how to read it.
    alt : str
        The same for readers who do not see it, with the main numbers.
    markup : str
        SVG for use inside the page.
    svg, png : bytes
        The files.
    """

    name: str
    caption: str
    alt: str
    markup: str
    svg: bytes
    png: bytes


def draw(
    name: str,
    plot: Callable[[Drawing], object],
    *,
    size: tuple[float, float],
    caption: str,
    alt: str,
) -> Figure:
    """Draw a figure once and keep it as SVG, as PNG and as mark-up for the page.

    Parameters
    ----------
    name : str
    plot : callable
        Draws into the figure that it is given.
    size : tuple of float
        Width and height in inches.
    caption, alt : str
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure as Drawing

    svg, png = io.BytesIO(), io.BytesIO()
    with _own_style(name):
        drawing = Drawing(figsize=size, layout="constrained")
        FigureCanvasAgg(drawing)
        plot(drawing)
        # See-through on the page, so that the shadow shows where a figure can be moved sideways
        kept_out: dict[str, None] = {"Date": None, "Creator": None}
        drawing.savefig(svg, format="svg", facecolor="none", metadata=kept_out)
        drawing.savefig(png, format="png", dpi=300, facecolor="white", metadata={"Software": None})
    markup = inline_svg(svg.getvalue(), prefix=name, alt=alt)
    return Figure(name, caption, alt, markup, svg.getvalue(), png.getvalue())


@contextmanager
def _own_style(name: str) -> Iterator[None]:
    from matplotlib import rc_context

    with rc_context({**STYLE, "svg.hashsalt": name}), warnings.catch_warnings():  # type: ignore[dict-item]
        # A label in a script that the font lacks is still text in the SVG, where the browser has it
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


def inline_svg(svg: bytes, *, prefix: str, alt: str) -> str:
    """Return an SVG file as mark-up that can stand in a page beside other figures.

    Identifiers get a prefix of their own, style rules for the whole page and metadata are taken
    out, and the figure is named for screen readers.

    Parameters
    ----------
    svg : bytes
        A file written by matplotlib.
    prefix : str
        Put before every identifier.
    alt : str
        What the figure shows, in words.
    """
    root = ElementTree.fromstring(svg)
    _drop(root, {"metadata", "style"})
    for element in root.iter():
        element.tag = _local(element.tag)
        attributes = {_local(key): value for key, value in element.attrib.items()}
        element.attrib.clear()
        element.attrib.update(
            {key: _prefixed(key, value, prefix) for key, value in attributes.items()}
        )
    width = float(root.attrib.pop("width").removesuffix("pt"))
    root.attrib.pop("height")
    root.attrib.pop("version", None)
    root.attrib.update(
        {
            "role": "img",
            "aria-label": alt,
            "style": f"max-width: {1.2 * width * 4 / 3:.0f}px",
            "stroke-linejoin": "round",
        }
    )
    return ElementTree.tostring(root, encoding="unicode")


def _drop(element: ElementTree.Element, names: set[str]) -> None:
    for child in list(element):
        if _local(child.tag) in names:
            element.remove(child)
        else:
            _drop(child, names)


def _local(name: str) -> str:
    return name.rsplit("}", 1)[-1]


def _prefixed(key: str, value: str, prefix: str) -> str:
    if key == "id":
        return f"{prefix}-{value}"
    if key == "href" and value.startswith("#"):
        return f"#{prefix}-{value[1:]}"
    return value.replace("url(#", f"url(#{prefix}-")
