"""What posterior predictive checks found, in words."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

from bayeslca.assess.fit.predictive_tables import CHECKS
from bayeslca.findings import Finding
from bayeslca.posterior.tables import OVERALL

if TYPE_CHECKING:
    import pandas as pd

MISSED = 0.01
"""A check with a smaller p is missed."""
DOUBTFUL = 0.05
"""One with a smaller p is doubtful."""
MOST_PAIRS = 3
"""Pairs that are named."""
SEVERAL = 5
"""Cases that must share a pattern before it is named: a rarer one may tell who gave it."""
PATTERN_CHECKS = ("g2", "x2", "power_divergence")

_REMEDIES = {
    "item_margins": (
        "An item's answers may differ by group (free_by_group); or a stated prior, a constraint or "
        "a shared response probability is wrong for it."
    ),
    "item_pairs": "See which pairs miss most.",
    "sum_scores": (
        "Try one more class: cases with few or many yes answers may be a kind of their own."
    ),
    "distinct_patterns": (
        "Uniform priors pull probabilities off 0 and 1, which makes answers more varied: priors "
        "with a source may help; so may another number of classes."
    ),
    **dict.fromkeys(PATTERN_CHECKS, "Try one more class; see which pair of items misses most."),
}
_OF_TESTS = (
    "Two tests may miss the same cases, or be misled by the same ones: see which pair misses most, "
    "and let it go together within a class (answered_together) before adding a class."
)
"""What to do where the items are diagnostic tests: more classes are seldom what is missing."""


@dataclass(frozen=True, eq=False)
class Tables:
    """The tables that the words are about.

    Attributes
    ----------
    overall, margins, pairs, sum_scores, patterns : DataFrame
    are_tests : bool
        Whether the items look like diagnostic tests.
    together : tuple of frozenset of str
        Items that are answered together in some class.
    """

    overall: pd.DataFrame
    margins: pd.DataFrame
    pairs: pd.DataFrame
    sum_scores: pd.DataFrame
    patterns: pd.DataFrame
    are_tests: bool = False
    together: tuple[frozenset[str], ...] = ()

    def remedy(self, check: str) -> str:
        """Return what to do where a check is missed."""
        if self.are_tests and check in (*PATTERN_CHECKS, "sum_scores"):
            return _OF_TESTS
        return _REMEDIES[check]

    def pair_remedy(self, one: str, two: str) -> str:
        """Return what to do where a pair of items is missed."""
        if any({one, two} <= items for items in self.together):
            return (
                "They go together in some classes already: let them in all, or try one more class."
            )
        set_of_two = f'answered_together = [["{one}", "{two}"]]'
        in_a_set = [items for items in self.together if items & {one, two}]
        if in_a_set:
            whole = sorted(frozenset().union({one, two}, *in_a_set))
            listed = ", ".join(f'"{name}"' for name in whole)
            set_of_two = f"answered_together = [[{listed}]]"
        if self.are_tests:
            return (
                f"Let the two go together within a class, {set_of_two}: two tests may miss the "
                "same cases, or be misled by the same ones. Another class is seldom what is "
                "missing."
            )
        return (
            f"Let the two go together within a class, {set_of_two}; or try one more class; or "
            "leave out one of two items that ask nearly the same."
        )


def p_text(p: float, replicates: int) -> str:
    """Return a p-value as text, never as an exact 0."""
    if p * replicates < 0.5:
        return f"below {1 / replicates:.1g}"
    return f"{p:.3f}" if p < 0.1 else f"{p:.2f}"


def judged_p(row: Mapping[str, Any]) -> float:
    """Return the p-value that a check is judged by.

    It is the calibrated one where there is one; but few simulated studies cannot make it small,
    and then a smaller p stands for itself.
    """
    return float(min(row["p"], row.get("p_calibrated", 1.0)))


def _judged_text(row: Mapping[str, Any], replicates: int) -> str:
    ranked = row.get("p_calibrated", 2.0) <= row["p"]
    what = "calibrated p" if ranked else "posterior predictive p"
    return f"{what} {p_text(judged_p(row), replicates)}"


def overall_rows(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the rows of all cases together."""
    return frame[frame["group"] == OVERALL] if "group" in frame else frame


