"""Limits and cautions, each with the number that makes it matter here."""

from __future__ import annotations

from bayeslca.model.cautions import CASES_PER_CLASS
from bayeslca.report.blocks import Bullets, Section
from bayeslca.report.facts import Facts
from bayeslca.report.sections import fit, joint_answers
from bayeslca.report.sections.class_counts import tie_in_words
from bayeslca.report.wording import called, counted, level, listed, percent_value, whole

ANCHOR, HEADING = "limits", "Limits and cautions"
FEW = 5
MOST_NAMED = 6


def limits_section(facts: Facts) -> Section:
    """Return the section on limits."""
    entries = [
        (
            "Classes are a model's summary",
            "of the answers to these items, not kinds found in nature. Other items, or another "
            "model, can divide the same cases differently.",
        )
    ]
    if facts.looks_diagnostic:
        entries.insert(0, _diagnostic())
    if len(facts.class_names) > 1:
        entries += [_size(facts), _placement(facts)]
    entries += [*_undetermined(facts), *_small_groups(facts)]
    if len(facts.tied) > 1:
        entries.append(
            (
                "The number of classes is not settled",
                f"by these data: {tie_in_words(facts)} predict equally well within their errors.",
            )
        )
    entries.append(_independence(facts))
    if facts.n_missing:
        entries.append(
            (
                "Missing answers were taken to be missing at random",
                f"({counted(facts.n_missing, 'answer')}). If cases left out just the answers that "
                "would have told, the classes are off.",
            )
        )
    entries += _small_or_ruled(facts)
    return Section(ANCHOR, HEADING, (Bullets(tuple(entries)),))


def _independence(facts: Facts) -> tuple[str, str]:
    same = "Items that ask nearly the same can make up a class of their own."
    checks = facts.content.checks
    if checks is None:
        return "Independence within a class was assumed, not checked", f"in this report. {same}"
    if any(finding.kind == "pair_missed" for finding in checks.findings):
        return (
            "Items are not independent within a class,",
            f"though the model takes them to be: “{fit.HEADING}” names the pairs. {same}",
        )
    sets = facts.posterior.model.item_sets
    of = " of items outside the sets that may go together" if sets else ""
    if len({j for one in sets for j in one.items}) == facts.posterior.table.n_items:
        return (
            "Items may go together within a class,",
            f"as “{joint_answers.HEADING}” says; few cases leave open how much. {same}",
        )
    return (
        f"Independence within a class{of} was assumed,",
        f"and nothing was seen against it (“{fit.HEADING}”); few cases can hide much. {same}",
    )


def _diagnostic() -> tuple[str, str]:
    return (
        "Not for decisions on a single patient or animal.",
        "The figures here describe tests and populations under a model without a perfect "
        "reference. Local rules and licensed practice come first.",
    )


def _size(facts: Facts) -> tuple[str, str]:
    widest = max(facts.answered, key=lambda share: share.upper - share.lower)
    return (
        f"{counted(facts.n_cases, 'case')} leave much open:",
        f"the {level(facts.content.interval)} interval of the share of {called(widest.name)} runs "
        f"from {percent_value(widest.lower)} to {percent_value(widest.upper)} %.",
    )


def _placement(facts: Facts) -> tuple[str, str]:
    placed = facts.placement
    unsure = placed.n_cases - placed.n_at_least(0.8)
    return (
        "Membership is uncertain:",
        f"for {whole(unsure)} of {counted(placed.n_cases, 'case')} the most probable class has a "
        "probability below 80 %. Do not treat it as data.",
    )


def _undetermined(facts: Facts) -> list[tuple[str, str]]:
    """Name what the answers cannot determine, or hardly, as the diagnostics found it."""
    entries = []
    for finding in facts.diagnostics.findings:
        names = listed(finding.about[:MOST_NAMED])
        if len(finding.about) > MOST_NAMED:
            names = f"{', '.join(finding.about[:MOST_NAMED])} and others"
        if finding.kind == "not_identified":
            entries.append(
                (
                    "The answers cannot determine all of the model:",
                    f"what is said of {names} rests on the priors, however many cases there are. "
                    "Other priors give other figures.",
                )
            )
        elif finding.kind == "weakly_identified":
            entries.append(
                (
                    "The answers hardly determine some of the model:",
                    f"of some combination of {names} they say less than a uniform prior. Other "
                    "priors give other figures.",
                )
            )
    return entries


def _small_groups(facts: Facts) -> list[tuple[str, str]]:
    groups = facts.posterior.model.groups
    if groups is None:
        return []
    if facts.posterior.model.pooled:
        return [
            (
                f"Each {groups.name} borrows from the others:",
                "estimates of units with few cases lie near the mean of all, as they should where "
                "units are of one kind. They are no ranking, and no judgement of a single "
                f"{groups.name}; one that is known to be unlike the others does not belong here.",
            )
        ]
    fewest = CASES_PER_CLASS * len(facts.class_names)
    sizes = zip(groups.levels, facts.posterior.group_cases, strict=True)
    small = [f"{level} ({whole(size)})" for level, size in sizes if size < fewest]
    if not small:
        return []
    return [
        (
            f"Few cases in {listed(small)}:",
            f"what is said of such a group of {groups.name} alone rests on little, and on its "
            "prior.",
        )
    ]


def _small_or_ruled(facts: Facts) -> list[tuple[str, str]]:
    entries = []
    few = [called(s.name) for s in facts.overall if s.median * facts.n_cases < FEW]
    if few:
        entries.append(
            (
                f"Few cases are expected in {listed(few)}:",
                "what is said of so small a class rests on little.",
            )
        )
    # Both answers of a yes/no item are one place: the page shows one of them.
    n_marked = len({key[:3] for key in facts.marked_answers}) + len(facts.marked_prevalences)
    if n_marked:
        entries.append(
            (
                "Some numbers rest mostly on the prior",
                f"({counted(n_marked, 'place')}); they are marked † where they stand.",
            )
        )
    return entries
