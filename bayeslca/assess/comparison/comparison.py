"""A comparison: models by how well they predict the answers of cases."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Ints, Seed
from bayeslca.assess.class_count.class_counts import ClassCounts, PriorOnCount, class_counts
from bayeslca.assess.comparison.information_criteria import PointwiseElpd, difference, waic
from bayeslca.assess.comparison.stacking import stacking_weights
from bayeslca.assess.comparison.words import (
    Name,
    comparison_html,
    comparison_text,
    row_in_words,
    verdict_in_words,
)
from bayeslca.assess.evidence.log_evidence import Evidence, Tell, log_evidence
from bayeslca.assess.left_out.exact_loo import left_out
from bayeslca.assess.left_out.fold_comparison import FoldComparison, compared_by_folds
from bayeslca.assess.left_out.folds import model_unit
from bayeslca.assess.left_out.refits import why_no_refit
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.tables import OVERALL
from bayeslca.sampling.progress import Show

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.class_count.averaged import Averaged
    from bayeslca.assess.class_count.counts_under_other_priors import CountsUnderOtherPriors
    from bayeslca.assess.comparison.progress import FitProgress

TIE = 4.0
"""A smaller difference in elpd is a tie, whatever its standard error (Sivula et al. 2020)."""
TIE_ERRORS = 2.0
"""So is one within so many standard errors."""
FEW_CASES = 100
"""With fewer the standard error of a difference is known to be too small (same source)."""


@dataclass(frozen=True, eq=False, repr=False)
class Comparison:
    """Models compared by how well they predict the answers of cases.

    Attributes
    ----------
    table : DataFrame
        A row per model, in the order given; the index is the number of classes or the name.

        ========================== ====================================================
        elpd, elpd_se, elpd_mcse   leave-one-out accuracy, its error over cases, and its
                                   Monte Carlo error
        p_loo                      effective number of parameters
        elpd_diff, elpd_diff_se    difference from the best (0 or less) and its error
        tied                       True within 4, or within two errors, of the best
        weight                     stacking weight; they sum to 1
        pareto_k_high              cases whose leave-one-out figure is not reliable
        refitted                   distinct patterns that were refitted without one of their cases
        waic, waic_se, p_waic      the widely applicable criterion, on the elpd scale
        smallest_class             median prevalence of the smallest class
        smallest_lower, _upper     its 95 % interval
        smallest_cases             the median times the number of cases
        separation                 relative entropy (median); nan with one class
        trustworthy                whether the sampling is to be trusted
        log_evidence               log marginal likelihood; nan where it is not reliable
        log_evidence_mcse          its Monte Carlo standard error
        probability                of the number of classes, given the answers; nan for
                                   models that are not a number of classes
        ========================== ====================================================
    posteriors : dict
        Each row's posterior.
    loo, waic : dict of PointwiseElpd
        Each row's accuracy by unit of the responses.
    verdict : str
        What the comparison says, in words. Never a choice: a tie is called a tie.
    findings : tuple of Finding
    best : int or str
        The row with the highest ``elpd``.
    evidence : dict of Evidence
        Each row's log evidence, or why it is not reliable.
    class_counts : ClassCounts or None
        How probable each number of classes is; None where the rows are not numbers of classes.
    folds : FoldComparison or None
        The rows compared by K-fold; None where that was not asked for.
    """

    table: pd.DataFrame
    posteriors: dict[Name, Posterior]
    loo: dict[Name, PointwiseElpd]
    waic: dict[Name, PointwiseElpd]
    verdict: str
    findings: tuple[Finding, ...]
    best: Name
    evidence: dict[Name, Evidence] = field(default_factory=dict)
    class_counts: ClassCounts | None = None
    folds: FoldComparison | None = None

    @property
    def tied(self) -> tuple[Name, ...]:
        """The rows that the answers do not tell from the best, itself among them."""
        return tuple(self.table.index[self.table["tied"]])

    def averaged(self) -> Averaged:
        """Return the posterior averaged over the number of classes, for label-free quantities.

        Raises
        ------
        ModelError
            When the rows are no numbers of classes, or their probabilities are not reliable.
        """
        from bayeslca.assess.class_count.averaged import averaged

        if self.class_counts is None:
            msg = "only numbers of classes are averaged over, and none were compared here."
            raise ModelError(msg)
        by_count = {n: one for n, one in self.posteriors.items() if isinstance(n, int)}
        return averaged(self.class_counts, by_count)

    def under_other_priors(
        self,
        names: Sequence[str] = ("half as strong", "twice as strong"),
        *,
        seed: Seed = None,
        progress: bool | Callable[[FitProgress], None] = True,
        **sampling: Any,
    ) -> CountsUnderOtherPriors:
        """Return how probable each number of classes is under other priors; all are refitted.

        Parameters
        ----------
        names : sequence of str
            Of "half as strong", "twice as strong", "uniform", "Jeffreys".
        seed, progress, **sampling
            As in `bayeslca.compare_class_counts`.

        Raises
        ------
        ModelError
            When the rows are no numbers of classes, or a prior is not known.
        """
        from bayeslca.assess.class_count.counts_under_other_priors import (
            counts_of,
            counts_under_other_priors,
        )

        by_count = {n: one for n, one in self.posteriors.items() if isinstance(n, int)}
        return counts_under_other_priors(
            counts_of(self.class_counts), by_count, names, seed=seed, progress=progress, **sampling
        )

    def __repr__(self) -> str:
        return comparison_text(self.table, self.verdict, [f.message for f in self.findings])

    def _repr_html_(self) -> str:
        return comparison_html(self.table, self.verdict, [f.message for f in self.findings])


def comparison_of(
    posteriors: dict[Name, Posterior],
    index: str,
    prior: PriorOnCount | None = None,
    *,
    exact: bool | None = None,
    folds: int = 0,
    progress: Callable[[Name], bool | Show] = lambda name: False,
    tell: Tell | None = None,
) -> Comparison:
    """Compare fitted models of the same answers.

    Parameters
    ----------
    posteriors : dict from int or str to Posterior
    index : str
        What the rows' names are: "classes" or "model".
    prior : mapping from int to float, optional
        Prior weight of each number of classes; all equal when left out.
    exact : bool, optional
        See `bayeslca.assess.left_out.exact_loo.leave_one_out`.
    folds : int
        0: no K-fold.
    progress : callable
        Given a row's name, returns who is told how far its refits are.
    tell : callable, optional
        Told how much of the evidences, 0 to 1, is done.
    """
    loo, widely, missing = {}, {}, {}
    for name, posterior in posteriors.items():
        loo[name], widely[name], missing[name] = _criteria(posterior, exact, progress(name))
    best = max(loo, key=lambda name: loo[name].elpd)
    by_count = {name: one for name, one in posteriors.items() if isinstance(name, int)}
    counts = class_counts(by_count, prior=prior, tell=tell) if by_count else None
    joined = {} if counts is None else counts.evidence
    evidence: dict[Name, Evidence] = {
        name: joined[name] if isinstance(name, int) else log_evidence(posterior)
        for name, posterior in posteriors.items()
    }
    table = _with_evidence(_table(posteriors, loo, widely, best, index), evidence, counts)
    verdict = verdict_in_words(table, best)
    if counts is not None and len(by_count) > 1:
        verdict += " " + counts.verdict
    return Comparison(
        table=table,
        posteriors=posteriors,
        loo=loo,
        waic=widely,
        verdict=verdict,
        findings=(
            *_findings(table, loo[best].n_cases, missing),
            *_known_units(posteriors),
            *_evidence_findings(evidence),
            *_design_findings(posteriors),
        ),
        best=best,
        evidence=evidence,
        class_counts=counts,
        folds=compared_by_folds(posteriors, index, folds, progress) if folds else None,
    )


def is_tie(gap: float, error: float) -> bool:
    """Return whether a difference in elpd is too small to tell: below 4, or within two errors."""
    return abs(gap) < TIE or abs(gap) <= TIE_ERRORS * error


def _criteria(
    posterior: Posterior, exact: bool | None, progress: bool | Show
) -> tuple[PointwiseElpd, PointwiseElpd, str]:
    """Return leave-one-out and WAIC by unit of the responses (groups told apart).

    And why patterns that should have been refitted were not.
    """
    exact = None if exact and why_no_refit(posterior) else exact  # then said where it matters
    found = left_out(posterior, exact, None, None, progress, None)
    widely = waic(posterior.log_likelihood_draws, posterior.unit_table.count)
    of_unit, fine = model_unit(posterior), posterior.responses.units.count
    return (
        _by_fine_unit(found.loo, of_unit, fine),
        _by_fine_unit(widely, of_unit, fine),
        (found.no_refit),
    )


def _by_fine_unit(one: PointwiseElpd, of_unit: Ints, counts: Ints) -> PointwiseElpd:
    """Give each unit of the responses what the model's unit has."""
    return replace(
        one,
        counts=counts,
        pointwise=one.pointwise[of_unit],
        p_pointwise=one.p_pointwise[of_unit],
        pareto_k=None if one.pareto_k is None else one.pareto_k[of_unit],
        weight_ess=None if one.weight_ess is None else one.weight_ess[of_unit],
        refitted=None if one.refitted is None else one.refitted[of_unit],
        settled=None if one.settled is None else one.settled[of_unit],
    )


