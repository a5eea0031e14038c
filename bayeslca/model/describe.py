"""The model in words: what is assumed, and what each assumption weighs against the data."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence
from math import exp
from typing import TYPE_CHECKING

from scipy.special import betaincinv

from bayeslca.model.constraint_words import in_words
from bayeslca.model.describe_together import together_in_words, told_apart_in_words
from bayeslca.model.identifiability import count_free
from bayeslca.model.naming_links import naming_links
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prior_weights import HEAVY, PriorWeight, prior_weights
from bayeslca.model.priors import DEFAULT
from bayeslca.model.statements.resolved import PrevalencePrior, ResponsePrior

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

WIDTH = 80


def describe(model: LatentClassModel, responses: Responses | None = None) -> str:
    """Return the model in words.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses, optional
        Also say what each prior weighs against these.
    """
    n_cases = None if responses is None else model.units(responses).n_cases
    weights = prior_weights(model, responses)
    parts = [
        _heading(model),
        "",
        *_classes(model),
        "",
        "Items",
        *_items(model),
        "",
        "How common each class is",
        *_prevalences(model, n_cases),
        "",
        *_answers(model, weights),
        *together_in_words(model, weights),
        *_constraints(model),
        "What the defaults mean",
        *_defaults(model.n_classes, n_cases),
    ]
    return "\n".join(parts)


def _heading(model: LatentClassModel) -> str:
    classes = counted(model.n_classes, "class", "classes")
    items = counted(len(model.items), "item", "items")
    free = counted(
        count_free(model.table, model.prevalence_source), "free parameter", "free parameters"
    )
    return f"A latent class model with {classes}, {items} and {free}"


def _classes(model: LatentClassModel) -> list[str]:
    names = ", ".join(model.class_names)
    if model.n_classes == 1:
        return _wrapped(f"One class ({names}): all cases answer alike, up to chance.")
    if model.exploratory:
        return _wrapped(
            f"Only the number of classes is assumed: {model.n_classes}. They are interchangeable "
            f"in the model and are called {names} by falling prevalence."
        )
    out = _wrapped(f"The classes are {names}. What tells them apart:")
    kept = "a naming rule, kept as an order" if naming_links(model) else "a naming rule"
    for rule in model.naming_rules:
        out += _indented(f"{rule.text} ({kept}){_source(model, rule.text)}")
    left = [k for k in range(model.n_classes) if k not in _ruled(model)]
    if model.naming_rules and len(left) == 1:
        out += _indented(f"{model.class_names[left[0]]} is the class that is left")
    for prior in model.stated.priors:
        if _tells_apart(prior):
            out += _indented(f"{prior.text}{_source(model, prior.text)}")
    for constraint in model.stated.constraints:
        if any(getattr(t, "latent_class", None) is not None for t in constraint.terms.values()):
            out += _indented(f"{constraint.text}{_source(model, constraint.text)}")
    for line in told_apart_in_words(model):
        out += _indented(line)
    return out


def _constraints(model: LatentClassModel) -> list[str]:
    """Say in words what is held to be equal, known, bounded or ordered."""
    if not model.stated.constraints:
        return []
    out = ["What is held to be equal, known or ordered"]
    for constraint in model.stated.constraints:
        words = in_words(constraint, model.vocabulary)
        out += _indented(f"{constraint.text}: {words}{_source(model, constraint.text)}.")
    probability = model.log_bounds_probability
    if probability.value < 0.0:
        out += _indented(
            "The priors above are cut off at these bounds, which have a probability of "
            f"{exp(probability.value):.3g} under them: within the bounds they favour other values "
            "than they would alone."
        )
    return [*out, ""]


def _ruled(model: LatentClassModel) -> frozenset[int]:
    """Return the classes that have a naming rule of their own."""
    return frozenset(rule.latent_class for rule in model.naming_rules)


def _tells_apart(prior: PrevalencePrior | ResponsePrior) -> bool:
    """Whether a prior treats classes differently."""
    if isinstance(prior, ResponsePrior):
        return prior.latent_class is not None
    return len(set(prior.concentration)) > 1


def _items(model: LatentClassModel) -> list[str]:
    width = min(24, max(len(item.name) for item in model.items))
    out = []
    for item in model.items:
        sign = " < " if item.ordered else ", "
        label = f"  {item.label}" if item.label else ""
        out += _indented(f"{item.name:<{width}}  {sign.join(item.categories)}{label}")
    return out


def _prevalences(model: LatentClassModel, n_cases: int | None) -> list[str]:
    source = model.prevalence_source
    out: list[str] = []
    if isinstance(source, PooledPrevalence):
        return _pooled(model, source)
    levels = model.groups.levels if model.groups else ("",)
    alike = (source.concentration == source.concentration[0]).all()
    for g, level in enumerate(levels[:1] if alike else levels):
        a = source.concentration[g]
        origin = model.priors.prevalence_origin[g]
        where = f"In {level}: " if model.groups and not alike else ""
        against = "" if n_cases is None or model.groups else f", against {n_cases:,} observed"
        each = f"In each {model.groups.name}: " if model.groups and alike else ""
        weight = counted(round(float(a.sum()), 1), "case", "cases")
        text = f"{where}{each}{_dirichlet(a)}{_origin(model, origin)}; counts for {weight}"
        out += _indented(f"{text}{against}.")
    if model.groups and not model.free_items:
        out += _indented("Response probabilities are the same in all groups.")
    elif model.groups:
        free = [model.items[j].name for j in sorted(model.free_items)]
        rest = "" if len(free) == len(model.items) else "; those of the others are the same in all"
        out += _indented(f"Groups differ in the response probabilities of {_listed(free)}{rest}.")
    return out


def _pooled(model: LatentClassModel, source: PooledPrevalence) -> list[str]:
    """Say in words how units are pooled."""
    assert model.groups is not None  # pooled units are groups
    name, n = model.groups.name, len(model.groups.levels)
    a, b = source.spread_prior
    origin = "the default (uniform)" if (a, b) == (1.0, 1.0) else "as stated"
    out = _indented(
        f"Pooled over {n} units ({name}): the prevalences of each {name} are drawn from one "
        f"Dirichlet with an estimated mean and spread, so that a {name} with few cases borrows "
        "from the others, as much as they turn out to be alike."
    )
    out += _indented(
        f"Mean: {_dirichlet(source.mean_prior)}{_origin(model, model.priors.prevalence_origin[0])}."
    )
    out += _indented(
        f"Spread, 0 where all units are alike and 1 where each holds one class only: Beta({a:g}, "
        f"{b:g}), {origin}. Its square is the correlation of two cases of one {name}."
    )
    if model.free_items:
        free = [model.items[j].name for j in sorted(model.free_items)]
        return out + _indented(
            f"Units differ in the response probabilities of {_listed(free)}; those of the others "
            "are the same in all."
        )
    return out + _indented("Response probabilities are the same in all units.")


def _answers(model: LatentClassModel, weights: Sequence[PriorWeight]) -> list[str]:
    """Say what is assumed of answers to items on their own; nothing where all are in sets."""
    lines = _response_priors(model, weights)
    return ["What each class answers", *lines, ""] if lines else []


def _response_priors(model: LatentClassModel, weights: Sequence[PriorWeight]) -> list[str]:
    out: list[str] = []
    weights = [weight for weight in weights if not weight.together]
    defaults = [weight for weight in weights if weight.origin == DEFAULT]
    where = "every class" if len(defaults) == len(weights) else "classes without a stated prior"
    if any(len(one.classes) < model.n_classes for one in model.item_sets):
        where += " in which they are not answered together"
    for concentration in sorted({w.concentration for w in defaults if not w.shared}):
        size = len(concentration)
        of_size = [w for w in defaults if w.concentration == concentration and not w.shared]
        items = dict.fromkeys(name for weight in of_size for name in weight.items)
        out += _indented(
            f"{_listed(items)}: {_dirichlet(of_size[0].concentration)} on the {size} answers in "
            f"{where}, the default (uniform); counts for {counted(size, 'case', 'cases')} in the "
            f"class{_against(of_size)}."
        )
    for shared in (weight for weight in defaults if weight.shared):
        out += _indented(
            f"{shared.block} and what is equal to it, or left beside it: "
            f"{_dirichlet(shared.concentration)}, which follows from the defaults; counts "
            f"for {counted(shared.weight, 'case', 'cases')}{_against([shared])}."
        )
    for origin in dict.fromkeys(weight.origin for weight in weights):
        if origin != DEFAULT:
            stated = [weight for weight in weights if weight.origin == origin]
            weight = round(stated[0].weight, 1)
            counts = f"counts for {counted(weight, 'case', 'cases')} in the class"
            out += _indented(f"{origin}{_source(model, origin)}; {counts}{_against(stated)}.")
    if any(weight.heavy for weight in weights):
        out += _indented(
            f"(!) weighs more than {HEAVY:.0%} of the answers expected there: what the posterior "
            "says of it rests to a good part on the prior."
        )
    return out


def _against(weights: Sequence[PriorWeight]) -> str:
    expected = sorted(weight.expected for weight in weights if weight.expected is not None)
    if not expected:
        return ""
    low, high = round(expected[0]), round(expected[-1])
    about = f"{low:,}" if low == high else f"{low:,} to {high:,}"
    heavy = " (!)" if any(weight.heavy for weight in weights) else ""
    return f", against about {about} expected answers{heavy}"


def _defaults(n_classes: int, n_cases: int | None) -> list[str]:
    if n_cases is None:
        return _indented(
            "Uniform priors favour no value beforehand. They still pull estimates a little inward "
            "from 0 and 1, and a class that is not needed keeps a small share. Call "
            "describe(responses) to see what each prior weighs against the data."
        )
    per_class = max(1, round(n_cases / n_classes))
    middle, upper = betaincinv(1.0, 1.0 + per_class, (0.5, 0.975))
    out = _indented(
        f"A yes/no answer that none of {per_class:,} cases in a class gives is still put at "
        f"{middle:.1%} (up to {upper:.1%}): uniform priors pull estimates inward from 0 and 1. "
        "Where a true 0 matters, give the answer a prior that says so."
    )
    if n_classes > 1:
        share = 1 / (n_cases + n_classes)
        out += _indented(
            f"A class that no case belongs to keeps a prevalence of about {share:.1%}: an empty "
            "class shows in its number of cases, not in a prevalence of 0."
        )
    return out


def _origin(model: LatentClassModel, origin: str) -> str:
    if origin == DEFAULT:
        return ", the default (all splits equally likely)"
    return f" ({origin}{_source(model, origin)})"


def _source(model: LatentClassModel, text: str) -> str:
    source = model.statement_sources.get(text)
    return f" [{source}]" if source else ""


def counted(number: float, one: str, many: str) -> str:
    """Return a number with its word: ``1 class``, ``2.5 cases``."""
    return f"{number:,g} {one if number == 1 else many}"


def _dirichlet(concentration: Iterable[float]) -> str:
    values = [float(a) for a in concentration]
    if len(values) > 6 and len(set(values)) == 1:
        return f"Dirichlet({values[0]:g}, ..., {values[0]:g})"
    return f"Dirichlet({numbers(values)})"


def numbers(values: Iterable[float]) -> str:
    """Return numbers with commas between them, as the notation writes them."""
    return ", ".join(f"{float(value):g}" for value in values)


def _listed(names: Iterable[str], most: int = 8) -> str:
    known = list(names)
    if len(known) <= most:
        return ", ".join(known)
    return f"{', '.join(known[:most])} and {len(known) - most} more"


def _wrapped(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH)


def _indented(text: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="    ")
