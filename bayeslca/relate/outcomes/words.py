"""What was noticed about an outcome, and what was assumed of it, in words."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.findings import Finding
from bayeslca.posterior.class_state import class_state
from bayeslca.posterior.tables import OVERALL
from bayeslca.relate.outcomes.checks import MISSED
from bayeslca.relate.outcomes.quantities import EFFECTS, class_means
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    NORMAL,
)

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes

FEWEST = 5.0
"""Fewer expected cases than this are too few for a class's mean."""
APART = 1.0
"""Joint and cut disagree when a class mean differs by more standard deviations of the cut."""
FAR_APART = 3.0
"""Cut and inverse error matrix disagree when they differ by more standard errors of the latter."""
MANY_MOVED = 0.1
"""Share of cases whose modal class changes in the joint way, above which it is a warning."""
WEAK = 0.5
"""Relative entropy below which the corrections of three steps are known to be biased."""

WAY_WORDS = {
    "joint": "joint",
    "cut": "cut",
    "inverse_error_matrix": "three steps, inverse error matrix",
    "fixed_error_likelihood": "three steps, fixed error likelihood",
}
MEAN_WORDS = {
    "numeric": "mean",
    "count": "mean",
    "binary": "probability of yes",
    "ordered": "mean place",
}


def outcome_findings(
    posterior: Posterior, found: ClassOutcomes, stopped: Mapping[str, str]
) -> tuple[Finding, ...]:
    """Return what was noticed about an outcome and its relation to class."""
    return (
        *_about_covariates(found),
        *_about_classes(posterior, found),
        *_about_sampling(found),
        *_about_joint(found),
        *_about_density(found),
        *_about_three_steps(posterior, found, stopped),
        *_about_checks(found),
    )


def _about_covariates(found: ClassOutcomes) -> Iterator[Finding]:
    gone = found.outcome.seen & ~found.model.seen
    if gone.any():
        names = tuple(found.case_names[i] for i in np.flatnonzero(gone).tolist())
        yield Finding(
            kind="covariate_missing",
            level="warning",
            message=f"{len(names):,} of {len(found.case_names):,} cases have "
            f"{found.outcome.text} but miss a covariate of {found.adjusted_for!r}: they keep their "
            "answers, and say nothing of the outcome.",
            remedy="Fill the covariates in, or adjust for fewer.",
            about=names,
            value=float(len(names)),
        )


def _about_classes(posterior: Posterior, found: ClassOutcomes) -> Iterator[Finding]:
    few = found.expected_cases < FEWEST
    for k in np.flatnonzero(few).tolist():
        yield Finding(
            kind="few_cases_in_class",
            level="warning",
            message=f"about {found.expected_cases[k]:.1f} cases with {found.outcome.text} are in "
            f"class {found.class_names[k]}: its mean rests on the prior as much as on them.",
            remedy="Read it with its interval, or join classes.",
            about=(found.class_names[k],),
            value=float(found.expected_cases[k]),
        )
    state = class_state(posterior.table, posterior.unit_table, posterior.draws)
    for a, b in state.twins:
        yield Finding(
            kind="outcome_of_twins",
            level="warning",
            message=f"classes {found.class_names[a]} and {found.class_names[b]} claim the same "
            "cases, so what follows from one cannot be told from what follows from the other.",
            remedy="Fewer classes would do; read them as one.",
            about=(found.class_names[a], found.class_names[b]),
        )


def _about_sampling(found: ClassOutcomes) -> Iterator[Finding]:
    joint = found.drawn.get("joint")
    if joint is not None and joint.limit_reached:
        yield Finding(
            kind="outcome_not_converged",
            level="problem",
            message=f"the joint model of answers and {found.outcome.text} did not reach the "
            f"stopping rule in {joint.sweeps:,} sweeps of each chain.",
            remedy="Rely on the cut, or raise max_sweeps.",
            about=(found.outcome.name,),
        )


