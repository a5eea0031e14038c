"""Does the model fit: posterior predictive checks, and the pairs of items that it misses."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from bayeslca.assess.fit.predictive_tables import CHECKS
from bayeslca.assess.fit.predictive_words import (
    furthest_pairs,
    judged_p,
    overall_rows,
    p_text,
    records,
)
from bayeslca.posterior.tables import OVERALL
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
    Subheading,
)
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.fit_plots import heat_map_size, plot_pair_residuals, plot_sum_scores, signed
from bayeslca.report.plots import row_name
from bayeslca.report.wording import (
    NOTHING,
    counted,
    decimal,
    level,
    number_interval,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.fit.predictive_checks import PredictiveChecks

ANCHOR, HEADING = "fit", "Does the model fit"
MOST_SHOWN = 10
"""Rows of a table that are shown unfolded."""
_P = Head("p", "share of replicates that miss by as much or more; a small one is a misfit")


def fit_section(facts: Facts) -> Section | None:
    """Return the section on fit; None when it was not checked."""
    checks = facts.content.checks
    if checks is None:
        return None
    noticed = tuple((sentence(one.message), sentence(one.remedy)) for one in checks.findings)
    blocks: list[Block] = [
        Paragraph(sentence(checks.verdict)),
        *([Bullets(noticed)] if noticed else []),
        Paragraph(checks_in_words(checks)),
        *_checks_tables(checks),
        *_other_counts(facts),
        *_pairs(checks),
        *_scores(checks),
        _margins_table(checks),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def checks_in_words(checks: PredictiveChecks) -> str:
    """Return how the checks were made."""
    text = (
        f"{whole(checks.replicates)} replicates of the data were drawn from the fitted model. Each "
        "keeps every case's group and which items it answered; its class is drawn anew. Response "
        "patterns are compared within groups and within cases that answered the same items, by "
        "G2, X2 and the power divergence of Cressie & Read 1984; sum scores by the distance of "
        "Freeman & Tukey 1950; pairs of items by their largest pair residual. "
    )
    if checks.calibrated_in:
        return text + (
            "Calibrated p-values are ranks among those of "
            f"{counted(checks.calibrated_in, 'simulated study', 'simulated studies')}, each fitted "
            "anew (Hjort, Dahl & Steinbakk 2006)."
        )
    return text + (
        "As the same answers were used to fit the model, p lies nearer to one half than a p-value "
        "of a true model would: a small one tells more than a middling one."
    )


def reproduced_in_words(checks: PredictiveChecks) -> str:
    """Return whether the model reproduces the answers, with a number for each check."""
    parts = [
        f"{CHECKS[row['check']]} {p_text(judged_p(row), checks.replicates)}"
        for row in records(overall_rows(checks.overall))
    ]
    kind = "calibrated p" if checks.calibrated_in else "posterior predictive p"
    return f"{sentence(checks.verdict)} The {kind}: {'; '.join(parts)}."


def independence_in_words(checks: PredictiveChecks) -> str:
    """Return whether items are independent within a class, as far as was seen."""
    rows = [r for r in records(overall_rows(checks.overall)) if r["check"] == "item_pairs"]
    if not rows:
        return "There is one item, so there is no pair to look at."
    p = judged_p(rows[0])
    text = (
        f"Independence was assumed, and checked pair by pair: the largest of "
        f"{counted(len(overall_rows(checks.pairs)), 'pair residual')} has p "
        f"{p_text(p, checks.replicates)}. "
    )
    named = [f.message for f in checks.findings if f.kind == "pair_missed"]
    if named:
        return text + " ".join(sentence(message) for message in named)
    return text + "No pair is further off than the furthest pair of replicates tends to be."


def _checks_tables(checks: PredictiveChecks) -> list[Block]:
    """Return the checks of all cases, and folded those by group."""
    frame, caption = checks.overall, "How the answers compare with replicates"
    whole_table = _checks_table(checks, overall_rows(frame), caption)
    if "group" not in frame:
        return [whole_table]
    by_group = _checks_table(
        checks, frame[frame["group"] != OVERALL], f"{caption}, by group", grouped=True
    )
    return [whole_table, by_group]


def _checks_table(
    checks: PredictiveChecks, frame: pd.DataFrame, caption: str, *, grouped: bool = False
) -> PageTable:
    calibrated = bool(checks.calibrated_in)
    rows = tuple(
        (
            CHECKS[row["check"]],
            *([row["group"]] if grouped else []),
            significant(row["observed"], 3),
            f"{significant(row['expected'], 3)} ({significant(row['lower'], 3)} to "
            f"{significant(row['upper'], 3)})",
            _p_with_error(row, checks),
            *(
                [f"{decimal(row['p_calibrated'], 2)} ± {significant(row['p_calibrated_mcse'], 1)}"]
                if calibrated
                else []
            ),
        )
        for row in records(frame)
    )
    heads = (
        Head("Check", "what is compared", numeric=False),
        *([Head("Group", numeric=False)] if grouped else []),
        Head("Observed", "how far the answers are from what the model expects"),
        Head("Replicates", f"how far they are ({level(frame.attrs['interval'])} interval)"),
        Head("p", "share of replicates as far off, or further ± Monte Carlo error"),
        *([Head("Calibrated p", "rank among simulated studies ± its error")] if calibrated else []),
    )
    return PageTable(caption, heads, rows, folded=grouped)


def _p_with_error(row: dict[str, Any], checks: PredictiveChecks) -> str:
    text = p_text(row["p"], checks.replicates)
    return text if text.startswith("below") else f"{text} ± {significant(row['p_mcse'], 1)}"


def _other_counts(facts: Facts) -> list[Block]:
    """Return what other numbers of classes would give: is one more class the remedy."""
    others = facts.content.checks_by_count
    if not others:
        return []
    rows = []
    for count, checks in others.items():
        p = {
            row["check"]: p_text(judged_p(row), checks.replicates)
            for row in records(overall_rows(checks.overall))
        }
        worst = furthest_pairs(checks.pairs)[:1]
        pair = [
            f"{row['item_1']} and {row['item_2']} ({signed(row['pair_residual'])})" for row in worst
        ]
        rows.append(
            (
                row_name(count),
                *(p.get(check, NOTHING) for check in ("g2", "item_pairs", "sum_scores")),
                *(pair or [NOTHING]),
            )
        )
    heads = (
        Head("Model", "unconstrained, with so many classes", numeric=False),
        Head("p, patterns", "by G2"),
        Head("p, pairs", "by the largest pair residual"),
        Head("p, sum scores"),
        Head("Pair furthest off", "and its pair residual", numeric=False),
    )
    return [PageTable("The same checks with other numbers of classes", heads, tuple(rows))]


def _pairs(checks: PredictiveChecks) -> list[Block]:
    rows = overall_rows(checks.pairs) if len(checks.pairs) else checks.pairs
    if rows.empty:
        return []
    n_items = len({*rows["item_1"], *rows["item_2"]})
    unordered = bool(rows["odds_ratio_expected"].isna().any())
    caption = (
        "Each square is a pair of items. + and red: they go together more than the classes "
        "explain; − and blue: less. The number is the pair residual, in standard errors. Framed: "
        "fewer than 5 % of replicates miss the pair by as much."
    )
    if unordered:
        caption += " A pair with an item without an order has no direction: + is a misfit."
    figure = draw(
        "item-pairs",
        lambda drawing: plot_pair_residuals(checks, ax=drawing.subplots()),
        size=heat_map_size(n_items),
        caption=caption,
        alt=independence_in_words(checks),
    )
    return [
        Subheading("Pairs of items the model misses"),
        Paragraph(independence_in_words(checks)),
        Picture(figure),
        _pairs_table(checks),
    ]


def _pairs_table(checks: PredictiveChecks) -> PageTable:
    frame = checks.pairs
    grouped = "group" in frame
    ordered = sorted(records(frame), key=lambda row: (row["p"], -abs(row["pair_residual"])))
    rows = tuple(
        (
            f"{row['item_1']} and {row['item_2']}",
            *([row["group"]] if grouped else []),
            signed(row["pair_residual"]),
            p_text(row["p"], checks.replicates),
            _odds(row["odds_ratio"]),
            _odds_interval(row),
            whole(row["cases"]),
        )
        for row in ordered
    )
    heads = (
        Head("Pair", "furthest off first", numeric=False),
        *([Head("Group", "“overall”: all cases", numeric=False)] if grouped else []),
        Head("Pair residual", "observed less expected, in standard errors"),
        _P,
        Head("Odds ratio", "as observed; of ordered items, concordant over discordant pairs"),
        Head("Expected", f"of replicates ({level(frame.attrs['interval'])} interval)"),
        Head("Cases", "that answered both"),
    )
    return PageTable("Pairs of items", heads, rows, folded=len(rows) > MOST_SHOWN)


def _odds(value: float) -> str:
    if math.isinf(value):
        return "∞"
    return significant(value, 3)


def _odds_interval(row: dict[str, Any]) -> str:
    if math.isnan(row["odds_ratio_expected"]):
        return NOTHING
    ends = f"{_odds(row['odds_ratio_lower'])} to {_odds(row['odds_ratio_upper'])}"
    return f"{_odds(row['odds_ratio_expected'])} ({ends})"


def _scores(checks: PredictiveChecks) -> list[Block]:
    frame = checks.sum_scores
    if frame.empty:
        return []
    figure = draw(
        "sum-scores",
        lambda drawing: plot_sum_scores(checks, ax=drawing.subplots()),
        size=(WIDTH, 2.8),
        caption=(
            "Cases by their sum score: the number of yes answers, and of steps up in ordered "
            "items. Dots: as observed. Bars: where replicates lie; the dash is their mean."
        ),
        alt="Cases by their sum score, observed and expected.",
    )
    rows = tuple(
        (str(row["score"]), whole(row["observed"]), _expected(row), _short_p(row, checks))
        for row in records(overall_rows(frame))
    )
    heads = (
        Head("Sum score", "yes answers and steps up", numeric=False),
        Head("Observed", "cases"),
        Head("Expected", f"of replicates ({level(frame.attrs['interval'])} interval)"),
        _P,
    )
    return [
        Subheading("Sum scores"),
        Picture(figure),
        PageTable("Cases by their sum score", heads, rows, folded=len(rows) > MOST_SHOWN),
    ]


def _margins_table(checks: PredictiveChecks) -> PageTable:
    frame = checks.margins
    grouped = "group" in frame
    rows = tuple(
        (
            f"{row['item']}: {row['category']}",
            *([row["group"]] if grouped else []),
            whole(row["observed"]),
            _expected(row),
            signed(row["residual"]),
            _short_p(row, checks),
        )
        for row in records(frame)
    )
    heads = (
        Head("Answer", "item and answer", numeric=False),
        *([Head("Group", "“overall”: all cases", numeric=False)] if grouped else []),
        Head("Observed", "cases"),
        Head("Expected", f"cases ({level(frame.attrs['interval'])} interval of replicates)"),
        Head("Residual", "observed less expected, in standard errors"),
        _P,
    )
    return PageTable("Answers to single items", heads, rows, folded=True)


def _expected(row: dict[str, Any]) -> str:
    return number_interval(row["expected"], row["lower"], row["upper"], 1)


def _short_p(row: dict[str, Any], checks: PredictiveChecks) -> str:
    return p_text(row["p"], checks.replicates)