def verdict_in_words(tables: Tables, replicates: int) -> str:
    """Return one short paragraph: which checks are missed, and the pair furthest off."""
    rows = records(overall_rows(tables.overall))
    missed = [row for row in rows if judged_p(row) < MISSED]
    doubtful = [row for row in rows if MISSED <= judged_p(row) < DOUBTFUL]
    if missed:
        text = f"The model does not reproduce {_listed(missed, replicates)}."
        if doubtful:
            text += f" Doubtful: {_listed(doubtful, replicates)}."
    elif doubtful:
        text = (
            f"The model reproduces the answers, with a doubt about {_listed(doubtful, replicates)}."
        )
    else:
        least = min(rows, key=judged_p)
        text = (
            f"The model reproduces the answers in all {len(rows)} checks (smallest "
            f"{_judged_text(least, replicates)}, of {CHECKS[least['check']]})."
        )
    for row in furthest_pairs(tables.pairs)[:1]:
        if _pairs_judged(tables) < DOUBTFUL:
            text += f" The pair of items furthest off: {_pair(row, replicates)}."
        else:
            names = f"{row['item_1']} and {row['item_2']}"
            text += (
                f" The pair of items furthest off is {names} ({_pair_figures(row, replicates)})."
            )
    return text


def predictive_findings(tables: Tables, replicates: int, n_missing: int) -> tuple[Finding, ...]:
    """Return what the checks found, what is missed first.

    Parameters
    ----------
    tables : Tables
    replicates : int
    n_missing : int
        Answers that are missing.
    """
    found = [
        *_checks_missed(tables, replicates),
        *_pairs_missed(tables, replicates),
        *_items_missed(tables, replicates),
        *_pattern_missed(tables),
        *_groups_missed(tables, replicates),
    ]
    if n_missing and any(finding.level == "warning" for finding in found):
        found.append(
            Finding(
                kind="replicates_keep_missing",
                level="note",
                message=(
                    f"replicates leave the same {n_missing:,} answers out; where leaving out goes "
                    "with the class, the model can look wrong for that reason alone"
                ),
                remedy="Compare with a fit to the cases that answered every item.",
                value=float(n_missing),
            )
        )
    return tuple(sorted(found, key=lambda finding: finding.level != "warning"))


