"""What the priors imply before the data, beside what was learnt and what was observed."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any, NamedTuple

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Picture, Subheading
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.plots import profile_rows
from bayeslca.report.prior_plots import plot_prior_predictive, prior_height, prior_rows
from bayeslca.report.wording import (
    called,
    counted,
    decimal,
    level,
    listed_up_to,
    number_interval,
    percent_interval,
    whole,
)

HEADING = "What the priors imply before the data"
MOST_NAMED = 3
KEYS = ("group", "latent_class", "item", "category")
_QUANTITIES = {
    "distinct_patterns": ("the number of different patterns of answers", 0),
    "sum_score_mean": ("the mean of the sum scores", 2),
    "sum_score_sd": ("the spread of the sum scores", 2),
}


class Seen(NamedTuple):
    """A number about the answers: as observed, and what the priors imply for it."""

    name: str
    observed: float
    row: dict[str, Any]
    places: int | None

    @property
    def is_outside(self) -> bool:
        """True when it lies outside the priors' 95 % interval."""
        return not self.row["lower_95"] <= self.observed <= self.row["upper_95"]

    def implied(self, part: int) -> str:
        """Return median and interval that the priors imply."""
        values = (self.row["median"], self.row[f"lower_{part}"], self.row[f"upper_{part}"])
        if self.places is None:
            return percent_interval(*values)
        return number_interval(*values, places=self.places)

    @property
    def as_observed(self) -> str:
        """The observed value."""
        if self.places is None:
            return percent_interval(self.observed, 0, 0).partition(" (")[0]
        return decimal(self.observed, self.places)


def prior_blocks(facts: Facts) -> list[Block]:
    """Return the figure and the tables of what the priors imply."""
    prior, interval = facts.prior_predictive, facts.content.interval
    groups = facts.response_groups
    figure = draw(
        "prior_predictive",
        lambda drawing: plot_prior_predictive(
            prior, facts.posterior, interval=interval, ax=drawing.subplots()
        ),
        size=(WIDTH, prior_height(prior)),
        caption=(
            "Pale bars: where the priors, with the constraints and naming rules, put each "
            "probability with 95 % before the data; the darker part, with 50 %. Marker and line: "
            f"median and {level(interval)} interval after the data."
            + (f" Answers are those of {groups[0]}." if groups else "")
        ),
        alt=implied_in_words(facts),
    )
    text = implied_in_words(facts)
    if prior.exploratory:
        text += " The classes are interchangeable before the data: the prior of each is the same."
    return [
        Subheading(HEADING),
        Paragraph(text),
        Picture(figure),
        _classes_table(facts),
        _answers_table(facts),
    ]


def implied_in_words(facts: Facts) -> str:
    """Return what studies drawn from the priors look like, and where this one differs."""
    prior = facts.prior_predictive
    seen = list(_seen(facts))
    patterns = next(one for one in seen if one.name == _QUANTITIES["distinct_patterns"][0])
    low, high = whole(patterns.row["lower_95"]), whole(patterns.row["upper_95"])
    implied = low if low == high else f"{low} to {high}"
    text = (
        f"In 95 of 100 studies of {counted(prior.n_cases, 'case')} drawn from the priors, the "
        f"number of different patterns of answers is {implied}; {whole(patterns.observed)} "
        f"{'was' if patterns.observed == 1 else 'were'} observed. "
    )
    outside = [one for one in seen if one.is_outside]
    text += f"Of {counted(len(seen), 'number')} about the answers, "
    if not outside:
        return f"{text}all lie within the priors' 95 % intervals."
    n_inside = len(seen) - len(outside)
    inside = {0: "none lies", 1: "1 lies"}.get(n_inside, f"{whole(n_inside)} lie")
    named = [
        f"{one.name} ({one.as_observed} observed, {_ends(one)} implied)"
        for one in sorted(outside, key=_distance, reverse=True)
    ]
    return (
        f"{text}{inside} within the priors' 95 % intervals; outside: "
        f"{listed_up_to(named, MOST_NAMED)}. Where answers lie outside, ask whether other priors "
        "would change the result."
    )


