"""Whether the theory holds: hypotheses, rivals and quantities of the study."""

from __future__ import annotations

import math
from collections.abc import Sequence

from bayeslca.assess.hypothesis.grades import SOURCE, bayes_factor_text
from bayeslca.assess.hypothesis.hypotheses import HypothesisTest
from bayeslca.assess.hypothesis.rivals import Rivals
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Section,
    Subheading,
)
from bayeslca.report.content import Claim
from bayeslca.report.facts import Facts
from bayeslca.report.tables import records
from bayeslca.report.wording import NOTHING, level, percent, sentence, significant

ANCHOR, HEADING = "theory", "Whether the theory holds"
UNPLANNED = "Thought of after seeing the data"


def theory_section(facts: Facts) -> Section | None:
    """Return the section on hypotheses and quantities; None when the study states none."""
    content = facts.content
    if not content.claims and content.quantities is None:
        return None
    blocks: list[Block] = []
    planned = [claim for claim in content.claims if claim.planned]
    unplanned = [claim for claim in content.claims if not claim.planned]
    if content.claims:
        blocks.append(Paragraph(outcome_in_words(content.claims)))
    if planned:
        blocks.append(_claims_table("Hypotheses stated before the answers were seen", planned))
    blocks += _rivals(facts)
    if unplanned:
        blocks += [
            Subheading(UNPLANNED),
            Paragraph(
                "These were not planned. A hypothesis that the data suggested is not tested by "
                "the same data: read them as ideas for the next study."
            ),
            _claims_table(UNPLANNED, unplanned),
        ]
    if content.claims:
        blocks.append(Paragraph(_how_to_read()))
    if content.quantities is not None:
        blocks.append(_quantities(facts))
    return Section(ANCHOR, HEADING, tuple(blocks))


def outcome_in_words(claims: Sequence[Claim]) -> str:
    """Return what became of the claims, the planned ones first."""
    ordered = sorted(claims, key=lambda claim: not claim.planned)
    return " ".join(sentence(_outcome(claim)) for claim in ordered)


def _outcome(claim: Claim) -> str:
    test, words = claim.test, claim.words.rstrip(".")
    late = "" if claim.planned else " (thought of after seeing the data)"
    if test.true_by_definition:
        return f"“{words}”{late} is true by definition: the model itself says so"
    verdict = _verdict(test)
    share = ""
    if not math.isnan(test.posterior_probability):
        share = (
            f": its probability is {percent(test.posterior_probability)}, against "
            f"{percent(test.prior_probability)} before the data"
        )
    return f"“{words}”{late} {verdict}{share} ({_factor(test)})"


def _verdict(test: HypothesisTest) -> str:
    """Say where the claim stands: the evidence may favour what is still improbable."""
    grade, after = test.grade, test.posterior_probability
    if grade.endswith("for it") and after < 0.5:
        return f"is more probable than it was ({grade.removesuffix(' for it')}), yet improbable"
    if grade.endswith("against it") and after > 0.5:
        return f"is less probable than it was ({grade.removesuffix(' against it')}), yet probable"
    if grade.endswith("for it"):
        return f"is supported, with {grade.removesuffix(' for it')}"
    if grade.endswith("against it"):
        return f"is contradicted, with {grade}"
    return "is neither supported nor contradicted"


def _factor(test: HypothesisTest) -> str:
    value = bayes_factor_text(test.log_bayes_factor_against_complement)
    side = {"": "", "below": "below ", "above": "above "}[test.bound]
    against = "the model" if math.isnan(test.posterior_probability) else "its opposite"
    return f"Bayes factor {side}{value} against {against}"


def _claims_table(caption: str, claims: Sequence[Claim]) -> PageTable:
    heads = (
        Head("Claim", "as the study words it", numeric=False),
        Head("What it says", "in the notation of the study file", numeric=False),
        Head("Probability before", "under the model's prior"),
        Head("Probability after", "after the data"),
        Head("Bayes factor", "against the model ± simulation error"),
        Head("Against its opposite", "Bayes factor against the model without it"),
        Head("In words", SOURCE, numeric=False),
    )
    return PageTable(caption, heads, tuple(_claim_row(claim) for claim in claims))


