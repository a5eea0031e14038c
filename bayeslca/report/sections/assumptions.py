"""What was assumed: the model in words, the priors with their sources and their weight."""

from __future__ import annotations

from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Section,
    Subheading,
    Verbatim,
)
from bayeslca.report.facts import Facts
from bayeslca.report.priors import HEAVY_WORDS, ItemPrior, distribution, item_priors
from bayeslca.report.sections.joint_answers import sets_in_words
from bayeslca.report.sections.prior_predictive import prior_blocks
from bayeslca.report.wording import (
    called,
    counted,
    counted_in_words,
    listed,
    percent,
    sentence,
    significant,
    whole,
)

ANCHOR, HEADING = "assumptions", "What was assumed"


def assumptions_section(facts: Facts) -> Section:
    """Return the section on the model and its priors."""
    model = facts.posterior.model
    blocks: list[Block] = [Paragraph(model_in_words(facts)), Paragraph(answers_in_words(facts))]
    blocks.append(_answers_table(facts))
    blocks += _statements(facts)
    blocks += [
        Subheading("What the priors weigh"),
        Paragraph(weights_in_words(facts)),
        _weights_table(facts),
        *prior_blocks(facts),
        Verbatim(model.describe(facts.content.responses), "The whole model in words"),
    ]
    noticed = _noticed(facts)
    if noticed:
        blocks += [
            Subheading("What was decided on reading, and noticed before sampling"),
            Bullets(noticed),
        ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def model_in_words(facts: Facts) -> str:
    """Return the model in a few sentences."""
    model = facts.posterior.model
    classes = counted_in_words(model.n_classes, "class", "classes")
    names = "" if model.exploratory else f" ({listed(model.class_names)})"
    text = (
        f"Each case belongs to one of {classes}{names}, which nobody observed. "
        if model.n_classes > 1
        else "All cases belong to one class. "
    )
    text += (
        "Within a class, the answers to different items are independent of each other"
        f"{_but_together(facts)}, and every case of the class has the same probability of each "
        "answer."
    )
    if model.groups and model.pooled:
        name = model.groups.name
        text += (
            f" Each of {counted(len(model.groups.levels), 'unit')} ({name}) has its own "
            "prevalences, drawn from one Dirichlet distribution whose mean and concentration are "
            f"estimated with everything else, so that a {name} with few cases borrows from the "
            "others (partial pooling)."
        )
    elif model.groups:
        text += (
            f" Each group of {model.groups.name} ({listed(model.groups.levels)}) has its own "
            "prevalences; the classes look the same in all groups."
        )
    return text


def _but_together(facts: Facts) -> str:
    model = facts.posterior.model
    return f", but for {sets_in_words(model)}, which may go together" if model.item_sets else ""


def answers_in_words(facts: Facts) -> str:
    """Return how missing answers and cases set aside were treated, with their numbers."""
    responses = facts.content.responses
    n_answers = facts.n_cases * len(responses.items)
    if facts.n_missing:
        text = (
            f"Of {whole(n_answers)} possible answers of {counted(facts.n_cases, 'case')}, "
            f"{whole(facts.n_missing)} ({percent(facts.n_missing / n_answers)}) "
            f"{'is' if facts.n_missing == 1 else 'are'} missing. Every case counts with the "
            "answers it gave: whether an answer is missing may depend on the answers that are "
            "there, but not on the missing one itself (missing at random)."
        )
    else:
        text = f"All {counted(facts.n_cases, 'case')} answered every item."
    if responses.n_set_aside:
        text += (
            f" {counted(responses.n_set_aside, 'case')} without a single answer "
            f"{'was' if responses.n_set_aside == 1 else 'were'} set aside."
        )
    return text


def weights_in_words(facts: Facts) -> str:
    """Return how heavy the priors are, and where they matter."""
    heavy = [one for one in item_priors(facts.posterior) if one.heavy]
    text = (
        "A prior counts as if so many cases of the class had been seen before; its share is that "
        "number over itself plus the cases that the fit expects in the class. Priors pull "
        "probabilities near 0 or 100 % a little inward."
    )
    if not heavy:
        return f"{text} No prior weighs as much as {HEAVY_WORDS} of the cases of its class."
    worst = max(heavy, key=lambda one: one.share)
    return (
        f"{text} In {counted(len(heavy), 'place')} the prior weighs more than {HEAVY_WORDS} of "
        f"the cases, most in {_item_text(facts, worst)} of {called(worst.latent_class)} (its share "
        f"of the result is {percent(worst.share)})."
    )


def _answers_table(facts: Facts) -> PageTable:
    texts = {item.name: item.text for item in facts.posterior.model.items}
    rows = tuple(
        (
            texts[str(row["item"])],
            str(row["category"]),
            whole(row["count"]),
            percent(row["share"]),
            whole(row["missing"]),
        )
        for row in facts.content.responses.summary().to_dict("records")
    )
    heads = (
        Head("Item", "what was asked", numeric=False),
        Head("Answer", "one of the possible answers", numeric=False),
        Head("Cases", "that gave it"),
        Head("Share", "of those that answered the item"),
        Head("Missing", "cases without an answer to the item"),
    )
    return PageTable("What was answered", heads, rows, folded=True)


def _noticed(facts: Facts) -> tuple[tuple[str, str], ...]:
    content = facts.content
    findings = (
        *content.responses.findings,
        *facts.posterior.model.findings(content.responses),
    )
    noticed = {sentence(text): "" for text in content.decisions}
    for finding in findings:
        noticed[sentence(finding.message)] = sentence(finding.remedy)
    return tuple(noticed.items())


def _statements(facts: Facts) -> list[Block]:
    model = facts.posterior.model
    if not model.statements:
        return [Paragraph("The study states nothing beyond this: all priors are the defaults.")]
    rules = {rule.text for rule in model.naming_rules}
    rows = tuple(
        (statement, _source(model.statement_sources.get(statement), is_rule=statement in rules))
        for statement in model.statements
    )
    heads = (
        Head("Statement", "a prior, a constraint, or a rule that names a class", numeric=False),
        Head("Source", "where it comes from, as the study says", numeric=False),
    )
    return [PageTable("What the study states", heads, rows)]


def _source(source: str | None, *, is_rule: bool) -> str:
    if source is not None:
        return source
    return "needs none: it names a class" if is_rule else "not given"


def _weights_table(facts: Facts) -> PageTable:
    model = facts.posterior.model
    source = model.prevalence_source
    pooled = isinstance(source, PooledPrevalence)
    rows = [
        ("Prevalences" if not model.groups else f"Prevalences, {model.groups.levels[g]}", "",
         distribution(concentration) if model.n_classes > 1 else "none: one class",
         significant(float(concentration.sum())), "")
        for g, concentration in enumerate(() if pooled else source.concentration)
    ]  # fmt: skip
    if isinstance(source, PooledPrevalence):
        mean, spread = source.mean_prior, source.spread_prior
        rows.append(("Mean prevalences over units", "", distribution(mean),
                     significant(float(mean.sum())), ""))  # fmt: skip
        rows.append(("Spread between units", "", distribution(spread), "", ""))
    rows += [
        (_item_text(facts, weight), called(weight.latent_class), _held(facts, weight),
         significant(weight.weight), percent(weight.share))
        for weight in item_priors(facts.posterior)
    ]  # fmt: skip
    heads = (
        Head("Of", "the prevalences, or an item", numeric=False),
        Head("Class", "the class that it is about", numeric=False),
        Head(
            "Prior",
            "a Beta is of the answer that counts as yes; * cut off or tied by a constraint",
            numeric=False,
        ),
        Head("Weight", "the cases that it counts for"),
        Head("Share", "of the result that the prior makes"),
    )
    return PageTable("The priors and their weight", heads, tuple(rows), folded=len(rows) > 12)


def _held(facts: Facts, weight: ItemPrior) -> str:
    if weight.follows:
        return "what the joint answers' prior leaves"
    return _written(facts, weight) + (" *" if weight.constraints else "")


def _written(facts: Facts, weight: ItemPrior) -> str:
    item = next(item for item in facts.posterior.model.items if item.name == weight.item)
    if item.n_categories > 2:
        return distribution(weight.parameters)
    yes = item.categories.index(item.yes or item.categories[-1])
    return distribution([weight.parameters[yes], weight.parameters[1 - yes]])


def _item_text(facts: Facts, weight: ItemPrior) -> str:
    return next(item.text for item in facts.posterior.model.items if item.name == weight.item)
