"""What predicts class: multinomial logistic regression of class on covariates, three ways."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal, cast

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import ModelError, near_names
from bayeslca.findings import Finding
from bayeslca.model.probabilities import membership
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.case_table import CaseTable, read_case_table
from bayeslca.relate.error_matrix import ErrorMatrix, error_matrix
from bayeslca.relate.predictors import drawn_classes
from bayeslca.relate.predictors import tables as tables
from bayeslca.relate.predictors.covariates import Design, Missing, design_of
from bayeslca.relate.predictors.findings import predictor_findings
from bayeslca.relate.predictors.formula import read_formula
from bayeslca.relate.predictors.three_steps import (
    Correction,
    ThreeStepRegression,
    three_step_regression,
)
from bayeslca.relate.predictors.ways import (
    Regression,
    WayDraws,
    by_cut,
    jointly,
    regression,
)
from bayeslca.relate.same_classes import refuse_classes_apart
from bayeslca.sampling.run import seed_sequence

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.predictors.direct_effects import DirectEffects

Way = Literal["joint", "cut", "three_steps"]
WAYS: tuple[Way, ...] = ("joint", "cut", "three_steps")

PRIOR_SCALE = 1.5
"""Standard deviation of a class's coefficient of a standardised covariate, or of a category. Two
classes' coefficients then differ by 2.1 (one standard deviation): odds ratios from 1/64 to 64."""
INTERCEPT_SCALE = float(np.pi / np.sqrt(6.0))
"""Standard deviation of a class's intercept: that of the logs of shares drawn evenly (a uniform
Dirichlet's shares are exponential variables over their sum)."""

FIRST_STEP_DRAWS = 300
NORMAL_DRAWS = 4000