def _ends(one: Seen) -> str:
    return one.implied(95).partition("(")[2].rstrip(")")


def _distance(one: Seen) -> float:
    """Return how far outside a number lies, in widths of its interval."""
    row = one.row
    width = max(row["upper_95"] - row["lower_95"], 1e-9)
    return float(max(row["lower_95"] - one.observed, one.observed - row["upper_95"]) / width)


def _seen(facts: Facts) -> Iterator[Seen]:
    """Yield the numbers about the answers that were observed, one answer of two for an item."""
    prior = facts.prior_predictive
    rows = {(row["item"], row["category"]): row for row in prior.item_margins.to_dict("records")}
    for item, category in profile_rows(prior.items):
        row = {str(key): value for key, value in rows[(item.name, category)].items()}
        if math.isfinite(row["observed"]):
            yield Seen(f"{item.text}: {category}", row["observed"], row, None)
    for found in prior.patterns.to_dict("records"):
        row = {str(key): value for key, value in found.items()}
        name, places = _QUANTITIES[row["quantity"]]
        yield Seen(name, row["observed"], row, places)


def _answers_table(facts: Facts) -> PageTable:
    rows = [
        (one.name[0].upper() + one.name[1:], one.implied(95), _half(one.implied(50)),
         one.as_observed)
        for one in _seen(facts)
    ]  # fmt: skip
    scores = facts.prior_predictive.sum_scores.to_dict("records")
    for found in scores:
        row = {str(key): value for key, value in found.items()}
        one = Seen(f"Cases with sum score {row['score']}", row["observed"], row, 0)
        rows.append((one.name, one.implied(95), _half(one.implied(50)), one.as_observed))
    heads = (
        Head("Of the answers", "of those who answered the item, or of all cases", numeric=False),
        Head("Before the data", "median (95 % interval) of studies drawn from the priors"),
        Head("Half of them", "50 % interval"),
        Head("Observed", "in this study"),
    )
    return PageTable("What the priors imply for the answers", heads, tuple(rows), folded=True)


def _classes_table(facts: Facts) -> PageTable:
    prior, interval = facts.prior_predictive, facts.content.interval
    before = _by_keys(prior.prevalence) | _by_keys(prior.response_probabilities)
    after = _by_keys(facts.posterior.prevalence(interval=interval)) | _by_keys(facts.probabilities)
    rows: list[tuple[str, ...]] = []
    every = [row for row in prior_rows(prior) if row.is_prevalence]
    for group in facts.response_groups or ("",):
        answers = [row for row in prior_rows(prior, group or None) if not row.is_prevalence]
        every += [row._replace(text=f"{row.text}, {group}") if group else row for row in answers]
    for row in every:
        for name in facts.class_names:
            keys = {"latent_class": name, **row.keys}
            at = tuple(keys.get(key, "") for key in KEYS)
            cell, learnt = before[at], after[at]
            rows.append(
                (
                    row.text,
                    called(name),
                    percent_interval(cell["median"], cell["lower_95"], cell["upper_95"]),
                    _half(percent_interval(cell["median"], cell["lower_50"], cell["upper_50"])),
                    percent_interval(learnt["median"], learnt["lower"], learnt["upper"]),
                )
            )
    heads = (
        Head("Of", "the share of the cases, or an answer", numeric=False),
        Head("Class", "the class that it is about", numeric=False),
        Head("Before the data", "median (95 % interval) of the prior"),
        Head("Half of it", "50 % interval of the prior"),
        Head("After the data", f"median ({level(interval)} interval)"),
    )
    return PageTable("What the priors imply for the classes", heads, tuple(rows), folded=True)


def _half(interval: str) -> str:
    """Return the ends of an interval that is written behind its median."""
    return interval.partition("(")[2].rstrip(")")


def _by_keys(frame: Any) -> dict[tuple[str, ...], dict[str, Any]]:
    return {tuple(str(row.get(key, "")) for key in KEYS): row for row in frame.to_dict("records")}