def _about_joint(found: ClassOutcomes) -> Iterator[Finding]:
    if "joint" not in found.drawn or "cut" not in found.drawn:
        return
    joint, cut = (
        class_means(found.model, found.drawn[way].by_class, found.drawn[way].shared)
        for way in ("joint", "cut")
    )
    gap = joint.mean(axis=(0, 1)) - cut.mean(axis=(0, 1))
    apart = np.abs(gap) / np.maximum(cut.std(axis=(0, 1)), 1e-300)
    moved = found.membership_moved()
    share = float(moved["changed"].mean())
    worst = int(apart.argmax())
    if apart[worst] > APART or share > MANY_MOVED:
        name = found.class_names[worst]
        yield Finding(
            kind="outcome_shapes_classes",
            level="warning",
            message=f"{found.outcome.text} changes the classes in the joint way: "
            f"{100 * share:.0f} % of cases are placed in another class than by the cut, "
            f"and the {_mean(found)} of {name} differs by {gap[worst]:.2g} "
            f"({apart[worst]:.1f} standard deviations).",
            remedy=(
                "Report the cut, unless the outcome is meant to define the classes; a misfit of "
                "the outcome's distribution does this too (see the check)."
            ),
            about=(found.outcome.name, name),
            value=share,
        )


def _about_density(found: ClassOutcomes) -> Iterator[Finding]:
    """Compare the cut with the correction that trusts no density of the outcome."""
    steps = found.steps.get("inverse_error_matrix")
    if steps is None or "cut" not in found.drawn:
        return
    cut = class_means(found.model, found.drawn["cut"].by_class, found.drawn["cut"].shared)
    estimate, error = steps.quantities(class_means)
    gap = cut.mean(axis=(0, 1)) - estimate
    apart = np.abs(gap) / np.maximum(error, 1e-300)
    worst = int(apart.argmax())
    if apart[worst] > FAR_APART:
        yield Finding(
            kind="ways_disagree",
            level="warning",
            message=f"the {_mean(found)} of {found.outcome.text} in class "
            f"{found.class_names[worst]} differs by {gap[worst]:.3g} between the cut and the "
            "three steps with the inverse error matrix, which trusts no distribution of "
            "the outcome.",
            remedy="The outcome's distribution is probably wrong: see its check.",
            about=(found.outcome.name, found.class_names[worst]),
            value=float(apart[worst]),
        )


def _about_three_steps(
    posterior: Posterior, found: ClassOutcomes, stopped: Mapping[str, str]
) -> Iterator[Finding]:
    for correction, why in stopped.items():
        yield Finding(
            kind="three_steps_stopped",
            level="warning",
            message=f"{WAY_WORDS[correction]}: {why}",
            about=(found.outcome.name, correction),
        )
    if found.steps:
        entropy = float(posterior.separation()["mean"].iloc[0])
        if entropy < WEAK:
            yield Finding(
                kind="weak_separation",
                level="warning",
                message=f"classes are weakly separated (relative entropy {entropy:.2f}): "
                "three-step estimates are then biased towards each other and their "
                "intervals too short.",
                remedy="Report the cut.",
                value=entropy,
            )


def _about_checks(found: ClassOutcomes) -> Iterator[Finding]:
    checks = found.checks
    way = "cut" if "cut" in found.drawn else next(iter(found.drawn), "")
    if not way:
        return
    mine = checks[(checks["way"] == way) & (checks["p"] < MISSED)]
    if len(mine):
        worst = mine.to_dict("records")[int(np.argmin(mine["p"].to_numpy()))]
        where = "" if worst["latent_class"] == OVERALL else f" in class {worst['latent_class']}"
        remedy = {
            "numeric": "Take a transformed outcome (such as its log), or treat it as ordered.",
            "count": "Take the negative binomial, or treat the outcome as ordered.",
        }.get(found.outcome.kind, "See the table of checks.")
        yield Finding(
            kind="outcome_misfit",
            level="warning",
            message=f"the model of {found.outcome.text} does not give values like those observed: "
            f"{worst['feature']}{where} is {worst['observed']:.3g}, replicates have "
            f"{worst['lower']:.3g} to {worst['upper']:.3g}.",
            remedy=remedy,
            about=(found.outcome.name,),
            value=float(worst["p"]),
        )


