"""Prior statements with their names looked up: Dirichlet parameters in the model's order."""

from __future__ import annotations

from bayeslca.exceptions import ModelError
from bayeslca.model.elicitation import beta_from_most_likely
from bayeslca.model.statements.resolved import PrevalencePrior, ResponsePrior
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.syntax import (
    AllClasses,
    Beta,
    Dirichlet,
    Distribution,
    ElicitedBeta,
    Event,
    Prior,
    Probability,
)
from bayeslca.model.statements.vocabulary import Conditions, Vocabulary


def resolve_prior(
    prior: Prior, vocabulary: Vocabulary, text: str
) -> PrevalencePrior | ResponsePrior:
    """Look up the names of a prior statement.

    Raises
    ------
    Refusal
        When a name is unknown, or the distribution does not fit what it stands on.
    """
    first = prior.probability.events[0]
    if isinstance(first, AllClasses):
        return _prevalence_prior(prior, vocabulary, text)
    kind = vocabulary.kind(first.name)
    if kind == "class":
        return _prevalence_prior(prior, vocabulary, text)
    if kind == "item":
        return _response_prior(prior, first, vocabulary, text)
    raise vocabulary.unknown_event(first.name)


def _prevalence_prior(prior: Prior, vocabulary: Vocabulary, text: str) -> PrevalencePrior:
    probability = prior.probability
    conditions = vocabulary.conditions(probability)
    conditions.refuse_classes()
    for _, position in conditions.answers:
        msg = "a prior cannot stand on the probability of a class given answers"
        remedy = "Give it to P(managed) or to P(fees=yes | managed); memberships follow from them."
        raise Refusal(msg, position, remedy)
    group = _group(conditions, probability)
    if isinstance(probability.events[0], AllClasses):
        concentration = _symmetric(prior, vocabulary)
    else:
        concentration = _class_concentration(prior, vocabulary)
    return PrevalencePrior(concentration, group, text)


def _group(conditions: Conditions, probability: Probability) -> int | None:
    if conditions.group == "overall":
        msg = "a prior stands on each group's prevalences, not on the overall one"
        raise Refusal(msg, probability.position, "Leave out 'overall', or give one group.")
    return None if conditions.group == "every" else conditions.group


def _symmetric(prior: Prior, vocabulary: Vocabulary) -> tuple[float, ...]:
    """``P(.) ~ Dirichlet(a)``: the same parameter for every class."""
    if len(prior.probability.events) > 1:
        msg = "the dot already stands for every class"
        raise Refusal(msg, prior.probability.events[1].position, "Write P(.) ~ Dirichlet(1).")
    distribution = prior.distribution
    if not isinstance(distribution, Dirichlet) or len(distribution.concentration) != 1:
        msg = "P(.) takes a Dirichlet with one number, which every class gets"
        raise Refusal(msg, distribution.position, "Write P(.) ~ Dirichlet(1).")
    return distribution.concentration * vocabulary.n_classes


def _class_concentration(prior: Prior, vocabulary: Vocabulary) -> tuple[float, ...]:
    named: list[int] = []
    for event in prior.probability.events:
        if isinstance(event, AllClasses):
            msg = "the dot already stands for every class"
            raise Refusal(msg, event.position, "Name the classes, or write P(.) ~ Dirichlet(1).")
        named.append(vocabulary.class_of_event(event))
    form = f"P({', '.join(vocabulary.classes)}) ~ Dirichlet({_ones(vocabulary.n_classes)})"
    distribution = prior.distribution
    if isinstance(distribution, Dirichlet):
        return _in_order(prior.probability, distribution, named, vocabulary.classes, "class", form)
    if len(named) == 1 and vocabulary.n_classes == 2:
        return _two_parts(named[0], distribution)
    msg = f"a Beta prior is for one of two classes; here are {vocabulary.n_classes}"
    if len(named) > 1:
        msg = "a Beta prior stands on one probability"
    raise Refusal(msg, distribution.position, f"Write {form}.")