def _claim_row(claim: Claim) -> tuple[str, ...]:
    test = claim.test
    side = {"": "", "below": "below ", "above": ""}[test.bound]
    error = test.log_bayes_factor_mcse
    errors = f" ± {percent(error)}" if 0 < error < 1 and not side else ""
    opposite = NOTHING
    if not math.isnan(test.log_bayes_factor_against_complement):
        more = "above " if test.bound == "above" else side
        opposite = more + bayes_factor_text(test.log_bayes_factor_against_complement)
    return (
        claim.words,
        test.text,
        percent(test.prior_probability),
        percent(test.posterior_probability),
        NOTHING if test.true_by_definition else _plain(side, test.log_bayes_factor) + errors,
        opposite,
        test.grade,
    )


def _plain(side: str, log_bayes_factor: object) -> str:
    return side + bayes_factor_text(float(str(log_bayes_factor)))


def _rival_bound(rivals: Rivals, name: str) -> str:
    """Return "below " where too few draws decide about a rival."""
    test = rivals.tests.get(name)
    return "below " if test is not None and test.bound == "below" else ""


def _rivals(facts: Facts) -> list[Block]:
    blocks: list[Block] = []
    for name, rivals in facts.content.rivals.items():
        heads = (
            Head("Hypothesis", "or none of these", numeric=False),
            Head("Weight before", "among the rivals"),
            Head("Weight after", "posterior probability among the rivals"),
            Head("Bayes factor", "against the model"),
        )
        rows = tuple(
            (
                str(row["hypothesis"]),
                percent(float(str(row["prior_weight"]))),
                percent(float(str(row["posterior_weight"]))),
                _plain(_rival_bound(rivals, str(row["hypothesis"])), row["log_bayes_factor"]),
            )
            for row in records(rivals.table.reset_index())
        )
        best = rivals.table.loc[rivals.best, "posterior_weight"]
        blocks += [
            Subheading(f"Rival hypotheses: {name}"),
            Paragraph(
                f"Of these, “{rivals.best}” is the best supported: it gets "
                f"{percent(float(str(best)))} of the probability shared among them. "
                "A claim's probability here is its share among the rivals, by their weights "
                "before; in the table of hypotheses it is that under the model by itself."
            ),
            PageTable(f"Rivals: {name}", heads, rows),
        ]
        if rivals.findings:
            noticed = tuple((one.message, one.remedy) for one in rivals.findings)
            blocks.append(Bullets(noticed))
    return blocks


def _how_to_read() -> str:
    return (
        "A Bayes factor says how many times more probable the answers are if the hypothesis holds. "
        "“The model” is the fitted model with all it assumes; its prior is part of every Bayes "
        f"factor, so another prior gives another one. The words are those of {SOURCE}; the number "
        "is what counts."
    )


def _quantities(facts: Facts) -> PageTable:
    frame = facts.content.quantities
    assert frame is not None
    keys = [name for name in ("quantity", "group", "latent_class") if name in frame]
    words = {"quantity": "Quantity", "group": "Group", "latent_class": "Class"}
    heads = (
        *(Head(words[key], "", numeric=False) for key in keys),
        Head("After the data", f"median and {level(facts.content.interval)} interval"),
        Head("Before the data", "the same under the prior"),
        Head("Simulation error", "Monte Carlo error of the mean"),
        Head("What it is", "in the notation of the study file", numeric=False),
    )
    rows = tuple(
        (
            *(str(row[key]) for key in keys),
            _interval(row["median"], row["lower"], row["upper"]),
            _interval(row["prior_median"], row["prior_lower"], row["prior_upper"]),
            NOTHING if row["mcse"] is None else significant(float(str(row["mcse"])), 1),
            str(row["text"]),
        )
        for row in records(frame)
    )
    return PageTable("Quantities that the study asks for", heads, rows)


def _interval(median: object, lower: object, upper: object) -> str:
    if median is None:
        return NOTHING
    middle, low, high = (significant(float(str(value))) for value in (median, lower, upper))
    return f"{middle} ({low} to {high})"