def _table(
    posteriors: Mapping[Name, Posterior],
    loo: Mapping[Name, PointwiseElpd],
    widely: Mapping[Name, PointwiseElpd],
    best: Name,
    index: str,
) -> pd.DataFrame:
    import pandas as pd

    pointwise = np.stack([one.pointwise for one in loo.values()])
    weights = stacking_weights(pointwise, loo[best].counts)
    rows = []
    for (name, posterior), weight in zip(posteriors.items(), weights, strict=True):
        gap, error = difference(loo[name], loo[best])
        rows.append(
            {
                "elpd": loo[name].elpd,
                "elpd_se": loo[name].se,
                "elpd_mcse": loo[name].mcse,
                "p_loo": loo[name].p,
                "elpd_diff": gap,
                "elpd_diff_se": 0.0 if name == best else error,
                "tied": name == best or is_tie(gap, error),
                "weight": float(weight),
                "pareto_k_high": loo[name].n_unreliable,
                "refitted": loo[name].n_refitted,
                "waic": widely[name].elpd,
                "waic_se": widely[name].se,
                "p_waic": widely[name].p,
                **_smallest_class(posterior),
                "separation": float(posterior.separation()["median"].iloc[0]),
                "trustworthy": posterior.diagnostics().trustworthy,
            }
        )
    names = pd.Index(list(posteriors), name=index)
    return pd.DataFrame(rows, index=names)