def _response_prior(prior: Prior, first: Event, vocabulary: Vocabulary, text: str) -> ResponsePrior:
    probability, distribution = prior.probability, prior.distribution
    conditions = vocabulary.conditions(probability)
    conditions.refuse_answers()
    latent_class = conditions.one_class(probability)
    group = _group(conditions, probability)
    item = vocabulary.item_index(first.name)
    categories = vocabulary.items[item].categories
    if first.sign not in ("", "="):
        msg = "a prior stands on single answers"
        remedy = f"Write P({first.name.text}={', '.join(categories)} | ...) ~ Dirichlet(...)."
        raise Refusal(msg, first.position, remedy)
    form = (
        f"P({first.name.text}={', '.join(categories)} | "
        f"{'.' if latent_class is None else vocabulary.classes[latent_class]}) "
        f"~ Dirichlet({_ones(len(categories))})"
    )
    named = list(vocabulary.answer(first)[1])
    for event in probability.events[1:]:
        if isinstance(event, AllClasses) or event.sign:
            msg = "a prior stands on the answers to one item"
            raise Refusal(msg, event.position, f"Write {form}.")
        named.append(vocabulary.category_index(item, event.name))
    if isinstance(distribution, Dirichlet):
        parameters = _in_order(probability, distribution, named, categories, "category", form)
    elif len(named) > 1:
        msg = "a Beta prior stands on one probability"
        raise Refusal(msg, distribution.position, f"Write {form}.")
    elif len(categories) > 2:
        msg = (
            f"item '{first.name.text}' has {len(categories)} categories; a Beta prior is for an "
            "item with two"
        )
        raise Refusal(msg, distribution.position, f"Write {form}.")
    else:
        parameters = _two_parts(named[0], distribution)
    return ResponsePrior(item, latent_class, parameters, group, text)


def _in_order(
    probability: Probability,
    distribution: Dirichlet,
    named: list[int],
    names: tuple[str, ...],
    kind: str,
    form: str,
) -> tuple[float, ...]:
    """Put a Dirichlet's numbers into the order of the model; every name appears once."""
    for at, index in enumerate(named):
        if index in named[:at]:
            msg = f"{kind} '{names[index]}' is listed twice"
            raise Refusal(msg, probability.events[at].position, f"Write {form}.")
    missing = [name for index, name in enumerate(names) if index not in named]
    if missing:
        msg = f"a Dirichlet prior needs every {kind}; missing: {', '.join(missing)}"
        raise Refusal(msg, probability.events[0].position, f"Write {form}.")
    if len(distribution.concentration) != len(named):
        msg = f"{len(named)} names but {len(distribution.concentration)} numbers in Dirichlet"
        raise Refusal(msg, distribution.position, f"Write {form}.")
    given = dict(zip(named, distribution.concentration, strict=True))
    return tuple(given[index] for index in range(len(names)))


def _two_parts(named: int, distribution: Distribution) -> tuple[float, ...]:
    """Return a Beta as the Dirichlet of two parts, the named one at its own place."""
    a, b = _beta_parameters(distribution)
    return (a, b) if named == 0 else (b, a)


def _beta_parameters(distribution: Distribution) -> tuple[float, float]:
    if isinstance(distribution, Beta):
        return distribution.a, distribution.b
    assert isinstance(distribution, ElicitedBeta)
    above = distribution.bound if distribution.side == "above" else None
    below = distribution.bound if distribution.side == "below" else None
    try:
        return beta_from_most_likely(
            distribution.most_likely, above=above, below=below, sure=distribution.sure
        )
    except ModelError as error:
        problem, _, remedy = str(error).partition(". ")
        raise Refusal(problem, distribution.position, remedy) from None


def _ones(n: int) -> str:
    return ", ".join(["1"] * n)
