"""What is to be known of a regression of class before it is believed."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.findings import Finding
from bayeslca.model.probabilities import membership, response_probability
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.predictors.separation import find_separation
from bayeslca.relate.predictors.ways import WayDraws, against_mean, worst_convergence

if TYPE_CHECKING:
    from bayeslca.relate.predictors.covariates import Design
    from bayeslca.relate.predictors.three_steps import ThreeStepRegression

LEAST_ESS = 400.0
MOST_R_HAT = 1.01
APART = 1.0
"""Ways disagree when a contrast's posterior means are further apart than so many standard
deviations of the cut's."""
MOVED = 0.1
"""Classes were moved when a response probability's mean changed by so much, and by more than its
standard deviation."""
MOSTLY_PRIOR = 0.7
"""A contrast whose posterior standard deviation is above this share of the prior's was hardly
learnt."""
LEAST_ENTROPY = 0.6


def predictor_findings(
    posterior: Posterior,
    design: Design,
    prior_sd: Floats,
    draws: Mapping[str, WayDraws],
    three_steps: ThreeStepRegression | None,
    failure: str | None,
) -> tuple[Finding, ...]:
    """Collect the findings of a regression.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    design : Design
    prior_sd : ndarray, shape (P,)
    draws : mapping of str to WayDraws
    three_steps : ThreeStepRegression or None
    failure : str or None
        Why the three steps gave no result.
    """
    out = [*design.findings, *_groups(posterior, design)]
    out += _convergence(draws)
    if "joint" in draws and "cut" in draws:
        out += _disagreement(posterior, design, draws)
    out += _separation(posterior, design)
    out += _mostly_prior(posterior, design, prior_sd, draws)
    entropy = float(posterior.separation()["median"].iloc[0])
    if entropy < LEAST_ENTROPY:
        out.append(
            Finding(
                "classes_weakly_separated",
                "warning",
                f"the classes are weakly separated (relative entropy {entropy:.2f}), so intervals "
                "of the cut and of the three steps may cover less than they say.",
                remedy="Rely on the joint way, if it shows no direct effects.",
                value=entropy,
            )
        )
    if failure is not None:
        out.append(
            Finding(
                "three_steps_failed",
                "warning",
                f"The three steps gave no result: {failure}",
            )
        )
    return tuple(out)


def _groups(posterior: Posterior, design: Design) -> Iterator[Finding]:
    """Say that prevalences by group are no part of the regression, unless it has the groups."""
    groups = posterior.model.groups
    if groups is None or groups.name in design.covariates:
        return
    yield Finding(
        "groups_not_in_regression",
        "warning" if posterior.model.pooled else "note",
        f"the regression does not know the groups of {groups.name}: cases of one group count as "
        "no more alike than others of the same covariates, so intervals may be too narrow.",
        remedy=f"Where groups are few, add {groups.name} to the formula.",
        about=(groups.name,),
    )


def _convergence(draws: Mapping[str, WayDraws]) -> Iterator[Finding]:
    for way, found in draws.items():
        ess, r_hat = worst_convergence(found.coefficients)
        if ess < LEAST_ESS or r_hat > MOST_R_HAT or found.draws.limit_reached:
            yield Finding(
                "predictors_not_converged",
                "problem",
                f"{way}: the coefficients have not converged (effective draws {ess:,.0f}, R-hat "
                f"{r_hat:.3f}).",
                remedy=(
                    "Where classes are empty or cannot be told apart, take fewer; else sample "
                    "longer, or leave out covariates."
                ),
                about=(way,),
                value=r_hat,
            )


def _disagreement(
    posterior: Posterior, design: Design, draws: Mapping[str, WayDraws]
) -> Iterator[Finding]:
    joint = against_mean(draws["joint"].coefficients)
    cut = against_mean(draws["cut"].coefficients)
    gap = joint.mean(axis=(0, 1)) - cut.mean(axis=(0, 1))
    apart = np.abs(gap) / np.maximum(cut.std(axis=(0, 1)), 1e-12)
    apart[:, 0] = 0.0
    names = posterior.model.class_names
    if float(apart.max()) > APART:
        k, p = np.unravel_index(int(np.argmax(apart)), apart.shape)
        column = design.columns[int(p)].name
        yield Finding(
            "joint_and_cut_disagree",
            "warning",
            f"joint and cut disagree: for {names[int(k)]} and {column} their estimates are "
            f"{apart[k, p]:.1f} standard deviations apart. Covariates change what the classes "
            "are.",
            remedy="See whether items have direct effects, and rely on the cut until then.",
            about=(names[int(k)], column),
            value=float(apart[k, p]),
        )
    yield from _moved_classes(posterior, draws["joint"])


