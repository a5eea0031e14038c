"""A comparison of models in words and as text for a terminal."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, TypeAlias

if TYPE_CHECKING:
    import pandas as pd

OWN = "this study"
"""What the row of the study's own model is called."""
NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")
Name: TypeAlias = "int | str"


def row_in_words(name: Name) -> str:
    """Return what a row is called: ``two classes``, ``the study's own model``, ``'ordered'``."""
    if isinstance(name, int):
        number = NUMBERS[name] if name < len(NUMBERS) else str(name)
        return f"{number} class" if name == 1 else f"{number} classes"
    return "the study's own model" if name == OWN else f"'{name}'"


def verdict_in_words(table: pd.DataFrame, best: Name) -> str:
    """Return which model predicts best, what is tied with it, and the smallest that will do.

    Parameters
    ----------
    table : DataFrame
        See `bayeslca.assess.comparison.compare.Comparison`.
    best : int or str
    """
    rows = dict(zip(table.index, table.to_dict("records"), strict=True))
    title = _starting(row_in_words(best))
    predicts = "predict" if isinstance(best, int) and best > 1 else "predicts"
    if len(rows) == 1:
        return f"{title} alone was fitted, so there is nothing to compare with."
    tied = [name for name, row in rows.items() if row["tied"] and name != best]
    others = [name for name, row in rows.items() if not row["tied"]]
    if not tied:
        nearest = max(others, key=lambda name: rows[name]["elpd_diff"])
        gap = _gap(rows[nearest])
        lie = "lie" if _is_plural(nearest) else "lies"
        return f"{title} {predicts} best; {row_in_words(nearest)}, the next best, {lie} {gap}."
    listed = listed_with_and([f"{row_in_words(name)} ({_gap(rows[name])})" for name in tied])
    is_tied = "are tied" if len(tied) > 1 or _is_plural(tied[0]) else "is tied"
    text = (
        f"{title} {predicts} best, but {listed} {is_tied} with that: the differences are too "
        "small to tell."
    )
    counts = [name for name, row in rows.items() if row["tied"] and isinstance(name, int)]
    if len(counts) > 1:
        text += f" The smallest number within the tie is {row_in_words(min(counts))}."
    if others:
        nearest = max(others, key=lambda name: rows[name]["elpd_diff"])
        lie = "lie" if _is_plural(nearest) else "lies"
        if len(others) == 1:
            text += f" {_starting(row_in_words(nearest))} {lie} {_gap(rows[nearest])}."
        else:
            text += f" Of the others, {row_in_words(nearest)} {lie} nearest, {_gap(rows[nearest])}."
    return text


def comparison_text(table: pd.DataFrame, verdict: str, notes: Sequence[str]) -> str:
    """Return a comparison for a terminal of 80 columns."""
    from textwrap import fill

    head = ("", "behind", "tied", "weight", "elpd", "p_loo", "high k", "smallest", "sep.", "trust")
    lines = [head, *(_cells(name, row) for name, row in _records(table))]
    widths = [max(len(line[c]) for line in lines) for c in range(len(head))]
    drawn = [
        " ".join(
            cell.ljust(width) if c == 0 else cell.rjust(width)
            for c, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    ]
    if "probability" in table:
        drawn += ["", *_evidence_lines(table)]
    return "\n".join([*drawn, "", *(fill(text, 79) for text in (verdict, *notes))])


def _evidence_lines(table: pd.DataFrame) -> list[str]:
    """Return log evidences and probabilities of the models for a terminal."""
    head = ("", "log evidence", "P(number | answers)")
    lines = [
        head,
        *(
            (_title(name), log_evidence_in_words(row), probability_in_words(row))
            for name, row in _records(table)
        ),
    ]
    widths = [max(len(line[c]) for line in lines) for c in range(len(head))]
    return [
        "  ".join(
            cell.ljust(width) if c == 0 else cell.rjust(width)
            for c, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    ]


def log_evidence_in_words(row: Mapping[Any, Any]) -> str:
    """Return the log evidence with its error: ``-351.01 ± 0.02``; a dash where there is none."""
    value, error = float(row["log_evidence"]), float(row["log_evidence_mcse"])
    if value != value:
        return "not reliable"
    return f"{value:.2f}" if error == 0.0 else f"{value:.2f} ± {max(error, 0.01):.2f}"


def probability_in_words(row: Mapping[Any, Any]) -> str:
    """Return the probability of a number of classes; a dash where there is none."""
    value = float(row["probability"])
    return "–" if value != value else f"{value:.3f}"


def comparison_html(table: pd.DataFrame, verdict: str, notes: Sequence[str]) -> str:
    """Return a comparison for a notebook; all names are escaped."""
    from html import escape

    heads: tuple[str, ...] = (
        "Model", "Behind the best", "Tied", "Weight", "Accuracy (elpd)", "Effective parameters",
        "Unreliable cases", "Smallest class", "Separation", "Sampling trusted",
    )  # fmt: skip
    if "probability" in table:
        heads = (*heads, "Log evidence", "P(number | answers)")
    cells = [(*_cells(name, row, width=60), *_evidence_cells(row)) for name, row in _records(table)]
    body = "".join(
        "<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in line) + "</tr>" for line in cells
    )
    head = "".join(f"<th>{text}</th>" for text in heads)
    words = "".join(f"<p>{escape(text)}</p>" for text in (verdict, *notes))
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>{words}"


def _cells(name: Name, row: Mapping[Any, Any], width: int = 14) -> tuple[str, ...]:
    separation = row["separation"]
    return (
        _title(name, width),
        "best" if row["elpd_diff"] == 0 else f"{-row['elpd_diff']:.1f} ± {row['elpd_diff_se']:.1f}",
        "yes" if row["tied"] else "no",
        f"{row['weight']:.2f}",
        f"{row['elpd']:.1f} ± {row['elpd_se']:.1f}",
        f"{row['p_loo']:.1f}",
        str(row["pareto_k_high"]),
        f"{100 * row['smallest_class']:.0f} %",
        "–" if separation != separation else f"{separation:.2f}",
        "yes" if row["trustworthy"] else "no",
    )


def _title(name: Name, width: int = 14) -> str:
    text = str(name) if not isinstance(name, int) else f"{name} class{'es' if name > 1 else ''}"
    return text if len(text) <= width else text[: width - 1] + "…"


def _evidence_cells(row: Mapping[Any, Any]) -> tuple[str, ...]:
    if "probability" not in row:
        return ()
    return log_evidence_in_words(row), probability_in_words(row)


def _records(table: pd.DataFrame) -> list[tuple[Name, dict[Any, Any]]]:
    return list(zip(table.index, table.to_dict("records"), strict=True))


def _gap(row: Mapping[Any, Any]) -> str:
    return f"{-row['elpd_diff']:.1f} ± {row['elpd_diff_se']:.1f} behind"


def _is_plural(name: Name) -> bool:
    return isinstance(name, int) and name > 1


def _starting(text: str) -> str:
    return text[:1].upper() + text[1:]


def listed_with_and(parts: Sequence[str]) -> str:
    """Return ``one, two and three``."""
    return parts[0] if len(parts) == 1 else ", ".join(parts[:-1]) + " and " + parts[-1]
