"""Outcomes that follow from class: means of each class, three ways."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal, cast

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import ModelError, near_names
from bayeslca.findings import Finding
from bayeslca.relate.error_matrix import PLACEMENTS, Placement
from bayeslca.relate.outcomes import tables as tables
from bayeslca.relate.outcomes.column import Outcome, OutcomeKind, read_outcome
from bayeslca.relate.outcomes.cut import CUT_DRAWS
from bayeslca.relate.outcomes.draws import OutcomeDraws
from bayeslca.relate.outcomes.joint import MAX_SWEEPS, joint_draws
from bayeslca.relate.outcomes.model import CountModel, OutcomeModel
from bayeslca.relate.outcomes.three_steps import (
    CORRECTIONS,
    Correction,
    ThreeSteps,
)
from bayeslca.relate.outcomes.work import OutcomeWork, read_covariates
from bayeslca.relate.same_classes import refuse_classes_apart

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

Way = Literal["joint", "cut", "three_steps"]
WAYS: tuple[Way, ...] = ("joint", "cut", "three_steps")
COUNT_MODELS = ("check", "poisson", "negative_binomial")
SPREADS = ("by_class", "equal")


@dataclass(frozen=True, eq=False, repr=False)
class ClassOutcomes:
    """What follows from class in one outcome.

    Ways stand one under another in every table: ``joint`` (the outcome helps to shape the
    classes), ``cut`` (it cannot), and the three-step corrections ``inverse_error_matrix`` and
    ``fixed_error_likelihood``. The way to report is the cut, unless the outcome is meant to
    define the classes.

    Attributes
    ----------
    outcome : Outcome
    model : OutcomeModel
        Form and priors.
    class_names : tuple of str
    case_names : tuple of str
    drawn : mapping of str to OutcomeDraws
        Draws of the joint way and of the cut.
    steps : mapping of str to ThreeSteps or None
        Three-step estimates by correction; None where there was none.
    answers_membership : ndarray, shape (N, K)
        P(class | answers) of the measurement model.
    checks : DataFrame
        Posterior predictive check by ``way``; see `bayeslca.relate.outcomes.checks`.
    distribution : DataFrame
        Share of cases with each of some ``values``, observed and in replicates, by ``way``.
    findings : tuple of Finding
    adjusted_for : str
        Formula of the covariates; empty when there are none.
    covariate_names : tuple of str
    count_model : {"poisson", "negative_binomial", ""}
    placement : {"modal", "proportional"}
        How cases were placed in the three-step ways.
    seed : int or None
    """

    outcome: Outcome
    model: OutcomeModel
    class_names: tuple[str, ...]
    case_names: tuple[str, ...]
    drawn: Mapping[str, OutcomeDraws]
    steps: Mapping[str, ThreeSteps | None]
    answers_membership: Floats
    checks: pd.DataFrame
    distribution: pd.DataFrame
    findings: tuple[Finding, ...]
    adjusted_for: str = ""
    covariate_names: tuple[str, ...] = ()
    count_model: str = ""
    placement: Placement = "modal"
    seed: int | None = None

    @property
    def ways(self) -> tuple[str, ...]:
        """The ways in the order of the tables."""
        return (*self.drawn, *self.steps)

    @cached_property
    def expected_cases(self) -> Floats:
        """Cases with an outcome that are expected in each class, shape (K,)."""
        return np.asarray(self.answers_membership[self.model.seen].sum(axis=0))

    def means(self, interval: float = 0.95) -> pd.DataFrame:
        """Return the mean of each class.

        Returns
        -------
        DataFrame
            A row per ``way`` and ``latent_class``: of binary outcomes the probability of yes, of
            ordered ones the mean place counted from 1; adjusted ones averaged over the covariates
            of all cases. ``cases``: expected in the class, with an outcome.
        """
        return tables.means_table(self, interval)

    def differences(self, interval: float = 0.95) -> pd.DataFrame:
        """Return all differences of class means.

        Returns
        -------
        DataFrame
            A row per ``way``, ``latent_class`` and ``other_class``: mean of the first less that
            of the other; ``probability_larger``, the posterior probability that it is above 0;
            and the standardised ``effect`` with ``effect_lower`` and ``effect_upper``, see
            `bayeslca.relate.outcomes.quantities.EFFECTS`.
        """
        return tables.differences_table(self, interval)

    def categories(self, interval: float = 0.95) -> pd.DataFrame:
        """Return the probability of each ``category`` of an ordered outcome, by class and way."""
        return tables.categories_table(self, interval)

    def parameters(self, interval: float = 0.95) -> pd.DataFrame:
        """Return standard deviations or sizes by class, and slopes of covariates, by way."""
        return tables.parameters_table(self, interval)

    def order(self, text: str) -> pd.DataFrame:
        """Return how probable an order of class means is.

        Parameters
        ----------
        text : str
            Such as ``"managed < informal < lapsed"``.

        Returns
        -------
        DataFrame
            A row per ``way`` that has draws: ``posterior_probability``, its ``posterior_mcse``,
            and ``prior_probability``, that of any order of so many classes.
        """
        return tables.order_table(self, text)

    def membership_moved(self) -> pd.DataFrame:
        """Return each case's membership from its answers, and given the outcome by each way.

        Returns
        -------
        DataFrame
            A row per ``case``: ``modal_class_<way>`` and ``probability_<class>_<way>`` for the
            ways "answers", "cut" and "joint"; ``moved``, how far joint and cut differ (half the
            sum of absolute differences, 0 to 1), and ``changed``, whether their modal classes do.
        """
        return tables.moved_table(self)

    def __repr__(self) -> str:
        from bayeslca.relate.outcomes.words import as_terminal_text

        return as_terminal_text(self)


def class_outcomes(
    posterior: Posterior,
    data: Any,
    column: str,
    *,
    kind: OutcomeKind,
    ways: Sequence[Way] = WAYS,
    adjusted_for: str | None = None,
    count_model: Literal["check", "poisson", "negative_binomial"] = "check",
    spread: Literal["by_class", "equal"] = "by_class",
    corrections: Sequence[Correction] = CORRECTIONS,
    placement: Placement = "modal",
    levels: Sequence[Any] | None = None,
    yes: Any = None,
    label: str = "",
    case: str | None = None,
    no_answer: Sequence[Any] = (),
    seed: int | None = None,
    draws: int = 1000,
    held: int = CUT_DRAWS,
    ess: float = 1000.0,
    max_sweeps: int = MAX_SWEEPS,
    threads: int | None = None,
    interval: float = 0.95,
    **how_to_read: Any,
) -> ClassOutcomes:
    """Relate an outcome to class, three ways.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model: the number of classes is settled without the outcome.
    data : path or data frame
        With a row per case and the outcome's column; cases are matched by their id.
    column : str
    kind : {"numeric", "binary", "count", "ordered"}
    ways : sequence of {"joint", "cut", "three_steps"}
        The joint way is always shown beside the cut.
    adjusted_for : str, optional
        Formula of covariates, such as ``"district + age"``. Class means are then standardised.
    count_model : {"check", "poisson", "negative_binomial"}
        Of counts. "check" takes the negative binomial where counts vary more within classes than
        a Poisson gives.
    spread : {"by_class", "equal"}
        Whether each class has a variance (or a negative binomial's size) of its own.
    corrections : sequence of {"inverse_error_matrix", "fixed_error_likelihood"}
        Of the three-step way.
    placement : {"modal", "proportional"}
        How cases are placed in the three-step way.
    levels : sequence, optional
        Categories of an ordered outcome from the lowest to the highest.
    yes : optional
        Which value of a binary outcome counts.
    label : str
        What tables and report call the outcome.
    case : str, optional
        Column of case ids in ``data``, when it is called otherwise than in the answers.
    no_answer : sequence
        Values that mean that there is none.
    seed : int, optional
    draws : int
        Kept draws per chain of the joint way.
    held : int
        Draws of the measurement model that are held in the cut.
    ess, max_sweeps : see `bayeslca.sampling.joint_gibbs.sample_joint`
    threads : int, optional
    interval : float
        Of the checks' replicates.
    **how_to_read
        ``sheet``, ``header_row``, ``encoding``, ``separator``, ``keep_only`` of a file.

    Returns
    -------
    ClassOutcomes

    Raises
    ------
    ModelError
        When an option is unknown, or classes are not the same in all groups.
    ResponsesError
        When the outcome cannot be used as it is; the message names the cases.
    """
    from bayeslca.relate.outcomes.words import outcome_findings

    ways = cast("Sequence[Way]", (ways,) if isinstance(ways, str) else ways)
    _check_options(ways, count_model, spread, corrections, placement)
    if posterior.model.n_classes == 1:
        msg = "the model has one class, so nothing can follow from class. Fit two or more."
        raise ModelError(msg)
    refuse_classes_apart(posterior)
    responses = posterior.responses
    outcome = read_outcome(
        responses, data, column, kind, case=case, levels=levels, yes=yes, label=label,
        no_answer=no_answer, **how_to_read,
    )  # fmt: skip
    covariate, names, noticed = read_covariates(
        responses, data, adjusted_for, case=case, no_answer=no_answer, **how_to_read
    )
    work = OutcomeWork(posterior, outcome, covariate, spread == "equal", seed, threads)
    chosen: CountModel = "negative_binomial" if count_model == "check" else count_model
    counted: tuple[Finding, ...] = ()
    if kind == "count" and count_model == "check":
        chosen, counted = work.count_model()
    model = work.model(chosen)
    drawn: dict[str, OutcomeDraws] = {}
    if "joint" in ways and posterior.model.pooled:
        counted = (*counted, _not_written())
    elif "joint" in ways:
        drawn["joint"] = joint_draws(
            posterior, model, work.cases, seed=work.seed_of(1), draws=draws, ess=ess,
            max_sweeps=max_sweeps, threads=threads,
        )  # fmt: skip
    if "joint" in ways or "cut" in ways:
        drawn["cut"] = work.cut(model, held)
    steps: dict[str, ThreeSteps | None] = {}
    stopped: dict[str, str] = {}
    if "three_steps" in ways:
        steps, stopped = work.three_steps(model, corrections, placement)
    checks, values = work.checks(model, drawn, interval)
    found = ClassOutcomes(
        outcome=outcome,
        model=model,
        class_names=posterior.model.class_names,
        case_names=responses.row_names,
        drawn=drawn,
        steps=steps,
        answers_membership=work.membership,
        checks=checks,
        distribution=values,
        findings=(),
        adjusted_for=adjusted_for or "",
        covariate_names=names,
        count_model=chosen if kind == "count" else "",
        placement=placement,
        seed=seed,
    )
    findings = (*outcome.findings, *noticed, *counted, *outcome_findings(posterior, found, stopped))
    return replace(found, findings=tuple(dict.fromkeys(findings)))


def _check_options(
    ways: Sequence[str],
    count_model: str,
    spread: str,
    corrections: Sequence[str],
    placement: str,
) -> None:
    given = [
        *(("ways", way, WAYS) for way in ways),
        ("count_model", count_model, COUNT_MODELS),
        ("spread", spread, SPREADS),
        *(("corrections", correction, CORRECTIONS) for correction in corrections),
        ("placement", placement, PLACEMENTS),
    ]
    for name, value, known in given:
        if value not in known:
            msg = f"{name}: there is no {value!r}{near_names(str(value), known)}. "
            raise ModelError(msg + f"Take from {', '.join(known)}.")
    if not ways:
        msg = f"ways is empty; take from {', '.join(WAYS)}."
        raise ModelError(msg)


def _not_written() -> Finding:
    return Finding(
        kind="joint_not_written",
        level="note",
        message="Units are pooled, for which the joint way is not written: the cut is shown alone.",
    )
