"""The page: sections in, one self-contained HTML file out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from importlib.resources import files
from typing import Any

from bayeslca.report.blocks import Section

NO_BREAK = "\u00a0"


def render_page(
    *, title: str, sections: Sequence[Section], versions: Mapping[str, str], trustworthy: bool
) -> str:
    """Return the page as HTML that needs no other file and no network.

    Parameters
    ----------
    title : str
    sections : sequence of Section
    versions : mapping of str to str
    trustworthy : bool
        False marks the page's title as well.
    """
    from jinja2 import DictLoader, Environment, StrictUndefined
    from markupsafe import Markup

    templates = files("bayeslca.report") / "templates"
    sources = {
        name: (templates / name).read_text(encoding="utf-8")
        for name in ("report.html.j2", "blocks.html.j2")
    }
    environment = Environment(
        loader=DictLoader(sources), autoescape=True, undefined=StrictUndefined,
        trim_blocks=True, lstrip_blocks=True, finalize=_kept_together,
    )  # fmt: skip
    style = (templates / "report.css").read_text(encoding="utf-8")
    return environment.get_template("report.html.j2").render(
        title=title,
        sections=sections,
        version=versions.get("bayeslca", ""),
        trustworthy=trustworthy,
        style=Markup(style),
        as_markup=Markup,
    )


def _kept_together(value: Any) -> Any:
    """Keep a number and its per cent sign on one line."""
    if type(value) is str:
        return value.replace(" %", f"{NO_BREAK}%")
    return value
