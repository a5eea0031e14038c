"""Hypotheses: how probable they are before and after the data, and their Bayes factors.

Two ways. Where a hypothesis can be a constraint of the model (equalities, orders and bounds of
single probabilities), its Bayes factor against the model is a ratio of evidences, found from
draws of the classes with all parameters integrated out (`bayeslca.assess.hypothesis.bridge`); for
an equality this is Savage and Dickey's density ratio, averaged over sweeps. Any other (differences,
sums, practical equivalence) is counted: the share of the draws in which it holds.

"The model" is the fitted model with its own constraints and naming rules, and prior
probabilities are under its prior.

References
----------
Dickey, J. M. (1971). The weighted likelihood ratio, linear hypotheses on normal location
parameters. Annals of Mathematical Statistics 42, 204-223.
Klugkist, I., Laudy, O. & Hoijtink, H. (2005). Inequality constrained analysis of variance: a
Bayesian approach. Psychological Methods 10, 477-493.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

from bayeslca.assess.hypothesis.counted import counted_shares, refuse_arbitrary_labels
from bayeslca.assess.hypothesis.grades import SOURCE, bayes_factor_text, grade
from bayeslca.assess.hypothesis.weighed import NotWeighed, Weighed, weigh
from bayeslca.exceptions import ModelError, StatementError
from bayeslca.model.evaluate import means_every_class, terms_of, varies_by_group
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.resolved import ResolvedRelations
from bayeslca.model.statements.syntax import Comparison, Relation
from bayeslca.model.table import Table

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

Method = Literal["definition", "weighed", "counted"]
Bound = Literal["", "below", "above"]
NEARLY_SURE = 1e-3
"""With less than this left for the complement, that is weighed by itself where it can be."""
TOO_UNSURE = 1.0
"""A Bayes factor with a larger error (of its log) is given no grade."""
FEWEST_HOLDING = 100
"""With fewer effective draws in which a hypothesis holds, its Bayes factor is only bounded."""


@dataclass(frozen=True, slots=True)
class HypothesisTest:
    """What became of a hypothesis.

    Attributes
    ----------
    statements : tuple of str
        As written; all of them are meant.
    posterior_probability, prior_probability : float
        nan for an equality, whose probability is always 0.
    posterior_mcse, prior_mcse : float
        Their Monte Carlo standard errors; 0 where they are exact.
    log_bayes_factor : float
        Natural log of the Bayes factor against the model.
    log_bayes_factor_mcse : float
    log_bayes_factor_against_complement : float
        Against the model without the hypothesis; for an equality the same as against the model.
    log_bayes_factor_against_complement_mcse : float
    true_by_definition : bool
        True when the model or its naming rules imply it: then it is no result.
    bound : {"", "below", "above"}
        Not "" where too few draws decide: the Bayes factor against the model is then only known
        to lie below, or that against the complement above, the number that is given.
    method : {"definition", "weighed", "counted"}
        "weighed": by the ratio of evidences; "counted": by the share of draws.
    """

    statements: tuple[str, ...]
    posterior_probability: float
    prior_probability: float
    posterior_mcse: float
    prior_mcse: float
    log_bayes_factor: float
    log_bayes_factor_mcse: float
    log_bayes_factor_against_complement: float
    log_bayes_factor_against_complement_mcse: float
    true_by_definition: bool = False
    bound: Bound = ""
    method: Method = "weighed"

    @property
    def text(self) -> str:
        """All statements, joined by "and"."""
        return " and ".join(self.statements)

    @property
    def bayes_factor(self) -> float:
        """The Bayes factor against the model; infinite where it is too large for a float."""
        return math.exp(min(self.log_bayes_factor, 709.0))

    @property
    def grade(self) -> str:
        """The Bayes factor against the complement in the words of Kass & Raftery (1995).

        Against the model an order can never be favoured more than 1 to its prior probability.
        """
        if self.true_by_definition:
            return "true by definition"
        unsure = self.log_bayes_factor_mcse > TOO_UNSURE and self.bound != "above"
        if unsure or (self.bound == "below" and self.log_bayes_factor > 0):
            return "not decided by so few draws"
        return grade(self.log_bayes_factor_against_complement)

    def __repr__(self) -> str:
        if self.true_by_definition:
            return f"{self.text} is true by definition: the model implies it, so it is no result."
        factor = bayes_factor_text(self.log_bayes_factor)
        if self.bound == "below":
            factor = f"below {factor}"
        else:
            factor += f" (error {_error(self.log_bayes_factor_mcse)})"
        if math.isnan(self.posterior_probability):
            words = f"{self.grade}, as graded by {SOURCE}"
            return f"{self.text}: Bayes factor {factor} against the model; {words}."
        other = bayes_factor_text(self.log_bayes_factor_against_complement)
        side = {"": "", "below": "below ", "above": "more than "}[self.bound]
        return (
            f"{self.text} has the probability {_share(self.posterior_probability)} after the data "
            f"and {_share(self.prior_probability)} before: Bayes factor {factor} against the "
            f"model, {side}{other} against its opposite; {self.grade}, as graded by {SOURCE}."
        )


def hypothesis_test(posterior: Posterior, *statements: str, seed: int = 0) -> HypothesisTest:
    """Test a hypothesis; see `Posterior.test`."""
    joined = joined_relations(posterior, statements)
    refuse_arbitrary_labels(posterior, joined)
    try:
        weighed = weigh(posterior, statements, seed)
    except NotWeighed as reason:
        _refuse_equalities(joined, str(reason))
        found = _counted(posterior, joined, seed)
    else:
        found = _weighed(posterior, joined, weighed, seed)
    return replace(found, statements=tuple(statements))


def joined_relations(posterior: Posterior, statements: Sequence[str]) -> ResolvedRelations:
    """Read the statements of a hypothesis; all of them are meant.

    Raises
    ------
    StatementError
        When a statement claims nothing, or the model gives it no meaning.
    """
    if not statements:
        msg = "no statement was given. Give one, such as 'P(fees=yes | a) > P(fees=yes | b)'."
        raise ModelError(msg)
    resolved = [_resolved(posterior, text) for text in statements]
    return ResolvedRelations(
        tuple(relation for one in resolved for relation in one.relations),
        {p: term for one in resolved for p, term in one.terms.items()},
        " and ".join(one.text for one in resolved),
    )


def _resolved(posterior: Posterior, text: str) -> ResolvedRelations:
    resolved = resolve(text, posterior.model.vocabulary)
    if not isinstance(resolved, ResolvedRelations):
        msg = "this is no hypothesis: it claims nothing that could be true or false"
        raise StatementError(
            msg,
            statement=text,
            position=0,
            remedy="Compare probabilities, P(a) > P(b), or give it to posterior.quantity(...).",
        )
    return resolved


def _refuse_equalities(joined: ResolvedRelations, reason: str) -> None:
    for relation in joined.relations:
        if "=" in relation.signs:
            msg = f"this equality cannot be tested ({reason.splitlines()[0]})"
            raise StatementError(
                msg,
                statement=joined.text,
                position=relation.terms[0].position,
                remedy="Write P(a) = P(b), or test practical equivalence: abs(a - b) < 0.1.",
            )


def _weighed(
    posterior: Posterior, joined: ResolvedRelations, found: Weighed, seed: int
) -> HypothesisTest:
    factor, error = found.ratio.value, found.ratio.mcse
    if found.log_prior is None:
        return HypothesisTest(
            (joined.text,), math.nan, math.nan, math.nan, math.nan, factor, error, factor, error
        )
    if found.log_prior == 0.0:
        return HypothesisTest(
            (joined.text,), 1.0, 1.0, 0.0, 0.0, 0.0, 0.0, math.nan, math.nan, True, "", "definition"
        )
    prior = math.exp(found.log_prior)
    probability = min(math.exp(factor + found.log_prior), 1.0)
    against, against_error = _against_complement(posterior, joined, found, seed)
    return HypothesisTest(
        (joined.text,),
        probability,
        prior,
        min(probability * error, found.left_mcse),
        0.0,
        factor,
        min(error, found.left_mcse / probability) if probability > 0.5 else error,
        against,
        against_error,
        bound="below" if math.isinf(error) else "above" if math.isinf(against_error) else "",
    )


def _against_complement(
    posterior: Posterior, joined: ResolvedRelations, found: Weighed, seed: int
) -> tuple[float, float]:
    """Return the log Bayes factor against the complement, and its error."""
    assert found.log_prior is not None
    prior = math.exp(found.log_prior)
    if found.left < NEARLY_SURE:
        opposite = _opposite(joined, posterior.table)
        if opposite is not None:
            weighed = weigh(posterior, [opposite], seed)
            error = math.hypot(found.ratio.mcse, weighed.ratio.mcse)
            return found.ratio.value - weighed.ratio.value, error
    # What is left is a difference from 1: below this, rounding and not the data decide.
    left = max(found.left, 1e-7)
    value = found.ratio.value + math.log1p(-prior) - math.log(left)
    if left > found.left:
        return value, math.inf
    return value, math.hypot(found.left_mcse / left, found.ratio.mcse)


def _opposite(joined: ResolvedRelations, table: Table) -> str | None:
    """Return the statement that holds when this does not; None where that is not one."""
    turned: dict[Comparison, Comparison] = {">": "<=", ">=": "<", "<": ">=", "<=": ">"}
    if len(joined.relations) > 1 or len(joined.relations[0].signs) > 1:
        return None
    terms = terms_of(joined)
    if means_every_class(terms) or varies_by_group(terms, table):
        return None
    relation = joined.relations[0]
    sign = turned.get(relation.signs[0])
    return None if sign is None else to_text(Relation(relation.terms, (sign,)))


def _counted(posterior: Posterior, joined: ResolvedRelations, seed: int) -> HypothesisTest:
    after, before = counted_shares(posterior, joined, seed)
    if after.holds_always and before.holds_always:
        return HypothesisTest(
            (joined.text,), 1.0, 1.0, 0.0, 0.0, 0.0, 0.0, math.nan, math.nan, True, "", "definition"
        )
    if before.value == 0.0:
        msg = (
            f"'{joined.text}' holds in none of {before.n:,.0f} draws of the prior: the model rules "
            "it out, or gives it practically no chance. Check its direction, or the model's priors."
        )
        raise ModelError(msg)
    bound: Bound = ""
    share, prior = after, before
    if after.n_holding < FEWEST_HOLDING:
        bound, share = "below", after.at_most()
    elif after.n_failing < FEWEST_HOLDING:
        bound, share = "above", after.at_least()
    factor = _log(after.value if bound == "above" else share.value) - _log(prior.value)
    error = math.hypot(share.relative_error, prior.relative_error)
    against = _log_odds(share.value) - _log_odds(prior.value)
    odds_error = math.hypot(
        share.mcse / (share.value * (1 - share.value)) if 0 < share.value < 1 else math.inf,
        prior.mcse / (prior.value * (1 - prior.value)) if 0 < prior.value < 1 else math.inf,
    )
    return HypothesisTest(
        (joined.text,),
        after.value,
        before.value,
        after.mcse,
        before.mcse,
        factor,
        error,
        against,
        odds_error,
        bound=bound,
        method="counted",
    )


def _log(value: float) -> float:
    return math.log(value) if value > 0 else -math.inf


def _log_odds(value: float) -> float:
    if value <= 0 or value >= 1:
        return -math.inf if value <= 0 else math.inf
    return math.log(value) - math.log1p(-value)


def _share(value: float) -> str:
    if 0.9995 <= value < 1:
        return "more than 0.999"
    return f"{value:.3f}" if value >= 0.001 or value == 0 else f"{value:.1e}"


def _error(mcse: float) -> str:
    return "none" if mcse == 0 else f"{100 * mcse:.1f} %" if mcse < 1 else "large"