@dataclass(frozen=True, eq=False, repr=False)
class ClassPredictors:
    """What is known of how covariates predict class. K classes, P columns of the design.

    Made by `class_predictors`. Tables have the column ``way`` ("joint", "cut", "three_steps").

    Attributes
    ----------
    posterior : Posterior
        The measurement model's, without covariates.
    design : Design
    prior_sd : ndarray, shape (P,)
    draws : mapping of str to WayDraws
        Of the ways "joint" and "cut".
    three_steps : ThreeStepRegression or None
    findings : tuple of Finding
    seconds : mapping of str to float
        How long each way took.
    seed : int or None
    """

    posterior: Posterior
    design: Design
    prior_sd: Floats
    draws: Mapping[str, WayDraws]
    three_steps: ThreeStepRegression | None
    findings: tuple[Finding, ...] = ()
    seconds: Mapping[str, float] = field(default_factory=dict)
    seed: int | None = None

    @property
    def ways(self) -> tuple[Way, ...]:
        """The ways that gave a result."""
        found: list[Way] = [way for way in WAYS if way in self.draws]
        return (*found, "three_steps") if self.three_steps is not None else tuple(found)

    @property
    def main_way(self) -> Way:
        """The way that pictures and sentences rest on: the cut where there is one.

        Its classes are those of the measurement model, which is what names and descriptions are
        about.
        """
        for way in ("cut", "joint", "three_steps"):
            if way in self.ways:
                return way
        msg = "no way gave a result; see findings."
        raise ModelError(msg)

    @property
    def class_names(self) -> tuple[str, ...]:
        """Names of the classes."""
        return self.posterior.model.class_names

    @cached_property
    def coefficients(self) -> Mapping[str, Floats]:
        """Draws (chain, draw, K, P) by way; those of three steps from their normal."""
        out = {way: found.coefficients for way, found in self.draws.items()}
        if self.three_steps is not None:
            rng = np.random.default_rng(self.seed or 0)
            out["three_steps"] = self.three_steps.draws(NORMAL_DRAWS, rng)
        return out

    def odds_ratios(
        self, against: str | None = None, interval: float = 0.95, way: Way | None = None
    ) -> pd.DataFrame:
        """Return odds ratios of each class against one class.

        Parameters
        ----------
        against : str, optional
            The class of comparison; the first one when left out. Results of one choice follow
            from those of another: no class is the model's reference.
        interval : float
        way : str, optional
            One way alone; all when left out.

        Returns
        -------
        DataFrame
            A row per ``way``, ``latent_class``, ``covariate`` (with ``meaning``: what a step of 1
            is) with ``against``, ``odds_ratio``, ``odds_ratio_lower``, ``odds_ratio_upper`` and
            ``probability_above_1``; then the summary of its logarithm.

        Raises
        ------
        ModelError
            When there is no such class.
        """
        return tables.odds_ratio_table(self, self._class(against), interval, self._ways(way))

    def marginal_effects(self, interval: float = 0.95, way: Way | None = None) -> pd.DataFrame:
        """Return how much the probability of each class changes with each covariate.

        Returns
        -------
        DataFrame
            A row per ``way``, ``covariate``, ``change`` ("age_years: +8.9", "district: lake
            against hill") and ``latent_class``: the mean over the cases of the change in the
            probability of the class when this covariate changes and the others stay.
        """
        return tables.marginal_effect_table(self, interval, self._ways(way))

    def class_probabilities(
        self, along: str, interval: float = 0.95, way: Way | None = None, points: int = 25
    ) -> pd.DataFrame:
        """Return the probability of each class along a covariate.

        Parameters
        ----------
        along : str
            A covariate of the data.
        interval : float
        way : str, optional
            The main way when left out.
        points : int
            Values of a covariate of numbers, evenly from its smallest to its largest.

        Returns
        -------
        DataFrame
            A row per ``value`` and ``latent_class``: the mean over the cases of the probability,
            had all of them this value and their own other covariates; and the summary of it.
        """
        if along not in self.design.covariates:
            known = self.design.covariates
            msg = (
                f"there is no covariate {along!r}{near_names(along, known)}. The covariates are "
                f"{', '.join(known)}."
            )
            raise ModelError(msg)
        return tables.probability_table(self, along, interval, way or self.main_way, points)

    def predict(self, data: Any, interval: float = 0.95, way: Way | None = None) -> pd.DataFrame:
        """Return the probability of each class for new cases, given covariates alone.

        Parameters
        ----------
        data : DataFrame
            A row per case, with all covariates.

        Returns
        -------
        DataFrame
            A row per ``row`` of the data (from 1) and ``latent_class``.

        Raises
        ------
        ModelError
            When a covariate or a value is missing, or a category was not among the cases.
        """
        return tables.prediction_table(self, data, interval, way or self.main_way)

    def direct_effects(self) -> pd.DataFrame:
        """Return, item by item, whether a covariate goes with the answer beyond class.

        Returns
        -------
        DataFrame
            See `bayeslca.relate.predictors.direct_effects`.
        """
        return self.direct_effects_by_item.table

    @cached_property
    def direct_effects_by_item(self) -> DirectEffects:
        """Checks of the assumption that covariates act through class alone."""
        from bayeslca.relate.predictors.direct_effects import find_direct_effects

        way = "joint" if "joint" in self.draws else "cut"
        if way not in self.draws:
            msg = "direct effects are found from draws: ask for the way 'joint' or 'cut' too."
            raise ModelError(msg)
        return find_direct_effects(self.posterior, self.design, self.draws[way], self.seed or 0)

    @property
    def made_with(self) -> str:
        """From what `draw_classes` draws, in words."""
        return drawn_classes.made_with(self)

    def draw_classes(self, number: int, rng: np.random.Generator) -> Ints:
        """Draw the class of every case given its covariates, shape (number, cases).

        For `bayeslca.plausible_values`, whose ``given`` this is.
        """
        return drawn_classes.draw_classes(self, number, rng)

    def to_frame(self) -> pd.DataFrame:
        """Return the odds ratios against the first class."""
        return self.odds_ratios()

    def __repr__(self) -> str:
        from bayeslca.relate.predictors.words import in_words

        return in_words(self)

    def _class(self, name: str | None) -> int:
        if name is None:
            return 0
        if name not in self.class_names:
            msg = (
                f"there is no class {name!r}{near_names(name, self.class_names)}. The classes are "
                f"{', '.join(self.class_names)}."
            )
            raise ModelError(msg)
        return self.class_names.index(name)

    def _ways(self, way: Way | None) -> tuple[Way, ...]:
        if way is None:
            return self.ways
        if way not in self.ways:
            msg = f"way={way!r} was not done; there are {', '.join(self.ways)}."
            raise ModelError(msg)
        return (way,)


