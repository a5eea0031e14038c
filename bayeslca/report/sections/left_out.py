"""How cases were left out in the comparison of models: refits, and folds."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph
from bayeslca.report.plots import row_name
from bayeslca.report.wording import counted, decimal, sentence

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.comparison.compare import Comparison
    from bayeslca.report.content import ReportContent


def left_out_blocks(comparison: Comparison) -> list[Block]:
    """Return how cases were left out, and the comparison by folds where there is one."""
    blocks: list[Block] = [Paragraph(left_out_in_words(comparison))]
    folds = comparison.folds
    if folds is None:
        return blocks
    rows = tuple(
        (
            row_name(name),
            f"{decimal(row['elpd_diff'])} ± {decimal(row['elpd_diff_se'])}",
            f"{decimal(row['elpd'])} ± {decimal(row['elpd_se'])}",
            decimal(row["elpd_mcse"], 2),
            "yes" if row["reliable"] else "no",
        )
        for name, row in zip(folds.table.index, folds.table.to_dict("records"), strict=True)
    )
    heads = (
        Head("Model", "the number of classes, or the study's model", numeric=False),
        Head("Behind the best", "difference in predictive accuracy ± its standard error"),
        Head("Predictive accuracy", "of the cases of each fold ± its standard error"),
        Head("Simulation error", "how far other random numbers would move the accuracy"),
        Head("Reliable", "every refit was precise enough", numeric=False),
    )
    notes = tuple(
        sentence(f"{row_name(name)} was not refitted: {why}")
        for name, why in folds.no_refit.items()
    )
    text = (
        f"{folds.verdict} Each fold of the cases, with its share of every group, was predicted by "
        "a model fitted to the other folds."
    )
    return [
        *blocks,
        Paragraph(text),
        PageTable(f"The same models by {folds.folds} folds of cases", heads, rows, notes),
    ]


def left_out_in_words(comparison: Comparison) -> str:
    """Return what accuracy is, how it was found, and what counts as a tie."""
    text = (
        "Predictive accuracy is of a case's answers with its class summed out, left out one case "
        "at a time: by importance sampling from the fit of all cases, and by refits without one "
        "of its cases for a pattern where that is not reliable. "
    )
    table = comparison.table
    if "refitted" not in table:
        return text + _TIES
    refits = {name: int(n) for name, n in zip(table.index, table["refitted"], strict=True) if n}
    if not refits:
        text += "No pattern was refitted. "
    elif all(loo.refitted is not None and loo.refitted.all() for loo in comparison.loo.values()):
        text += "Every pattern was refitted, in every model. "
    else:
        parts = [
            f"{counted(n, 'pattern was', 'patterns were')} refitted with {row_name(name)}"
            for name, n in refits.items()
        ]
        text += f"{sentence('; '.join(parts))} "
    return text + _TIES


_TIES = "Differences below 4, or within two standard errors, are called ties."


def fold_tables(content: ReportContent) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the comparison by folds for the files, where there is one."""
    comparison = content.comparison
    if comparison is None or comparison.folds is None:
        return {}
    title = f"How well the models predict each of {comparison.folds.folds} folds of cases"
    return {"class_counts_by_folds": (title, comparison.folds.table)}
