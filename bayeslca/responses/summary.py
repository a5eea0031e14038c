"""What was answered, as tables and as text for terminal and notebook."""

from __future__ import annotations

import html
import textwrap
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Ints

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.responses.responses import Responses

_WIDTH = 80
_SHOWN_ITEMS = 30
_SHOWN_CATEGORIES = 7


def category_counts(responses: Responses) -> list[Ints]:
    """Return the cases per category of each item; the last entry counts missing answers."""
    units = responses.units
    found: list[Ints] = []
    for j, item in enumerate(responses.items):
        counts = np.zeros(item.n_categories + 1, dtype=np.int64)
        np.add.at(counts, units.pattern[:, j], units.count)
        counts[-1] += responses.n_set_aside
        found.append(counts)
    return found


def summary_table(responses: Responses) -> pd.DataFrame:
    """Return how often each category was chosen.

    Returns
    -------
    pandas.DataFrame
        Columns ``item``, ``category``, ``count`` (cases), ``share`` (of those who answered the
        item) and ``missing`` (cases without an answer to the item). ``attrs`` holds ``n_cases``,
        ``n_set_aside``, ``n_patterns`` and ``n_complete`` (cases that answered every item).
    """
    import pandas as pd

    rows = []
    for item, counts in zip(responses.items, category_counts(responses), strict=True):
        answered = int(counts[:-1].sum())
        for category, n in zip(item.categories, counts[:-1].tolist(), strict=True):
            share = n / answered if answered else float("nan")
            rows.append((item.name, category, n, share, int(counts[-1])))
    frame = pd.DataFrame(rows, columns=["item", "category", "count", "share", "missing"])
    units = responses.units
    complete = (units.pattern >= 0).all(axis=1)
    frame.attrs.update(
        n_cases=responses.n_cases,
        n_set_aside=responses.n_set_aside,
        n_patterns=n_patterns(responses),
        n_complete=int(units.count[complete].sum()),
    )
    return frame


def n_patterns(responses: Responses) -> int:
    """Return the number of distinct response patterns, whatever the group."""
    if responses.groups is None:
        return responses.units.n_units
    return int(np.unique(responses.units.pattern, axis=0).shape[0])


def pattern_table(responses: Responses) -> pd.DataFrame:
    """Return one row per unit: group (where declared), the answers, and ``count``."""
    import pandas as pd

    units = responses.units
    order = np.argsort(-units.count, kind="stable")
    columns: dict[str, object] = {}
    if responses.groups is not None:
        levels = np.array(responses.groups.levels, dtype=object)
        columns[responses.groups.name] = levels[units.group[order]]
    for j, item in enumerate(responses.items):
        names = np.array([*item.categories, None], dtype=object)
        columns[item.name] = pd.Series(names[units.pattern[order, j]], dtype=object)
    columns["count"] = units.count[order]
    return pd.DataFrame(columns)


def missing_table(responses: Responses) -> pd.DataFrame:
    """Return which items are missing together.

    Returns
    -------
    pandas.DataFrame
        ``missing`` (the items' names, joined with ", "; "none" when all were answered),
        ``n_missing`` and ``count`` (cases), the most common first.
    """
    import pandas as pd

    units = responses.units
    patterns, inverse = np.unique(units.pattern < 0, axis=0, return_inverse=True)
    counts = np.zeros(len(patterns), dtype=np.int64)
    np.add.at(counts, inverse.reshape(-1), units.count)
    rows = [
        (
            ", ".join(i.name for i, gone in zip(responses.items, mask, strict=True) if gone)
            or "none",
            int(mask.sum()),
            int(n),
        )
        for mask, n in zip(patterns, counts, strict=True)
    ]
    if responses.n_set_aside:
        everything = ", ".join(item.name for item in responses.items)
        rows.append((everything, len(responses.items), responses.n_set_aside))
    frame = pd.DataFrame(rows, columns=["missing", "n_missing", "count"])
    return frame.sort_values(
        ["count", "n_missing"], ascending=[False, True], kind="stable", ignore_index=True
    )


def headline(responses: Responses) -> str:
    """Return the first line: cases, items, patterns, and where they are from."""
    parts = [_several(responses.n_cases, "case"), _several(len(responses.items), "item")]
    parts.append(_several(n_patterns(responses), "response pattern"))
    if responses.groups is not None:
        parts.append(
            f"{_several(len(responses.groups.levels), 'group')} of {responses.groups.name}"
        )
    origin = f" from {responses.source}" if responses.source else ""
    return f"Responses: {', '.join(parts)}{origin}"


def item_lines(responses: Responses) -> list[tuple[str, str]]:
    """Return for each item its name and its categories with shares."""
    lines = []
    for item, counts in zip(responses.items, category_counts(responses), strict=True):
        answered = int(counts[:-1].sum())
        shares = [
            f"{category} {n:,}" + (f" ({n / answered:.0%})" if answered else "")
            for category, n in zip(item.categories, counts[:-1].tolist(), strict=True)
        ]
        text = ", ".join(shares[:_SHOWN_CATEGORIES])
        if len(shares) > _SHOWN_CATEGORIES:
            text += f", and {len(shares) - _SHOWN_CATEGORIES} more"
        if counts[-1]:
            text += f"; {counts[-1]:,} missing"
        lines.append((item.name, text))
    return lines


def as_terminal_text(responses: Responses) -> str:
    """Return a text of at most 80 columns."""
    lines = textwrap.wrap(headline(responses), _WIDTH, subsequent_indent="  ")
    rows = item_lines(responses)
    width = min(max((len(name) for name, _ in rows), default=0), 24)
    for name, text in rows[:_SHOWN_ITEMS]:
        lines.append(_cut(f"  {_cut(name, width):<{width}}  {text}"))
    if len(rows) > _SHOWN_ITEMS:
        lines.append(f"  ... and {len(rows) - _SHOWN_ITEMS} more items")
    lines += [_cut(line) for line in closing_lines(responses)]
    return "\n".join(lines)


def closing_lines(responses: Responses) -> list[str]:
    """Return what is worth a second look."""
    lines = []
    if responses.n_set_aside:
        aside = _several(responses.n_set_aside, "case")
        lines.append(f"{aside} without any answer set aside")
    others = [f for f in responses.findings if f.kind != "cases_set_aside"]
    if others:
        lines.append(f"{_several(len(others), 'note')} from reading (findings)")
    return lines


def as_html(responses: Responses) -> str:
    """Return the same as a small table for notebooks; all text from the data is escaped."""
    rows = "".join(
        f"<tr><th style='text-align:left'>{html.escape(name)}</th>"
        f"<td style='text-align:left'>{html.escape(text)}</td></tr>"
        for name, text in item_lines(responses)
    )
    closing = "".join(f"<p>{html.escape(line)}</p>" for line in closing_lines(responses))
    return f"<div><p>{html.escape(headline(responses))}</p><table>{rows}</table>{closing}</div>"


def _several(n: int, word: str) -> str:
    return f"{n:,} {word}" + "s" * (n != 1)


def _cut(line: str, width: int = _WIDTH) -> str:
    line = " ".join(line.split("\n"))
    return line if len(line) <= width else line[: width - 1] + "…"
