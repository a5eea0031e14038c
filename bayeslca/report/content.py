"""What a report is made from, and the files it becomes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.class_count.counts_under_other_priors import CountsUnderOtherPriors
    from bayeslca.assess.comparison.compare import Comparison
    from bayeslca.assess.fit.predictive_checks import PredictiveChecks
    from bayeslca.assess.hypothesis.hypotheses import HypothesisTest
    from bayeslca.assess.hypothesis.rivals import Rivals
    from bayeslca.assess.left_out.influence import Influence
    from bayeslca.assess.likelihood.criteria_beside import CriteriaBeside
    from bayeslca.assess.likelihood.likelihood_ratio import LikelihoodRatioTest
    from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity
    from bayeslca.assess.together.co_membership import CoMembership
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.relate.outcomes.class_outcomes import ClassOutcomes
    from bayeslca.relate.placing import PlacingRule
    from bayeslca.relate.predictors.class_predictors import ClassPredictors
    from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior
    from bayeslca.responses.responses import Responses


@dataclass(frozen=True)
class Change:
    """One number that moved since the last run into the same folder.

    Attributes
    ----------
    what : str
        The quantity, in words ("prevalence of managed").
    before, after : str
        How it was and how it is, as the report would print it.
    """

    what: str
    before: str
    after: str


@dataclass(frozen=True)
class Claim:
    """A claim of the theory, and what became of it.

    Attributes
    ----------
    words : str
        As the study words it.
    test : HypothesisTest
    planned : bool
        True when it was stated before the answers were seen.
    """

    words: str
    test: HypothesisTest
    planned: bool = False


@dataclass(frozen=True, eq=False)
class UnitComparison:
    """Models compared by how well they predict a unit that they have not seen.

    Attributes
    ----------
    table : DataFrame
        See `bayeslca.assess.left_out.leave_one_unit_out.compare_units`.
    posteriors : mapping of str to Posterior
        By the rows' names: "pooled", "each alone", "all as one".
    """

    table: pd.DataFrame
    posteriors: Mapping[str, Posterior]


@dataclass(frozen=True, kw_only=True)
class ReportContent:
    """Everything a report is written from.

    Attributes
    ----------
    responses : Responses
        The answers.
    posterior : Posterior
        The model the answer rests on.
    title, question : str
        The study's title and the question it asks.
    chosen_because : str
        Why the study has this number of classes; empty when it does not say.
    comparison : Comparison or None
        Of unconstrained models with different numbers of classes; None when not done.
    study_row : int, str or None
        The row of ``comparison.table`` that is the model the answer rests on; None when it has
        no row there.
    counts_under_other_priors : CountsUnderOtherPriors or None
        The numbers of classes weighed again under other priors; None when not asked for.
    together : CoMembership or None
        Who is together with whom whatever the number of classes; None when not asked for, or not
        possible: ``together_why_not`` then says why.
    together_why_not : str
        Why it is missing, or not averaged over every number of classes; empty when it is.
    group_comparison : Comparison or None
        Of response probabilities that all groups share against ones that differ by group, rows
        "alike in all groups" and "free by group"; None when not done.
    units : UnitComparison or None
        Of pooled units against units with a prior each and no units at all; None when not done.
    claims : tuple of Claim
        Hypotheses of the study, as tested.
    rivals : mapping of str to Rivals
        Sets of hypotheses that compete, by the set's name.
    quantities : DataFrame or None
        What the study asked for by name; see `Posterior.quantities`.
    checks : PredictiveChecks or None
        Whether the model reproduces the answers; None when not checked.
    checks_by_count : mapping of int to PredictiveChecks
        The same of the models of ``comparison``.
    influence : Influence or None
        Cases that stand out, and what rests on each; None when not asked for.
    criteria : CriteriaBeside or None
        Maximum likelihood of the models of ``comparison`` (of the one model, where there is no
        comparison); None when not asked for.
    one_class_fewer : tuple of LikelihoodRatioTest
        Bootstrap tests of one class fewer, as far as asked for.
    predictors : ClassPredictors or None
        Class regressed on covariates; None when not done.
    predictors_against : str or None
        The class that the page compares the others with; the first one when None.
    sensitivity : PriorSensitivity or None
        What the priors do, and what moves under others; None when not looked at.
    placing_rule : PlacingRule or None
        When a case is placed in a class; None when the study does not say.
    placed : DataFrame or None
        Where each case is placed by that rule; see `bayeslca.relate.placing.place_cases`.
    plausible_values : DataFrame or None
        Drawn classes of the cases; goes into a file of its own.
    weighted : WeightedPosterior or None
        What is known of the population, where the sample has weights, clusters or strata; the
        report's answer is then its.
    outcomes : tuple of ClassOutcomes
        What follows from class, an outcome each.
    outcome_orders : mapping of str to tuple of str
        Orders of class means that the study asks for, by the outcome's column.
    alternatives : mapping of str to Posterior
        Other numbers of classes that the data support as well, where the study leaves the number
        open; each is shown beside the answer. Keys are headings ("2 classes").
    diagnostic : bool
        True when the items are diagnostic tests; adds the cautions that go with them.
    interval : float
        Level of the intervals.
    show_cases : bool
        True when the report may show single cases' names and answers.
    decisions : tuple of str
        What was decided on reading the answers (no-answer codes, merges, rows kept), a sentence
        each.
    seed : int or None
    command : str
        The command that was run, without the names of private folders.
    study_text : str
        The study file's text, so that the page can be reproduced from itself; empty when none.
    versions : mapping of str to str
        Versions of the software; those that the posterior was made with when empty.
    changes : tuple of Change
        What moved since the last run; shown when ``replaced`` is True.
    replaced : bool
        True when an earlier run in the same folder was replaced.
    """

    responses: Responses
    posterior: Posterior
    title: str = "Latent class study"
    question: str = ""
    chosen_because: str = ""
    comparison: Comparison | None = None
    study_row: int | str | None = None
    counts_under_other_priors: CountsUnderOtherPriors | None = None
    together: CoMembership | None = None
    together_why_not: str = ""
    group_comparison: Comparison | None = None
    units: UnitComparison | None = None
    claims: tuple[Claim, ...] = ()
    rivals: Mapping[str, Rivals] = field(default_factory=dict)
    quantities: pd.DataFrame | None = None
    checks: PredictiveChecks | None = None
    checks_by_count: Mapping[int, PredictiveChecks] = field(default_factory=dict)
    influence: Influence | None = None
    criteria: CriteriaBeside | None = None
    one_class_fewer: tuple[LikelihoodRatioTest, ...] = ()
    predictors: ClassPredictors | None = None
    predictors_against: str | None = None
    sensitivity: PriorSensitivity | None = None
    placing_rule: PlacingRule | None = None
    placed: pd.DataFrame | None = None
    plausible_values: pd.DataFrame | None = None
    weighted: WeightedPosterior | None = None
    outcomes: tuple[ClassOutcomes, ...] = ()
    outcome_orders: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    alternatives: Mapping[str, Posterior] = field(default_factory=dict)
    diagnostic: bool = False
    interval: float = 0.95
    show_cases: bool = False
    decisions: tuple[str, ...] = ()
    seed: int | None = None
    command: str = ""
    study_text: str = ""
    versions: Mapping[str, str] = field(default_factory=dict)
    changes: tuple[Change, ...] = ()
    replaced: bool = False


@dataclass(frozen=True)
class WrittenReport:
    """The files of a report.

    Attributes
    ----------
    page : Path
        ``report.html``, which needs no other file.
    workbook : Path
        ``tables.xlsx``: every table, and a sheet that explains every column.
    tables : mapping of str to Path
        ``tables/<name>.csv`` by name: ``prevalence``, ``response_probabilities``,
        ``membership_of_patterns``, ``assignment_error``, ``separation``, ``diagnostics``,
        ``class_counts`` (when compared), ``answers`` (what was observed), ``priors``,
        ``prior_predictive`` (what the priors imply before the data), ``columns``
        (what every column means).
    figures : mapping of str to Path
        ``figures/<name>.png`` and ``figures/<name>.svg`` by file name.
    headline : str
        The first sentence of the report, without mark-up.
    """

    page: Path
    workbook: Path
    tables: Mapping[str, Path]
    figures: Mapping[str, Path]
    headline: str
