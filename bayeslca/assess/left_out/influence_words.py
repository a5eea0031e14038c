"""Cases that stand out, in words and as text for a terminal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from bayeslca.findings import Finding

if TYPE_CHECKING:
    import pandas as pd

INFLUENTIAL = 0.5
"""A case that moves a prevalence by so many posterior standard deviations is named."""
SURPRISING = 0.05
"""So is one that fewer replicates of the data than this share hold the like of."""
SHOWN = 10
MOST_ROWS = 5


def influential(row: dict[str, Any]) -> bool:
    """Tell whether a row's cases move a prevalence by much, beyond simulation error."""
    beyond = abs(row["largest"]) - 2.0 * row["largest_mcse"]
    return bool(abs(row["largest"]) >= INFLUENTIAL and beyond > 0.0)


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table with plain keys."""
    return [{str(key): value for key, value in row.items()} for row in table.to_dict("records")]


def rows_in_words(row: dict[str, Any]) -> str:
    """Return the cases of a pattern: ``row 17``, or ``rows 3, 9``; long lists are cut."""
    listed = str(row["rows"]).split(", ")
    if len(listed) == 1:
        return f"row {listed[0]}"
    cut = ", ..." if len(listed) > MOST_ROWS else ""
    return f"rows {', '.join(listed[:MOST_ROWS])}{cut}"


def moved_in_words(row: dict[str, Any], class_names: Sequence[str]) -> str:
    """Return what leaving out one case does: ``the prevalence of managed up by 2.1 points ...``."""
    name = max(class_names, key=lambda name: abs(row[f"sd_{name}"]))
    change, in_sd = row[f"change_{name}"], abs(row[f"sd_{name}"])
    way = "up" if change > 0 else "down"
    return (
        f"the prevalence of {name} {way} by {abs(change):.1f} points, {in_sd:.1f} of its "
        "posterior sd"
    )


def verdict_in_words(
    table: pd.DataFrame, class_names: Sequence[str], replicates: int, no_refit: str
) -> str:
    """Return how surprising the least probable case is, and how much the most influential moves.

    Parameters
    ----------
    table : DataFrame
        See `bayeslca.assess.left_out.influence.Influence`.
    class_names : sequence of str
    replicates : int
    no_refit : str
        Why patterns that should have been refitted were not.
    """
    rows = records(table)
    odd = min(rows, key=lambda row: (row["p_replicate"], row["p_new_case"]))
    share = odd["p_replicate"]
    held = f"{100 * share:.0f} %" if share >= 0.005 else "fewer than 1 %"
    text = (
        f"Of all cases, the answers of {rows_in_words(odd)} are the most surprising: {held} of "
        f"{replicates:,} replicates of the data hold a case as improbable"
    )
    text += ", so nothing is unusual. " if share >= SURPRISING else ". "
    moved = [row for row in rows if influential(row)]
    if not moved:
        most = max(rows, key=lambda row: abs(row["largest"]))
        text += (
            "No single case moves a prevalence by half a posterior sd; the most influential, of "
            f"{rows_in_words(most)}, moves one by {abs(most['largest']):.2f}."
        )
    else:
        first = max(moved, key=lambda row: abs(row["largest"]))
        n = sum(int(row["count"]) for row in moved)
        which = "One case moves" if n == 1 else f"{n} cases each move"
        text += (
            f"{which} a prevalence by half a posterior sd or more: leaving out "
            f"{one_of(first)} takes {moved_in_words(first, class_names)}."
        )
    bad = int(table.loc[~table["reliable"], "count"].sum())
    if bad:
        text += (
            f" The figures of {bad} cases are not reliable."
            if bad > 1
            else (" The figures of one case are not reliable.")
        )
    return text + (f" {no_refit}" if no_refit else "")


def one_of(row: dict[str, Any]) -> str:
    """Return which case is left out: the only one, or one of several."""
    if row["count"] == 1:
        return rows_in_words(row)
    return f"one of the {int(row['count'])} cases of {rows_in_words(row)}"


def influence_findings(table: pd.DataFrame, class_names: Sequence[str]) -> tuple[Finding, ...]:
    """Return a finding for each case that stands out."""
    found = []
    for row in records(table):
        if row["p_replicate"] < SURPRISING:
            found.append(
                Finding(
                    kind="surprising_case",
                    level="warning",
                    message=(
                        f"The answers of {rows_in_words(row)} are surprising: "
                        f"{_share(row['p_replicate'])} of replicates of the data hold a case as "
                        "improbable."
                    ),
                    remedy="Look whether the answers were recorded as they were given.",
                    about=(f"row {row['rows']}",),
                    value=float(row["p_replicate"]),
                )
            )
        if influential(row):
            found.append(
                Finding(
                    kind="influential_case",
                    level="warning",
                    message=(
                        f"Leaving out {one_of(row)} takes {moved_in_words(row, class_names)}."
                    ),
                    remedy=(
                        "Report the prevalences without it beside the others; do not drop it "
                        "because it moves them."
                    ),
                    about=(f"row {row['rows']}",),
                    value=float(row["largest"]),
                )
            )
    return tuple(found)


def _share(value: float) -> str:
    return f"{100 * value:.0f} %" if value >= 0.005 else "fewer than 1 %"


def influence_text(table: pd.DataFrame, verdict: str, notes: Sequence[str]) -> str:
    """Return the cases that stand out for a terminal of 80 columns."""
    from textwrap import fill

    head = ("rows", "cases", "log density", "p", "replicates", "moves a prevalence by")
    lines = [head]
    for row in records(table)[:SHOWN]:
        rows = rows_in_words(row).split(" ", 1)[1]
        lines.append(
            (
                rows if len(rows) <= 16 else rows[:13] + "...",
                str(row["count"]),
                f"{row['log_density']:.1f}",
                f"{row['p_new_case']:.3f}",
                f"{100 * row['p_replicate']:.0f} %",
                f"{row['largest']:+.2f} sd",
            )
        )
    widths = [max(len(line[c]) for line in lines) for c in range(len(head))]
    drawn = [
        " ".join(
            cell.ljust(width) if c == 0 else cell.rjust(width)
            for c, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    ]
    return "\n".join([*drawn, "", *(fill(text, 79) for text in (verdict, *notes))])