def _moved_classes(posterior: Posterior, joint: WayDraws) -> Iterator[Finding]:
    table = posterior.table
    before = posterior.response_probability_draws
    flat = joint.draws.flat_elements
    after = response_probability(table, flat[:: max(1, len(flat) // 1000)]).mean(axis=0)
    change = after - before.mean(axis=(0, 1))
    moved = np.abs(change) * (np.abs(change) > before.std(axis=(0, 1)))
    if float(moved.max()) <= MOVED:
        return
    g, k, a = np.unravel_index(int(np.argmax(moved)), moved.shape)
    item = int(np.searchsorted(table.item_start, a, side="right")) - 1
    name = posterior.model.items[item].name
    category = posterior.model.items[item].categories[int(a - table.item_start[item])]
    yield Finding(
        "covariates_move_classes",
        "warning",
        f"in the joint way the covariates changed what {posterior.model.class_names[int(k)]} "
        f"looks like: the probability of {name}={category} moved by {change[g, k, a]:+.2f}.",
        remedy="See whether items have direct effects; names were given to the classes before.",
        about=(posterior.model.class_names[int(k)], name),
        value=float(change[g, k, a]),
    )


def _separation(posterior: Posterior, design: Design) -> Iterator[Finding]:
    draws = posterior.draws
    step = max(1, draws.n_chains * draws.n_draws // 200)
    shares = membership(
        posterior.table,
        posterior.unit_table,
        draws.flat_elements[::step],
        draws.flat_prevalence[::step],
    ).mean(axis=0)
    unit = posterior.units.unit_of_row[design.used]
    answered = unit >= 0
    placed = shares.argmax(axis=1)[unit[answered]]
    names = [column.name for column in design.columns]
    found = find_separation(design.matrix[answered], placed, names, shares.shape[1])
    if found is None:
        return
    classes = [posterior.model.class_names[k] for k in found.classes]
    what = "every case" if found.complete else f"some cases of {', '.join(classes)}"
    yield Finding(
        "covariates_separate_classes",
        "warning",
        f"{' and '.join(found.columns) or 'the covariates'} predict the class of {what} without "
        "error as the cases are placed"
        + (" (complete separation)" if found.complete else " (partial separation)")
        + ": odds ratios have no upper bound in these answers, and how large they are here is "
        "the prior's doing.",
        remedy="Read directions and class probabilities, not the size of these odds ratios.",
        about=found.columns,
    )


def _mostly_prior(
    posterior: Posterior, design: Design, prior_sd: Floats, draws: Mapping[str, WayDraws]
) -> Iterator[Finding]:
    n_classes = posterior.model.n_classes
    for way, found in draws.items():
        sd = against_mean(found.coefficients).std(axis=(0, 1))
        # Less the mean over classes, the prior's standard deviation is sqrt(1 - 1 / K) of it.
        share = sd / (prior_sd * np.sqrt(1.0 - 1.0 / n_classes))
        weak = [(k, p) for k, p in np.argwhere(share > MOSTLY_PRIOR) if p > 0]
        if weak:
            where = ", ".join(
                f"{design.columns[p].name} in {posterior.model.class_names[k]}" for k, p in weak[:5]
            )
            more = f" and {len(weak) - 5} more" if len(weak) > 5 else ""
            yield Finding(
                "coefficients_mostly_prior",
                "note",
                f"{way}: little was learnt of {where}{more}; what is said of them is mostly the "
                "prior.",
                remedy="Leave out covariates, join categories, or state a prior that you stand by.",
                about=tuple(dict.fromkeys(design.columns[p].name for _, p in weak)),
                value=float(share[:, 1:].max()),
            )
            return
