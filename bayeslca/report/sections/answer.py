"""The question and the answer: what a reader takes home, with the warnings before it."""

from __future__ import annotations

from bayeslca.report.blocks import Banner, Block, Bullets, Head, Lead, PageTable, Paragraph, Section
from bayeslca.report.content import ReportContent
from bayeslca.report.facts import Facts, Share
from bayeslca.report.palette import PRIOR_MARK
from bayeslca.report.plots import row_name
from bayeslca.report.sections import design
from bayeslca.report.sections.portraits import PRIOR_LEGEND, portrait
from bayeslca.report.wording import (
    about_of,
    called,
    counted,
    counted_in_words,
    decimal,
    listed,
    percent,
    sentence,
    whole,
)

ANCHOR, HEADING = "answer", "The question and the answer"
UNDETERMINED = {
    "not_identified": (
        "The answers alone cannot determine all of this model: some of these figures rest on the "
        "priors, however many cases there are."
    ),
    "weakly_identified": (
        "The answers hardly determine some of this model: some of these figures rest much on the "
        "priors."
    ),
}
"""What the answer says of a model that the cases do not settle, by kind of finding."""


def answer_section(facts: Facts) -> Section:
    """Return the section that opens the report."""
    content = facts.content
    blocks: list[Block] = []
    if content.question:
        blocks.append(Paragraph(sentence(content.question)))
    if not is_to_be_trusted(facts):
        blocks.append(_warning(facts))
    blocks.append(Lead(headline(facts), facts.diagnostics.trustworthy))
    if len(facts.class_names) > 1:
        shares = sorted(facts.answered, key=lambda share: -share.median)
        blocks.append(Bullets(tuple(_entry(facts, share) for share in shares)))
    blocks.append(Paragraph(" ".join(_how_sure(facts))))
    blocks.extend(_changes(content))
    return Section(ANCHOR, HEADING, tuple(blocks))


def headline(facts: Facts) -> str:
    """Return the sentence that answers the question with numbers.

    It says first that it is not to be trusted, that it rests on the priors, or that the study's
    own model predicts worse than others, where that is so.
    """
    n_classes = len(facts.class_names)
    if n_classes == 1:
        clause = (
            f"with a single class all {counted(facts.n_cases, 'case')} are described alike: there "
            "are no kinds to tell apart"
        )
    else:
        clause = facts.answered_in_words
    clause = f"{rests_on_priors(facts)}{_outside_tie(facts)}{clause}"
    if not facts.diagnostics.trustworthy:
        clause = f"not to be trusted as it stands: {clause}"
    return sentence(clause)


def rests_on_priors(facts: Facts) -> str:
    """Return how a sentence begins whose figures the answers do not settle; else nothing."""
    if facts.undetermined:
        return (
            f"{PRIOR_MARK} resting on the priors too, as the answers cannot determine all of the "
            "model: "
        )
    if facts.marked_classes:
        names = listed([called(name) for name in facts.marked_classes])
        return f"{PRIOR_MARK} with what is said of {names} resting mostly on the prior: "
    return ""


def is_to_be_trusted(facts: Facts) -> bool:
    """Tell whether the sampling of the answer's model, and of every tied one, is to be trusted."""
    return facts.diagnostics.trustworthy and not facts.untrusted_ties


def _outside_tie(facts: Facts) -> str:
    comparison, row = facts.content.comparison, facts.own_row
    if comparison is None or row is None or not facts.outside_tie:
        return ""
    mine = counted(len(facts.class_names), "class", "classes")
    best = row_name(comparison.best)
    behind, error = decimal(abs(row["elpd_diff"])), decimal(row["elpd_diff_se"])
    return (
        f"the study's own model ({mine}) predicts new cases worse than the best of those "
        f"compared ({best}), by {behind} with a standard error of {error}; under it, "
    )


def _warning(facts: Facts) -> Banner:
    diagnostics = facts.diagnostics
    texts = [] if diagnostics.trustworthy else [sentence(diagnostics.verdict)]
    texts += [
        sentence(f"{finding.message.rstrip('.')}. {finding.remedy}")
        for finding in diagnostics.findings
        if finding.level == "problem"
    ]
    if facts.untrusted_ties:
        names = listed([row_name(name) for name in facts.untrusted_ties])
        texts.append(
            f"Within the tie of models that predict equally well, the sampling of {names} is not "
            "to be trusted; the number of classes may change when it is."
        )
    heading = (
        "The number of classes is not to be trusted yet"
        if diagnostics.trustworthy
        else "The sampling behind this report is not to be trusted yet"
    )
    return Banner(heading, tuple(texts))


def _entry(facts: Facts, share: Share) -> tuple[str, str]:
    mark = f" {PRIOR_MARK}" if share.name in facts.marked_classes else ""
    if facts.content.weighted is not None:
        term = f"{called(share.name)}: {share.text}{mark} of the population."
        return term, portrait(facts, share.name)
    term = f"{called(share.name)}: {share.text}{mark}, {about_of(share.median, facts.n_cases)}."
    return term, portrait(facts, share.name)


def _how_sure(facts: Facts) -> list[str]:
    content, n_classes = facts.content, len(facts.class_names)
    chosen = counted_in_words(n_classes, "class", "classes")
    because = f", because {content.chosen_because.rstrip('.')}" if content.chosen_because else ""
    if content.alternatives and not because:
        because = ", the smallest number within the tie"
    says = [sentence(f"the answer is for {chosen}{because}")]
    if content.comparison is not None:
        says.append(sentence(content.comparison.verdict))
    says.append(design.moved_in_words(facts))
    if content.weighted is not None:
        says.append(
            "What the classes look like, how many they are and how surely cases are placed rests "
            "on the cases as they are, unweighted."
        )
    if n_classes > 1:
        placed = facts.placement
        sure = placed.n_at_least(0.8)
        says.append(
            f"A case's most probable class has a probability of {percent(placed.mean_highest)} on "
            f"average; for {whole(sure)} of {counted(placed.n_cases, 'case')} it is 80 % or more."
        )
    says += [
        UNDETERMINED[finding.kind]
        for finding in facts.diagnostics.findings
        if finding.kind in UNDETERMINED
    ]
    if facts.marked_answers or facts.marked_prevalences:
        says.append(PRIOR_LEGEND)
    says.append(
        "Classes are a model's summary of the answers; how far to trust it stands under "
        "“Limits and cautions”."
    )
    return [said for said in says if said]


def _changes(content: ReportContent) -> list[Block]:
    if not content.replaced:
        return []
    if not content.changes:
        return [Paragraph("Nothing moved since the last run into the same folder.")]
    rows = tuple((change.what, change.before, change.after) for change in content.changes)
    heads = (
        Head("Quantity", "what moved", numeric=False),
        Head("Before", "in the last run"),
        Head("Now", "in this run"),
    )
    return [PageTable("What moved since the last run into the same folder", heads, rows)]