def _plain(number: float) -> str:
    """Return three digits without a power of ten: ``3,220``, not ``3.22e+03``."""
    rounded = float(f"{number:.3g}")
    return f"{rounded:,.0f}" if 1000 <= abs(rounded) < 1e9 else f"{rounded:g}"


def _mean(found: ClassOutcomes) -> str:
    return MEAN_WORDS[found.outcome.kind]


def priors_in_words(found: ClassOutcomes) -> tuple[str, ...]:
    """Return the priors of an outcome's parameters, a sentence each."""
    prior, model = found.model.prior, found.model
    out = []
    if model.form == NORMAL:
        out += [
            f"class means: normal around {_plain(prior.location[0])} with standard deviation "
            f"{_plain(prior.location[1])} (mean and 2.5 standard deviations of all cases)",
            f"variances{' (one for all classes)' if model.equal_spread else ''}: inverse "
            f"chi-square worth {prior.spread[0]:g} case of variance {_plain(prior.spread[1])} (a "
            "quarter of that of all cases)",
        ]
    elif model.form == BERNOULLI:
        out.append("probabilities of yes: uniform (worth two cases per class)")
    elif model.form == CATEGORICAL:
        out.append(
            f"categories: Dirichlet with {prior.pseudo[0]:.2g} each (worth two cases per class)"
        )
    elif found.outcome.kind == "count" and not found.adjusted_for:
        out.append(
            f"class means: gamma worth {prior.pseudo[0]:g} events in {prior.pseudo[1]:.2g} cases "
            "(the mean of all cases)"
        )
    else:
        what = "shifts" if model.form == CUMULATIVE else "intercepts"
        out.append(
            f"class {what} on the scale of the link: normal around {prior.location[0]:.2g} with "
            f"standard deviation {prior.location[1]:g}"
        )
        if model.form == CUMULATIVE:
            out.append(
                f"thresholds: normal around those of all cases with standard deviation "
                f"{prior.location[1]:g}, in order"
            )
    if model.has_spread and found.outcome.kind == "count":
        out.append("sizes of the negative binomial: log-normal around 1, from 0.05 to 19 in 95 %")
    if model.n_slopes:
        shown = ", ".join(
            f"{_plain(sd)} for {name}"
            for name, sd in zip(found.covariate_names, prior.slope_sd, strict=True)
        )
        out.append(f"slopes: normal around 0 with standard deviations {shown}")
    out.append("the same for all classes, so no class is favoured beforehand")
    return tuple(out)


def as_terminal_text(found: ClassOutcomes) -> str:
    """Return the tables and findings as text for a terminal of 80 columns."""
    frame = found.means()
    level = 100 * frame.attrs["interval"]
    lines = [
        f"What follows from class: {found.outcome.text} ({found.outcome.kind}"
        + (f", {found.count_model.replace('_', ' ')}" if found.count_model else "")
        + (f", adjusted for {found.adjusted_for}" if found.adjusted_for else "")
        + f"; {int(found.model.seen.sum()):,} cases)",
        "",
        f"{MEAN_WORDS[found.outcome.kind].capitalize()} by class ({level:g} % intervals)",
    ]
    width = max(19, *map(len, found.class_names))
    for way in found.ways:
        mine = frame[frame["way"] == way]
        lines.append(f"  {WAY_WORDS[way]}")
        lines += [
            f"    {row.latent_class:<{width}} {row.median:>9.3g} "
            f"({row.lower:.3g} to {row.upper:.3g})"
            if np.isfinite(float(row.median))  # type: ignore[arg-type]
            else f"    {row.latent_class:<{width}} no estimate"
            for row in mine.itertuples()
        ]
    lines += ["", f"Differences, with their effect ({EFFECTS[found.outcome.kind]}): .differences()"]
    lines += [f"! {one.message}" for one in found.findings if one.level != "note"]
    return "\n".join(lines)