def class_predictors(
    posterior: Posterior,
    data: Any,
    formula: str,
    *,
    ways: Sequence[Way] = WAYS,
    correction: Correction = "fixed_error_likelihood",
    sampler: Literal["gibbs", "nuts"] = "gibbs",
    prior_scale: float = PRIOR_SCALE,
    intercept_scale: float = INTERCEPT_SCALE,
    missing: Missing = "leave_out",
    case: str | None = None,
    seed: int | None = None,
    draws: int = 1000,
    ess: float = 1000.0,
    threads: int | None = None,
    progress: Callable[[str], None] | None = None,
) -> ClassPredictors:
    """Relate class to covariates by multinomial logistic regression.

    The classes are those of a measurement model that was settled without the covariates. The
    coefficients of every class are normal around 0 with the same standard deviations; numbers are
    standardised first.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    data : path, data frame, or CaseTable
        Where the covariates are: the file of the answers, or another with the same case ids.
    formula : str
        Such as ``"district + age + log(distance)"``.
    ways : sequence of {"joint", "cut", "three_steps"}
        Answers and covariates shape the classes together; response probabilities come from the
        measurement model alone; or placement in classes is regressed on and its error undone.
    correction : {"fixed_error_likelihood", "inverse_error_matrix"}
        Of the three steps.
    sampler : {"gibbs", "nuts"}
        Of the joint way. NUTS samples the same posterior as a PyMC model, some ten times slower.
    prior_scale, intercept_scale : float
        Standard deviations of coefficients and intercepts of each class.
    missing : {"leave_out", "refuse"}
        What is done with cases that miss a covariate.
    case : str, optional
        Column of case ids in ``data``; named as in the answers when left out.
    seed : int, optional
    draws, ess : int, float
        Kept draws per chain of the joint way, and the effective draws it goes on for; the cut
        keeps half as many, drawn almost independently.
    threads : int, optional
    progress : callable, optional
        Told in words what is being done.

    Returns
    -------
    ClassPredictors

    Raises
    ------
    ModelError, ResponsesError
        When formula, covariates or options are wrong; each message names the column or the cases.
    """
    ways = cast("Sequence[Way]", (ways,) if isinstance(ways, str) else ways)
    unknown = [way for way in ways if way not in WAYS]
    if unknown or not ways:
        msg = f"ways={list(ways)}: name one or more of {', '.join(WAYS)}."
        raise ModelError(msg)
    if sampler not in ("gibbs", "nuts"):
        msg = f"sampler={sampler!r}: the joint way is sampled by 'gibbs' or 'nuts'."
        raise ModelError(msg)
    if not prior_scale > 0.0 or not intercept_scale > 0.0:
        msg = f"prior_scale={prior_scale}, intercept_scale={intercept_scale}: both are above 0."
        raise ModelError(msg)
    if posterior.model.n_classes == 1:
        msg = "with one class there is nothing to predict; take a model of two classes or more."
        raise ModelError(msg)
    refuse_classes_apart(posterior)
    design = _design(posterior, data, formula, missing, case)
    prior_sd = np.full(len(design.columns), float(prior_scale))
    prior_sd[0] = intercept_scale
    relation = regression(posterior, design, prior_sd)
    sequence = dict(zip(WAYS, seed_sequence(seed).spawn(len(WAYS)), strict=True))
    say = progress or (lambda _text: None)
    found: dict[str, WayDraws] = {}
    seconds: dict[str, float] = {}
    runs: dict[Way, Callable[[], WayDraws]] = {
        "joint": lambda: _joint(
            posterior, relation, sampler, sequence["joint"], draws, ess, threads
        ),
        "cut": lambda: by_cut(
            posterior, relation, seed=sequence["cut"], draws=max(draws // 2, 1), threads=threads
        ),
    }
    for way, run in runs.items():
        if way in ways:
            say(f"Relating class to covariates: {way}")
            begin = time.perf_counter()
            found[way] = run()
            seconds[way] = time.perf_counter() - begin
    steps, failure = None, None
    if "three_steps" in ways:
        say("Relating class to covariates: three steps")
        begin = time.perf_counter()
        try:
            steps = _three_steps(posterior, relation, correction)
        except ModelError as error:
            if tuple(ways) == ("three_steps",):
                raise
            failure = str(error)
        seconds["three_steps"] = time.perf_counter() - begin
    findings = predictor_findings(posterior, design, prior_sd, found, steps, failure)
    return ClassPredictors(posterior, design, prior_sd, found, steps, findings, seconds, seed)


def _joint(
    posterior: Posterior,
    relation: Regression,
    sampler: Literal["gibbs", "nuts"],
    seed: np.random.SeedSequence,
    draws: int,
    ess: float,
    threads: int | None,
) -> WayDraws:
    if sampler == "nuts":
        from bayeslca.relate.predictors.nuts import jointly_by_nuts

        return jointly_by_nuts(posterior, relation, seed=seed, draws=draws, threads=threads)
    return jointly(posterior, relation, seed=seed, draws=draws, ess=ess, threads=threads)


def _design(
    posterior: Posterior, data: Any, formula: str, missing: Missing, case: str | None
) -> Design:
    read = read_formula(formula)
    if isinstance(data, CaseTable):
        absent = [name for name in read.columns if name not in data.frame.columns]
        if absent:
            msg = (
                f"there is no covariate {absent[0]!r}"
                f"{near_names(absent[0], list(data.frame.columns))} in the table."
            )
            raise ModelError(msg)
        return design_of(data, read, missing=missing)
    table = read_case_table(posterior.responses, data, read.columns, case=case)
    return design_of(table, read, missing=missing)


def _three_steps(
    posterior: Posterior, relation: Regression, correction: Correction
) -> ThreeStepRegression:
    """Do the third step on cases with an answer, placed by the measurement posterior's means."""
    responses, design = posterior.responses, relation.design
    answered = posterior.units.unit_of_row >= 0
    kept = design.used & answered
    of_used: Bools = answered[design.used]
    unit = posterior.units.unit_of_row[kept]
    counts = responses.counts[kept]
    group = None if posterior.model.groups is None else responses.group_codes[kept]
    draws = posterior.draws
    flat_elements = draws.flat_elements
    flat_prevalence = draws.flat_prevalence
    step = max(1, len(flat_elements) // FIRST_STEP_DRAWS)
    shares = membership(
        posterior.table, posterior.unit_table, flat_elements[::step], flat_prevalence[::step]
    )
    errors = error_matrix(shares.mean(axis=0)[unit], counts=counts, group=group)

    def redrawn() -> Iterator[ErrorMatrix]:
        for drawn in shares:
            yield _placed_as(errors, drawn[unit], counts)

    return three_step_regression(
        design.matrix[of_used], errors, counts, correction=correction, redrawn=redrawn()
    )


def _placed_as(errors: ErrorMatrix, memberships: Floats, counts: Any) -> ErrorMatrix:
    """Return the error of the same placement under other memberships."""
    share = np.empty_like(errors.share)
    class_share = np.empty_like(errors.class_share)
    for g in range(len(share)):
        mine = errors.group == g
        weighted = memberships[mine] * counts[mine, None]
        expected = np.maximum(weighted.sum(axis=0), np.finfo(np.float64).tiny)
        share[g] = weighted.T @ errors.placed[mine] / expected[:, None]
        class_share[g] = expected / expected.sum()
    return ErrorMatrix(errors.placed, share, class_share, errors.group)
