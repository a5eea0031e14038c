"""Whether the sampling is to be trusted: what was found, a table, and a verdict in words."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.convergence.modes import SAME_MEMBERSHIP, ChainAgreement, chain_agreement
from bayeslca.assess.convergence.table import (
    AGREE,
    ENOUGH,
    diagnostics_table,
    not_met,
    worst_of,
)
from bayeslca.assess.convergence.words import convergence_html, convergence_text, verdict_in_words
from bayeslca.findings import Finding
from bayeslca.model.simulate import Parameters
from bayeslca.posterior.class_state import ClassState, class_state

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

APART = 1.05
"""R-hat above which chains with different memberships are said to be in different modes."""


@dataclass(frozen=True, eq=False, repr=False)
class Diagnostics:
    """Whether the sampling is to be trusted.

    Attributes
    ----------
    findings : tuple of Finding
        What was noticed, problems first. A problem means: not to be trusted.
    table : DataFrame
        A row per reported quantity with the keys ``quantity, group, latent_class, item,
        category, note`` (empty where they do not apply), then ``mean, sd, mcse, ess_bulk,
        ess_tail, r_hat``. ``note`` is "constant", "empty class" or "not told apart" where the
        row does not count for the verdict.
    verdict : str
        One short paragraph.
    trustworthy : bool
        False when there is a problem.
    """

    findings: tuple[Finding, ...]
    table: pd.DataFrame
    verdict: str
    trustworthy: bool

    def __repr__(self) -> str:
        return convergence_text(self.verdict, self.findings)

    def _repr_html_(self) -> str:
        return convergence_html(self.verdict, self.findings)


def diagnose(posterior: Posterior) -> Diagnostics:
    """Judge the sampling of a posterior.

    R-hat (rank-normalised, split) of at most 1.01 and bulk and tail effective sample sizes of at
    least 100 per chain are asked of every reported quantity (Vehtari, Gelman, Simpson, Carpenter
    & Bürkner 2021, Bayesian Analysis 16, 667-718). Constants, and quantities of classes that are
    empty or not told apart from another, are reported but not asked.

    Parameters
    ----------
    posterior : Posterior
    """
    state = class_state(posterior.table, posterior.unit_table, posterior.draws)
    table = diagnostics_table(posterior, state)
    agreement = chain_agreement(posterior)
    worst = worst_of(table, posterior.draws.n_chains)
    found = [
        *_about_chains(posterior, table, agreement),
        *_about_starts(posterior),
        *_about_classes(posterior, state),
        *posterior.relabelled.findings,
        *_about_the_model(posterior, state),
    ]
    order = {"problem": 0, "warning": 1, "note": 2}
    findings = tuple(sorted(found, key=lambda finding: order[finding.level]))
    trustworthy = all(finding.level != "problem" for finding in findings)
    verdict = verdict_in_words(findings, worst, trustworthy=trustworthy)
    return Diagnostics(findings, table, verdict, trustworthy)


def _about_chains(
    posterior: Posterior, table: pd.DataFrame, agreement: ChainAgreement
) -> Iterator[Finding]:
    """Yield what the chains themselves show."""
    draws = posterior.draws
    late = not_met(table, draws.n_chains)
    worst = worst_of(table, posterior.draws.n_chains)
    apart = worst.r_hat > APART and agreement.divergence > SAME_MEMBERSHIP
    if apart:
        yield Finding(
            kind="chains_in_different_modes",
            level="problem",
            message=(
                "the chains are in different modes: after relabelling they still place cases "
                f"differently (divergence {agreement.divergence:.3f} per case, R-hat "
                f"{worst.r_hat:.2f} of {worst.r_hat_of}), and their mean log likelihoods lie "
                f"{agreement.gap:.1f} nats apart"
            ),
            remedy="Fewer classes, stronger priors, or more short runs and longer chains.",
            value=agreement.divergence,
        )
    if len(late):
        yield Finding(
            kind="not_converged",
            level="problem",
            message=(
                f"{len(late)} of {int((table['note'] == '').sum())} quantities have not "
                f"converged: R-hat up to {worst.r_hat:.3f} ({worst.r_hat_of}), effective sample "
                f"size down to {worst.ess:,.0f} ({worst.ess_of})"
            ),
            remedy=f"Sample longer: R-hat of at most {AGREE} and {ENOUGH} effective draws per "
            "chain are asked.",
            about=tuple(late),
            value=worst.r_hat,
        )
    elif draws.limit_reached:
        yield Finding(
            kind="limit_reached",
            level="warning",
            message=(
                f"the limit of sweeps was reached ({draws.sweeps:,} per chain) before the "
                "stopping rule was met"
            ),
            remedy="Raise max_sweeps if the simulation error in the tables is too large.",
            value=float(draws.sweeps),
        )
    if not apart and agreement.raw_r_hat > APART >= agreement.r_hat:
        yield Finding(
            kind="label_switching",
            level="note",
            message=(
                "the chains named the classes differently while sampling (R-hat "
                f"{_number(agreement.raw_r_hat)} before relabelling, "
                f"{_number(agreement.r_hat)} after), which is harmless"
            ),
            value=agreement.raw_r_hat,
        )
    if draws.n_chains == 1:
        yield Finding(
            kind="one_chain",
            level="problem",
            message="with a single chain there is no R-hat, and different modes cannot be seen",
            remedy="Sample with chains=4.",
            value=1.0,
        )
    yield from _about_nuts(posterior)


def _about_nuts(posterior: Posterior) -> Iterator[Finding]:
    draws = posterior.draws
    diverging = int(np.sum(draws.statistics.get("diverging", np.zeros(1))))
    if diverging:
        yield Finding(
            kind="divergences",
            level="problem",
            message=f"{diverging:,} of {draws.n_chains * draws.n_draws:,} NUTS draws diverged",
            remedy="Use sampler='gibbs' where it can be used, or a higher target_accept.",
            value=float(diverging),
        )
    if draws.sampler == "nuts":
        from bayeslca.sampling.nuts import nuts_findings

        yield from nuts_findings(posterior.model.symmetry)


def _about_starts(posterior: Posterior) -> Iterator[Finding]:
    """Yield what the short runs before the chains found (rule: dropped modes are always said)."""
    starts = posterior.draws.starts
    if starts is None:
        return
    if starts.shares:
        shares = " and ".join(
            f"{100 * share:.1f} % (± {100 * error:.1f})"
            for share, error in zip(starts.shares, starts.share_errors, strict=True)
        )
        yield Finding(
            kind="modes_mixed",
            level="warning",
            message=(
                f"chains stayed in {len(starts.shares)} modes of the posterior; by their "
                f"evidence these hold {shares} of it, and the draws mix them in that proportion "
                f"({starts.in_words()})"
            ),
            remedy="A summary of several modes may describe none of them: look at both.",
            value=float(starts.n_modes),
        )
    elif starts.n_modes > 1:
        why = f" ({starts.why_unweighed})" if starts.why_unweighed else ""
        yield Finding(
            kind="several_modes",
            level="problem",
            message=(
                f"several modes, weights unknown{why}: there are {starts.n_modes} modes within "
                f"{starts.reach:g} nats of the best, and chains do not move between them"
            ),
            remedy=(
                "Fewer classes or stronger priors; what the report gives mixes these modes in "
                "the proportion of their chains."
            ),
            value=float(starts.n_modes),
        )
    if starts.dropped and not starts.shares:
        yield Finding(
            kind="modes_dropped",
            level="note",
            message=starts.in_words(),
            value=float(len(starts.dropped)),
        )


def _about_classes(posterior: Posterior, state: ClassState) -> Iterator[Finding]:
    """Yield empty classes and classes that are one and the same."""
    names = posterior.model.class_names
    if state.empty:
        listed = tuple(names[k] for k in state.empty)
        is_empty = (
            "is empty: in most draws it holds"
            if len(listed) == 1
            else ("are empty: in most draws each holds")
        )
        yield Finding(
            kind="empty_class",
            level="warning",
            message=f"{_classes(listed)} {is_empty} less than one expected case",
            remedy="Fewer classes would do; what such a class looks like is its prior.",
            about=listed,
            value=float(len(listed)),
        )
    for alike in _joined(state.twins):
        listed = tuple(names[k] for k in sorted(alike))
        yield Finding(
            kind="duplicate_classes",
            level="warning",
            message=f"{_classes(listed)} are not told apart: they claim the same cases",
            remedy="Fewer classes would do; read them as one.",
            about=listed,
        )


def _about_the_model(posterior: Posterior, state: ClassState) -> Iterator[Finding]:
    """Yield what the answers cannot determine, at all or near the estimate."""
    draws, model = posterior.draws, posterior.model
    if len(model.symmetry.named_group.group_sets) > 1:
        yield Finding(
            kind="classes_not_matched",
            level="warning",
            message=(
                "groups share no response probabilities, so a class of one group need not be the "
                "class of that name in another: classes are called by falling prevalence in each "
                "group, and what is said of a class overall means little"
            ),
            remedy="Name the classes by a rule, or let groups share some items.",
        )
    estimate = Parameters(draws.elements.mean(axis=(0, 1)), draws.prevalence.mean(axis=(0, 1)))
    found = model.identifiability(posterior.responses, estimate=estimate)
    if not found.identified:
        yield Finding(
            kind="not_identified",
            level="warning",
            message=(
                f"the answers cannot determine all of the model ({found.n_free} free parameters, "
                f"of which they determine {found.rank}): the rest is what the priors say"
            ),
            remedy="Fewer classes, more items, or priors with a source.",
            about=found.not_identified,
            value=float(found.n_free - found.rank),
        )
    elif found.weak and not state.unsteady:
        yield Finding(
            kind="weakly_identified",
            level="note",
            message=(
                "near the estimate the cases say less than a uniform prior would about some "
                "combination of " + _some(found.weak_parameters)
            ),
            remedy="Read these quantities with their priors in mind.",
            about=found.weak_parameters,
        )


def _joined(pairs: Iterable[tuple[int, int]]) -> list[set[int]]:
    """Join pairs that share a class."""
    groups: list[set[int]] = []
    for pair in pairs:
        touching = [group for group in groups if group & set(pair)]
        groups = [group for group in groups if group not in touching]
        groups.append(set(pair).union(*touching))
    return groups


def _classes(names: tuple[str, ...]) -> str:
    if len(names) == 1:
        return f"class {names[0]}"
    return "classes " + ", ".join(names[:-1]) + " and " + names[-1]


def _some(names: tuple[str, ...], most: int = 4) -> str:
    more = len(names) - most
    return ", ".join(names[:most]) + (f" and {more} more" if more > 0 else "")


def _number(value: float) -> str:
    return f"{value:.2f}" if np.isfinite(value) else "without limit"