def _with_evidence(
    table: pd.DataFrame, evidence: Mapping[Name, Evidence], counts: ClassCounts | None
) -> pd.DataFrame:
    """Add the log evidences, and the probabilities of numbers of classes."""
    good = {name: one for name, one in evidence.items() if one.reliable}
    chance = {} if counts is None else counts.table["probability"].to_dict()
    rows = list(table.index)
    table["log_evidence"] = [good[n].log_evidence if n in good else np.nan for n in rows]
    table["log_evidence_mcse"] = [good[n].mcse if n in good else np.nan for n in rows]
    table["probability"] = [chance.get(n, np.nan) for n in rows]
    return table


def _evidence_findings(evidence: Mapping[Name, Evidence]) -> tuple[Finding, ...]:
    found = []
    for name, one in evidence.items():
        if not one.reliable:
            found.append(
                Finding(
                    kind="evidence_not_reliable",
                    level="warning",
                    message=f"The evidence of {row_in_words(name)} is not reliable: {one.reason}.",
                    remedy="Sample longer (ess=..., draws=...), or do without that row's evidence.",
                    about=(str(name),),
                )
            )
        elif one.modes:
            shares = ", ".join(f"{100 * mode.share:.1f} %" for mode in one.modes)
            found.append(
                Finding(
                    kind="modes_weighed",
                    level="note",
                    message=(
                        f"The posterior of {row_in_words(name)} has {len(one.modes)} modes; by "
                        f"their evidence they hold {shares} of it."
                    ),
                    about=(str(name),),
                )
            )
    return tuple(found)