def furthest_pairs(pairs: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the pairs, over all groups, that miss most: smallest p, then largest residual."""
    if pairs.empty:
        return []
    rows = records(overall_rows(pairs))
    return sorted(rows, key=lambda row: (row["p"], -abs(row["pair_residual"])))


def checks_text(
    tables: Tables, verdict: str, replicates: int, findings: tuple[Finding, ...]
) -> str:
    """Return verdict, checks and findings for a terminal of 80 columns."""
    from textwrap import fill

    width = max(len(CHECKS[name]) for name in tables.overall["check"])
    lines = [fill(verdict, 79), "", f"{'check':<{width}}  observed  expected  p"]
    lines += [
        f"{CHECKS[row['check']]:<{width}}  {row['observed']:8.1f}  {row['expected']:8.1f}  "
        f"{p_text(row['p'], replicates)}"
        for row in records(overall_rows(tables.overall))
    ]
    lines.append(f"p: share of {replicates:,} replicates that miss by as much or more")
    for finding in findings:
        text = f"{finding.level}: {finding.message[:1].upper()}{finding.message[1:]}. "
        lines.append(fill(text + finding.remedy, 79, initial_indent="- ", subsequent_indent="  "))
    return "\n".join(lines)


def checks_html(tables: Tables, verdict: str, replicates: int) -> str:
    """Return verdict and checks for a notebook."""
    body = "".join(
        f"<tr><td>{CHECKS[row['check']]}</td><td>{row['observed']:.1f}</td>"
        f"<td>{row['expected']:.1f}</td><td>{p_text(row['p'], replicates)}</td></tr>"
        for row in records(overall_rows(tables.overall))
    )
    heads = "".join(f"<th>{head}</th>" for head in ("check", "observed", "expected", "p"))
    return (
        f"<p>{escape(verdict)}</p><table><thead><tr>{heads}</tr></thead>"
        f"<tbody>{body}</tbody></table>"
    )


def _checks_missed(tables: Tables, replicates: int) -> Iterator[Finding]:
    for row in records(overall_rows(tables.overall)):
        if judged_p(row) >= DOUBTFUL:
            continue
        check = row["check"]
        seen, expected = _number(row["observed"]), _number(row["expected"])
        said = f"{seen} observed, {expected} expected, {_judged_text(row, replicates)}"
        yield Finding(
            kind=f"{check}_missed",
            level="warning" if judged_p(row) < MISSED else "note",
            message=f"{CHECKS[check]}: {said}",
            remedy=tables.remedy(check),
            about=(check,),
            value=judged_p(row),
        )


def _pairs_judged(tables: Tables) -> float:
    """Return the p-value of the largest pair residual; 1 where there is no pair."""
    rows = records(overall_rows(tables.overall))
    return next((judged_p(row) for row in rows if row["check"] == "item_pairs"), 1.0)


def _pairs_missed(tables: Tables, replicates: int) -> Iterator[Finding]:
    together = _pairs_judged(tables)
    if together >= DOUBTFUL:
        return
    worst = furthest_pairs(tables.pairs)
    named = [row for row in worst if row["p"] < DOUBTFUL][:MOST_PAIRS] or worst[:1]
    for row in named:
        yield Finding(
            kind="pair_missed",
            level="warning" if together < MISSED else "note",
            message=_pair(row, replicates),
            remedy=tables.pair_remedy(row["item_1"], row["item_2"]),
            about=(row["item_1"], row["item_2"]),
            value=float(row["pair_residual"]),
        )


def _items_missed(tables: Tables, replicates: int) -> Iterator[Finding]:
    frame = tables.margins
    looked = frame["item"].nunique() * (frame["group"].nunique() if "group" in frame else 1)
    named = set()
    for row in sorted(records(frame), key=lambda row: (row["p"], -row["residual"])):
        if row["p"] > MISSED / looked or row["item"] in named:
            continue
        named.add(row["item"])
        where = f" in {row['group']}" if row.get("group", OVERALL) != OVERALL else ""
        yield Finding(
            kind="item_missed",
            level="warning",
            message=(
                f"{row['item']}: {row['observed']:,} cases{where} answered {row['category']}, "
                f"where the model expects {row['expected']:.1f} "
                f"(p {p_text(row['p'], replicates)})"
            ),
            remedy=_REMEDIES["item_margins"],
            about=(row["item"],),
            value=float(row["residual"]),
        )


def _pattern_missed(tables: Tables) -> Iterator[Finding]:
    rows = records(overall_rows(tables.overall))
    if not any(row["check"] in PATTERN_CHECKS and judged_p(row) < DOUBTFUL for row in rows):
        return
    frame = tables.patterns
    many = frame[(frame["observed"] >= SEVERAL) & (frame["p"] * len(frame) < DOUBTFUL)]
    for row in records(many.head(1)):
        keys = {"group", "observed", "expected", "residual", "p"}
        answers = ", ".join(
            f"{name}={value}"
            for name, value in row.items()
            if name not in keys and value is not None
        )
        where = f" in {row['group']}" if "group" in row else ""
        yield Finding(
            kind="pattern_missed",
            level="note",
            message=(
                f"{row['observed']:,} cases{where} gave the pattern {answers}, where "
                f"{row['expected']:.1f} are expected"
            ),
            remedy="Such cases may be a kind of their own.",
            value=float(row["residual"]),
        )


def _groups_missed(tables: Tables, replicates: int) -> Iterator[Finding]:
    frame = tables.overall
    if "group" not in frame:
        return
    of_groups = records(frame[frame["group"] != OVERALL])
    well = {row["check"] for row in of_groups if judged_p(row) >= MISSED}
    for row in of_groups:
        # What every group misses is no matter of groups
        if judged_p(row) >= MISSED or row["check"] not in well:
            continue
        yield Finding(
            kind="group_missed",
            level="warning",
            message=(f"{CHECKS[row['check']]} in {row['group']}: p {p_text(row['p'], replicates)}"),
            remedy=(
                "Cases of this group may answer otherwise within a class (free_by_group), or fall "
                "into other classes."
            ),
            about=(row["group"], row["check"]),
            value=judged_p(row),
        )


def _pair(row: Mapping[str, Any], replicates: int) -> str:
    """Return ``fees and accounts go together more than the classes explain (...)``."""
    how = "less" if row["pair_residual"] < 0 else "more"
    if math.isnan(row["odds_ratio_expected"]):
        how = "otherwise"
    return (
        f"{row['item_1']} and {row['item_2']} go together {how} than the classes explain "
        f"({_pair_figures(row, replicates)})"
    )


def _pair_figures(row: Mapping[str, Any], replicates: int) -> str:
    parts = [f"pair residual {float(row['pair_residual']):+.1f}".replace("-", "−")]
    if not math.isnan(row["odds_ratio_expected"]):
        seen, expected = _number(row["odds_ratio"]), _number(row["odds_ratio_expected"])
        parts.append(f"odds ratio {seen}, expected {expected}")
    return ", ".join([*parts, f"p {p_text(row['p'], replicates)}"])


def _number(value: float) -> str:
    if math.isnan(value):
        return "unknown"
    if math.isinf(value):
        return "infinite"
    return f"{value:,.1f}" if abs(value) < 100 else f"{value:,.0f}"


def _listed(rows: list[Any], replicates: int) -> str:
    parts = [f"{CHECKS[row['check']]} ({_judged_text(row, replicates)})" for row in rows]
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"


def records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table."""
    return [{str(key): value for key, value in row.items()} for row in frame.to_dict("records")]
