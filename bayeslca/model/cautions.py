"""What an analyst should know about a model before sampling it on these responses."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.findings import Finding
from bayeslca.model.compile import compile_units
from bayeslca.model.identifiability import count_free
from bayeslca.model.prior_weights import HEAVY, prior_weights
from bayeslca.model.priors import DEFAULT
from bayeslca.model.support import impossible_units
from bayeslca.responses.units import Units

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses

CASES_PER_PARAMETER = 5
"""Fewer cases than this for each free parameter are pointed out (common practice, no source)."""
CASES_PER_CLASS = 20
"""Groups with fewer cases than this for each class are pointed out."""
FEW_UNITS = 8
"""With fewer pooled units their spread is hardly known (common practice, no source)."""
MOST_NAMED = 5


def model_findings(model: LatentClassModel, responses: Responses) -> tuple[Finding, ...]:
    """Return what should be known of a model before it is sampled on these responses."""
    return (
        *impossible_patterns(model, responses),
        *_not_identified(model, responses),
        *_few_cases(model, responses),
        *_small_groups(model, responses),
        *_heavy_priors(model, responses),
        *_sparse_joint_answers(model, responses),
    )


def impossible_patterns(model: LatentClassModel, responses: Responses) -> tuple[Finding, ...]:
    """Return a finding that names the cases whose answers no class can give, if there are any."""
    units = model.units(responses)
    offending = impossible_units(model.table, compile_units(model.table, units))
    if not offending.size:
        return ()
    rows = np.flatnonzero(np.isin(units.unit_of_row, offending))
    names = tuple(responses.row_names[r] for r in rows)
    answers = _answers(model, units, int(units.unit_of_row[rows[0]]))
    n_cases = int(units.count[offending].sum())
    return (
        Finding(
            kind="impossible_pattern",
            level="problem",
            message=(
                f"{n_cases} case(s) gave answers that the model holds to be impossible in every "
                f"class: {_first(names)} (the first: {answers})."
            ),
            remedy="Check these answers, or give up a statement that fixes a probability at 0.",
            about=names,
            value=float(n_cases),
        ),
    )


def _answers(model: LatentClassModel, units: Units, unit: int) -> str:
    return ", ".join(
        f"{item.name}={item.categories[code]}"
        for item, code in zip(model.items, units.pattern[unit].tolist(), strict=True)
        if code >= 0
    )


def _not_identified(model: LatentClassModel, responses: Responses) -> Iterable[Finding]:
    found = model.identifiability(responses)
    if not found.identified:
        yield Finding(
            kind="not_identified",
            level="warning",
            message=found.message,
            remedy="Use fewer classes or more items, or state what is known of some probabilities.",
            about=found.not_identified,
            value=float(found.n_free - found.rank),
        )


def _few_cases(model: LatentClassModel, responses: Responses) -> Iterable[Finding]:
    n_free, n_cases = (
        count_free(model.table, model.prevalence_source),
        model.units(responses).n_cases,
    )
    if n_cases < CASES_PER_PARAMETER * n_free:
        yield Finding(
            kind="few_cases",
            level="note",
            message=(
                f"{n_cases:,} cases for {n_free} free parameters are "
                f"{n_cases / n_free:.1f} cases each: expect wide intervals."
            ),
            remedy="Fewer classes, or priors from other studies, make the answer firmer.",
            value=n_cases / n_free,
        )


def _small_groups(model: LatentClassModel, responses: Responses) -> Iterable[Finding]:
    if model.groups is None:
        return
    units = model.units(responses)
    sizes = np.bincount(units.group, weights=units.count, minlength=model.n_groups)
    if model.pooled:
        yield from _few_units(model, int(np.sum(sizes > 0)))
        return
    for level, size in zip(model.groups.levels, sizes, strict=True):
        if size < CASES_PER_CLASS * model.n_classes:
            yield Finding(
                kind="small_group",
                level="warning",
                message=(
                    f"{model.groups.name} '{level}' has {size:.0f} cases, fewer than "
                    f"{CASES_PER_CLASS} for each of {model.n_classes} classes: its prevalences "
                    "will be unsure."
                ),
                remedy="Join small groups, or read their prevalences with their intervals.",
                about=(level,),
                value=float(size),
            )


def _few_units(model: LatentClassModel, n_units: int) -> Iterable[Finding]:
    """Yield a finding where so few units are pooled that how much they differ is hardly known."""
    if n_units < FEW_UNITS and model.groups is not None:
        yield Finding(
            kind="few_units",
            level="note",
            message=(
                f"{n_units} units ({model.groups.name}) with cases are pooled: how much units "
                f"differ is hardly known from fewer than {FEW_UNITS}, so the prior on the spread "
                "counts."
            ),
            remedy="Look at posterior.spread_sensitivity(), which tries other priors.",
            value=float(n_units),
        )


def _heavy_priors(model: LatentClassModel, responses: Responses) -> Iterable[Finding]:
    heavy = [weight for weight in prior_weights(model, responses) if weight.heavy]
    for items in dict.fromkeys(weight.items for weight in heavy):
        ours = [weight for weight in heavy if weight.items == items]
        heaviest = max(ours, key=lambda weight: weight.ratio or 0.0)
        classes = tuple(dict.fromkeys(name for weight in ours for name in weight.classes))
        yield Finding(
            kind="heavy_prior",
            level="warning",
            message=(
                f"The prior on '{', '.join(items)}' in {_classes(classes)} counts for "
                f"{round(heaviest.weight, 1):,g} cases, against about {heaviest.expected:.0f} "
                f"expected answers (more than {HEAVY:.0%})."
            ),
            remedy=(
                "Merge rare categories, or say in the report that this rests on the prior."
                if heaviest.origin == DEFAULT
                else "Say in the report that this rests on the prior, or state a weaker one."
            ),
            about=(*items, *classes),
            value=heaviest.ratio,
        )


def _sparse_joint_answers(model: LatentClassModel, responses: Responses) -> Iterable[Finding]:
    """Point out sets with few cases for each joint answer, in the smallest class expected."""
    found = [weight for weight in prior_weights(model, responses) if weight.together]
    for items in dict.fromkeys(weight.items for weight in found):
        fewest = min(
            (weight for weight in found if weight.items == items),
            key=lambda weight: weight.expected or 0.0,
        )
        n_joint = len(fewest.concentration)
        each = (fewest.expected or 0.0) / n_joint
        if each < CASES_PER_PARAMETER:
            yield Finding(
                kind="sparse_joint_answers",
                level="warning",
                message=(
                    f"{', '.join(items)} have {n_joint} joint answers, against about "
                    f"{fewest.expected:.0f} cases expected in class {fewest.classes[0]}: "
                    f"{each:.1f} for each. How they go together there rests on the prior."
                ),
                remedy="Take fewer items or classes into the set, or merge rare answers.",
                about=items,
                value=each,
            )


def _classes(names: tuple[str, ...]) -> str:
    return f"class {names[0]}" if len(names) == 1 else f"classes {_first(names)}"


def _first(names: tuple[str, ...]) -> str:
    shown = ", ".join(names[:MOST_NAMED])
    return shown if len(names) <= MOST_NAMED else f"{shown} and {len(names) - MOST_NAMED} more"