def _known_units(posteriors: Mapping[Name, Posterior]) -> tuple[Finding, ...]:
    """Say what is left out where units are pooled: a case, not its unit."""
    pooled = [one.model for one in posteriors.values() if one.model.pooled]
    if not pooled or pooled[0].groups is None:
        return ()
    name = pooled[0].groups.name
    return (
        Finding(
            kind="known_units",
            level="note",
            message=(
                f"Accuracy here is for a new case of a known {name}, given that {name}'s "
                "prevalences."
            ),
            remedy=f"For a new {name}, leave out one {name} at a time: compare_units.",
        ),
    )


def _smallest_class(posterior: Posterior) -> dict[str, float]:
    frame = posterior.prevalence()
    if "group" in frame:
        frame = frame[frame["group"] == OVERALL]
    row = frame.iloc[int(np.argmin(frame["median"]))]
    return {
        "smallest_class": float(row["median"]),
        "smallest_lower": float(row["lower"]),
        "smallest_upper": float(row["upper"]),
        "smallest_cases": float(row["median"]) * float(posterior.group_cases.sum()),
    }


def _design_findings(posteriors: Mapping[Name, Posterior]) -> tuple[Finding, ...]:
    """Say that the sample's design plays no part here, where there is one."""
    design = next(iter(posteriors.values())).responses.design
    if design is None:
        return ()
    message = (
        "All figures of this comparison (evidence, WAIC, leave-one-out) are unweighted: they take "
        "the cases as they are, drawn one by one."
    )
    remedy = "Choose among models with that in mind; sample_weighted fits the one chosen."
    return (Finding("comparison_unweighted", "note", message, remedy),)


def _findings(
    table: pd.DataFrame, n_cases: int, missing: Mapping[Name, str]
) -> tuple[Finding, ...]:
    found = []
    untrusted = [name for name in table.index if not table.loc[name, "trustworthy"]]
    if untrusted:
        listed = ", ".join(row_in_words(name) for name in untrusted)
        decides = any(bool(table.loc[name, "tied"]) for name in untrusted)
        found.append(
            Finding(
                kind="row_not_trusted",
                level="problem" if decides else "warning",
                message=f"The sampling of {listed} is not to be trusted, so that row may change.",
                remedy="Sample longer; in Python, posteriors[...].diagnostics() says why.",
                about=tuple(str(name) for name in untrusted),
            )
        )
    refitted = {n: int(k) for n, k in zip(table.index, table["refitted"], strict=True) if k}
    if refitted:
        listed = ", ".join(f"{n} of {row_in_words(name)}" for name, n in refitted.items())
        found.append(
            Finding(
                kind="refitted",
                level="note",
                message=f"Patterns that were refitted without one of their cases: {listed}.",
                about=tuple(str(name) for name in refitted),
                value=float(sum(refitted.values())),
            )
        )
    unreliable = {n: int(k) for n, k in zip(table.index, table["pareto_k_high"], strict=True) if k}
    if unreliable:
        listed = ", ".join(f"{n} of {row_in_words(name)}" for name, n in unreliable.items())
        why = dict.fromkeys(missing[name] for name in unreliable if missing[name])
        found.append(
            Finding(
                kind="pareto_k_high",
                level="warning",
                message=(
                    f"The leave-one-out figures of some cases are not reliable: {listed} "
                    "(Pareto k too high)." + "".join(f" {words}" for words in why)
                ),
                remedy=(
                    "Refit every pattern (exact=True), or take differences of the size of those "
                    "cases' figures as not known."
                ),
                about=tuple(str(name) for name in unreliable),
                value=float(max(unreliable.values())),
            )
        )
    if n_cases < FEW_CASES and len(table) > 1:
        found.append(
            Finding(
                kind="few_cases_for_standard_errors",
                level="warning",
                message=(
                    f"With {n_cases} cases the standard errors of differences are known to be "
                    "too small (Sivula et al. 2020)."
                ),
                remedy="Read every difference as less sure than it looks.",
                value=float(n_cases),
            )
        )
    return tuple(found)
