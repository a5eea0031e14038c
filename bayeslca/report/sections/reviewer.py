"""What a reviewer will ask: each question with its answer, its place, or that it was not done.

Item numbers are those of the guidelines cited; subjects are in our own words.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from bayeslca.report.blocks import Answered, Block, Bullets, Paragraph, Questions, Section
from bayeslca.report.facts import Facts
from bayeslca.report.plots import row_name
from bayeslca.report.references import REFERENCES
from bayeslca.report.sections import (
    assumptions,
    class_counts,
    classes,
    design,
    fit,
    influence,
    joint_answers,
    limits,
    membership,
    outcomes,
    predictors,
    prevalence,
    prior_predictive,
    reproduce,
    sampling,
    sensitivity,
    units,
)
from bayeslca.report.wording import (
    counted,
    counted_in_words,
    decimal,
    listed,
    number_interval,
    sentence,
    whole,
)

ANCHOR, HEADING = "reviewer", "What a reviewer will ask"
NOT_DONE = "Not done in this study."

_PRIORS = (assumptions.ANCHOR, assumptions.HEADING)
_COUNTS = (class_counts.ANCHOR, class_counts.HEADING)
_CLASSES = (classes.ANCHOR, classes.HEADING)
_PREVALENCE = (prevalence.ANCHOR, prevalence.HEADING)
_PLACED = (membership.ANCHOR, membership.HEADING)
_SAMPLING = (sampling.ANCHOR, sampling.HEADING)
_DESIGN = (design.ANCHOR, design.HEADING)
_FIT = (fit.ANCHOR, fit.HEADING)
_OUTCOMES = (outcomes.ANCHOR, outcomes.HEADING)
_INFLUENCE = (influence.ANCHOR, influence.HEADING)
_LIMITS = (limits.ANCHOR, limits.HEADING)
_PREDICTORS = (predictors.ANCHOR, predictors.HEADING)
_REPRODUCE = (reproduce.ANCHOR, reproduce.HEADING)

_FOR_THE_AUTHORS = (
    ("1-4", "title, summary, background, the tests' role and the study's aims"),
    ("5-9", "how, where and when the cases were found and sampled, and who was eligible"),
    ("10-11", "the tests in enough detail to repeat them, what each picks up, why these"),
    ("12-13", "cut-offs and whether they were planned; what the readers of the tests knew"),
    ("18-22", "planned sample size, flow and description of the cases, time between the tests"),
    ("25, 27-30", "harms of testing, use in practice, registration, protocol, funding"),
)
"""What STARD-BLCM asks for and a page made from answers cannot know."""


def reviewer_section(facts: Facts, versions: Mapping[str, str]) -> Section:
    """Return the section of questions and answers."""
    entries = tuple(_all(facts, versions))
    n_open = sum(not entry.done for entry in entries)
    used = ["Kruschke 2021", "Depaoli & van de Schoot 2017"]
    used += ["Kostoulas et al. 2017"] if facts.looks_diagnostic else []
    said = (
        f"Of {counted(len(entries), 'question')}, {whole(n_open)} "
        f"{'names' if n_open == 1 else 'name'} something that was not done in this study. The "
        "numbers in brackets are items of reporting guidelines that ask the same; read the "
        "originals before you claim to follow them."
    )
    blocks: list[Block] = [
        Paragraph(said),
        Questions(entries),
        *([_for_the_authors()] if facts.looks_diagnostic else []),
        Bullets(tuple((REFERENCES[name], "") for name in used)),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def _all(facts: Facts, versions: Mapping[str, str]) -> Iterator[Answered]:
    yield _why_this_number(facts)
    yield _best_solution(facts)
    yield _converged(facts)
    yield _priors(facts)
    yield _implied(facts)
    yield _other_priors(facts)
    yield _independence(facts)
    yield _reproduced(facts)
    yield _single_cases(facts)
    yield _sampled(facts)
    yield _missing(facts)
    yield _unclear(facts)
    if facts.posterior.model.groups is not None:
        yield _nested(facts)
    yield _separated(facts)
    if facts.content.outcomes:
        yield _treated_as_known(facts)
    yield _estimates(facts)
    if facts.content.predictors is not None:
        yield _predicted(facts)
    yield _size(facts)
    yield _software(facts, versions)
    yield _same_again(facts)
    if facts.looks_diagnostic:
        yield _cross_classified(facts)
    yield Answered(
        "What are the limits?",
        "The section on limits names them with the numbers that make them matter here.",
        (_LIMITS,),
        _items("BARG 4E", "26", facts),
    )


def _predicted(facts: Facts) -> Answered:
    found = facts.content.predictors
    assert found is not None  # asked for by the caller
    ways = listed([way.replace("_", " ") for way in found.ways])
    return Answered(
        "Was class related to covariates without treating the most probable class as data?",
        f"Yes: {listed(found.design.covariates)}, {ways}; "
        "classes were drawn given the covariates, or the error of placement undone.",
        (_PREDICTORS,),
    )


def _items(others: str, stard: str, facts: Facts) -> str:
    mine = f"STARD-BLCM {stard}" if stard and facts.looks_diagnostic else ""
    return "; ".join(part for part in (others, mine) if part)


def _open(question: str, guidelines: str) -> Answered:
    return Answered(question, NOT_DONE, guidelines=guidelines, done=False)


def _why_this_number(facts: Facts) -> Answered:
    content = facts.content
    question = (
        f"Why {counted_in_words(len(facts.class_names), 'class', 'classes')} and not more or fewer?"
    )
    says = []
    if content.chosen_because:
        says.append(sentence(content.chosen_because))
    if content.comparison is not None:
        says.append(sentence(content.comparison.verdict))
        row = facts.own_row
        if row is not None and row["elpd_diff"] < 0:
            says.append(
                f"The model the answer rests on ({row_name(content.study_row)}) lies "
                f"{decimal(abs(row['elpd_diff']))} behind the best, with a standard error of "
                f"{decimal(row['elpd_diff_se'])}."
            )
    if not says:
        return Answered(question, NOT_DONE, done=False)
    if content.comparison is None:
        says.append("Other numbers were not compared in this study.")
    return Answered(question, " ".join(says), (_COUNTS,))


def _best_solution(facts: Facts) -> Answered:
    question = "Was the best solution found, and not only a good one?"
    text = sampling.starts_in_words(facts)
    if not text:
        return Answered(question, "No runs from scattered points were made.", done=False)
    return Answered(question, text, (_SAMPLING,))


def _converged(facts: Facts) -> Answered:
    return Answered(
        "Did the chains converge, and are there enough draws?",
        f"{sentence(facts.diagnostics.verdict)} Chains run twice as long were not tried.",
        (_SAMPLING,),
        "BARG 2B, 2C; WAMBS 2, 3, 5",
    )


def _priors(facts: Facts) -> Answered:
    model = facts.posterior.model
    stated = [text for text in model.statements if "~" in text]
    sourced = [text for text in stated if text in model.statement_sources]
    if not stated:
        text = "All priors are the defaults: uniform on prevalences and response probabilities."
    else:
        text = (
            f"{counted(len(stated), 'prior')} {'was' if len(stated) == 1 else 'were'} stated, "
            f"{whole(len(sourced))} with a source; all others are uniform."
        )
    return Answered(
        "Which priors were used, and where do they come from?",
        f"{text} {assumptions.weights_in_words(facts)}",
        (_PRIORS,),
        _items("BARG 1C; WAMBS 1", "14b", facts),
    )


def _other_priors(facts: Facts) -> Answered:
    question = "Would other priors have changed the answer?"
    items = _items("BARG 5A-5C; WAMBS 7-9", "14b", facts)
    done = facts.content.sensitivity
    if done is None:
        return _open(question, items)
    here = (sensitivity.ANCHOR, sensitivity.HEADING)
    return Answered(question, done.verdict, (here,), items)


def _implied(facts: Facts) -> Answered:
    return Answered(
        "What did the priors imply before the data?",
        prior_predictive.implied_in_words(facts),
        (_PRIORS,),
        "BARG 1E; WAMBS 1",
    )


def _reproduced(facts: Facts) -> Answered:
    question, checks = "Does the model reproduce the answers that were seen?", facts.content.checks
    if checks is None:
        return _open(question, "BARG 3A")
    return Answered(question, fit.reproduced_in_words(checks), (_FIT,), "BARG 3A")


def _nested(facts: Facts) -> Answered:
    model = facts.posterior.model
    assert model.groups is not None  # asked only where there are groups
    name = model.groups.name
    question = f"Do cases of one {name} go together, and was that taken into account?"
    if not model.pooled:
        return Answered(
            question,
            f"Each {name} has prevalences of its own, with a prior of its own; nothing is learnt "
            f"about one {name} from the others.",
            (_PREVALENCE,),
        )
    table = facts.posterior.between_units(interval=facts.content.interval)
    row = table.to_dict("records")[0]
    spread = number_interval(row["median"], row["lower"], row["upper"])
    return Answered(
        question,
        f"Units are pooled: each {name} has prevalences of its own, drawn from one distribution. "
        f"The spread between units is {spread}, from 0 (all alike) to 1 (each of one class).",
        ((units.ANCHOR, units.heading(facts)),),
    )


def _independence(facts: Facts) -> Answered:
    question, checks = "Are the items independent within a class?", facts.content.checks
    model = facts.posterior.model
    but = f"Not taken to be: {joint_answers.sets_in_words(model)}. " if model.item_sets else ""
    places = ((joint_answers.ANCHOR, joint_answers.HEADING),) if model.item_sets else ()
    if checks is not None:
        text = fit.independence_in_words(checks)
        return Answered(
            question,
            f"{but}Of the others {text[0].lower()}{text[1:]}" if but else text,
            (*places, _FIT),
            _items("BARG 1B", "14a", facts),
        )
    return Answered(
        question,
        f"{but}It was assumed{' of the others' if but else ''}. Whether pairs of items go together "
        "more than the classes explain was not checked in this study.",
        (*places, _PRIORS),
        _items("BARG 1B", "14a", facts),
        done=False,
    )


def _single_cases(facts: Facts) -> Answered:
    question, found = "Do the results rest on a few odd cases?", facts.content.influence
    if found is None:
        return Answered(question, NOT_DONE, done=False)
    return Answered(question, influence.influence_in_words(found), (_INFLUENCE,))


def _sampled(facts: Facts) -> Answered:
    question = "Does the analysis allow for how the cases were sampled?"
    if facts.content.weighted is None:
        return Answered(
            question,
            "The figures are of the cases at hand, taken one by one; no weights, clusters or "
            "strata were used.",
            guidelines=_items("", "9", facts),
            done=False,
        )
    return Answered(
        question,
        f"Yes, for the shares in the answer: {facts.content.weighted.design.in_words()}. "
        f"{design.moved_in_words(facts)} Comparison of models and checks of fit are unweighted.",
        (_DESIGN,),
        _items("", "9", facts),
    )


def _missing(facts: Facts) -> Answered:
    return Answered(
        "What was done about missing answers?",
        assumptions.answers_in_words(facts),
        (_PRIORS,),
        _items("BARG 1A", "16", facts),
    )


def _unclear(facts: Facts) -> Answered:
    decisions = facts.content.decisions
    text = (
        " ".join(sentence(decision) for decision in decisions)
        if decisions
        else "No answer was merged with another, and none was taken out on reading."
    )
    places = (_PRIORS,) if decisions else ()
    return Answered(
        "How were unclear answers treated?", text, places, _items("BARG 1A", "15", facts)
    )


def _separated(facts: Facts) -> Answered:
    question = "How well are the classes told apart?"
    if len(facts.class_names) == 1:
        return Answered(question, "There is one class.", (_PLACED,))
    unsure = facts.placement.n_cases - facts.placement.n_at_least(0.8)
    text = (
        f"{membership.separation_in_words(facts)} The most probable class of {whole(unsure)} of "
        f"{counted(facts.placement.n_cases, 'case')} has a probability below 80 %."
    )
    return Answered(question, text, (_PLACED,))


def _treated_as_known(facts: Facts) -> Answered:
    moved = [text for found in facts.content.outcomes if (text := outcomes.moved_in_words(found))]
    return Answered(
        "Was the most probable class treated as if it were known?",
        "No. Outcomes are related to class with the uncertainty of every case's class, by the cut, "
        f"jointly, or with a correction for the error of placing. {' '.join(moved[:1])}".strip(),
        (_OUTCOMES,),
    )


def _estimates(facts: Facts) -> Answered:
    return Answered(
        "Are all estimates given with their uncertainty?",
        "Every probability and every share stands with its interval, and all of them in the files.",
        (_CLASSES, _PREVALENCE),
        _items("BARG 3B", "24", facts),
    )


def _size(facts: Facts) -> Answered:
    return Answered(
        "Why so many cases?",
        f"There are {counted(facts.n_cases, 'case')}. How many would be enough was not worked out "
        "in this study.",
        guidelines=_items("", "18", facts),
        done=False,
    )


def _software(facts: Facts, versions: Mapping[str, str]) -> Answered:
    main = [f"{name} {versions[name]}" for name in ("bayeslca", "Python") if name in versions]
    return Answered(
        "Which software, in which version?",
        f"It was {listed(main)}; the others are listed.",
        (_REPRODUCE,),
        "BARG 2A, 6A",
    )


def _same_again(facts: Facts) -> Answered:
    content = facts.content
    seed = f"The seed is {content.seed}" if content.seed is not None else "No seed was fixed"
    return Answered(
        "Can somebody else get the same numbers?",
        f"{seed}; the data have the fingerprint {content.responses.data_hash[:12]}…; command and "
        "study file are printed, and the draws are kept in fit.nc. Whether the data may be given "
        "away is for the authors to say.",
        (_REPRODUCE,),
        "BARG 6B-6E",
    )


def _cross_classified(facts: Facts) -> Answered:
    return Answered(
        "Where are the cross-classified test results?",
        f"The file membership_of_patterns.csv lists the {counted(_n_units(facts), 'combination')} "
        "of results with the number of cases of each population.",
        guidelines="STARD-BLCM 23",
    )


def _n_units(facts: Facts) -> int:
    return facts.units.n_units


def _for_the_authors() -> Bullets:
    return Bullets(
        tuple(
            (f"STARD-BLCM {numbers}", f"is for the paper itself to say: {subject}.")
            for numbers, subject in _FOR_THE_AUTHORS
        )
    )
