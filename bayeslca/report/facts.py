"""Facts that several sections state, computed once so that they say the same."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

from bayeslca.posterior.tables import OVERALL
from bayeslca.report.content import ReportContent
from bayeslca.report.placement import Placement, placement
from bayeslca.report.wording import about_of, called, in_words, percent_interval, whole
from bayeslca.responses.test_results import look_like_tests

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.convergence.diagnosis import Diagnostics
    from bayeslca.model.prior_predictive import PriorPredictive
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.units import Units

PRIOR_SEED = 1
PRIOR_DRAWS, FEWEST_PRIOR_DRAWS, PRIOR_ANSWERS = 1000, 200, 2_000_000
"""Studies drawn from the prior: fewer where they are large, so that it takes about a second."""


@dataclass(frozen=True)
class Share:
    """A share of the cases with its interval."""

    name: str
    median: float
    lower: float
    upper: float

    @property
    def text(self) -> str:
        """``41 % (30 to 52)``."""
        return percent_interval(self.median, self.lower, self.upper)


@dataclass(frozen=True)
class Facts:
    """What the sections of one report draw on.

    Attributes
    ----------
    content : ReportContent
    """

    content: ReportContent

    @property
    def posterior(self) -> Posterior:
        """The model the answer rests on, fitted."""
        return self.content.posterior

    @property
    def class_names(self) -> tuple[str, ...]:
        """Names of the classes."""
        return self.posterior.model.class_names

    @property
    def n_cases(self) -> int:
        """Cases with at least one answer, which is what all shares are of."""
        return self.units.n_cases

    @property
    def units(self) -> Units:
        """The distinct answers, as the model sees them."""
        return self.posterior.units

    @cached_property
    def diagnostics(self) -> Diagnostics:
        """How the sampling went."""
        return self.posterior.diagnostics()

    @cached_property
    def placement(self) -> Placement:
        """How surely the cases are placed."""
        return placement(self.posterior)

    @cached_property
    def probabilities(self) -> pd.DataFrame:
        """The probability of each answer in each class."""
        return self.posterior.response_probabilities(interval=self.content.interval)

    @cached_property
    def response_groups(self) -> tuple[str, ...]:
        """The groups whose response probabilities differ; none where all groups share them."""
        frame = self.probabilities
        return tuple(dict.fromkeys(frame["group"])) if "group" in frame else ()

    @cached_property
    def overall(self) -> tuple[Share, ...]:
        """The share of each class among all cases, groups weighted by their sizes."""
        return overall_shares(self.posterior, self.content.interval)

    @cached_property
    def answered(self) -> tuple[Share, ...]:
        """The shares that answer the question: of the population where the sample has a design."""
        weighted = self.content.weighted
        if weighted is None:
            return self.overall
        rows = weighted.prevalence(self.content.interval).tail(len(self.class_names))
        return tuple(
            Share(name, row["median"], row["lower"], row["upper"])
            for name, row in zip(self.class_names, rows.to_dict("records"), strict=True)
        )

    @property
    def answered_in_words(self) -> str:
        """A clause that says how common each class is, and of what."""
        if self.content.weighted is None:
            return shares_in_words(self.overall, self.n_cases)
        return f"{WEIGHTED}, {shares_in_words(self.answered)}"

    @cached_property
    def marked_answers(self) -> frozenset[tuple[str, str, str, str]]:
        """The (group or "", class, item, answer) that rest mostly on the prior."""
        frame = self.probabilities
        groups = frame["group"] if "group" in frame else [""] * len(frame)
        keys = zip(groups, frame["latent_class"], frame["item"], frame["category"], strict=True)
        marked = self.posterior.prior_marks.answers
        return frozenset(key for key, mark in zip(keys, marked, strict=True) if mark)

    @cached_property
    def marked_prevalences(self) -> frozenset[tuple[str, str]]:
        """The (group or "", class) whose prevalence rests mostly on the prior."""
        frame = self.posterior.prevalence()
        groups = frame["group"] if "group" in frame else [""] * len(frame)
        keys = zip(groups, frame["latent_class"], strict=True)
        marked = self.posterior.prior_marks.prevalence
        return frozenset(key for key, mark in zip(keys, marked, strict=True) if mark)

    @property
    def marked_classes(self) -> tuple[str, ...]:
        """Classes whose share of all cases rests mostly on the prior."""
        group = "" if self.posterior.model.groups is None else OVERALL
        return tuple(name for name in self.class_names if (group, name) in self.marked_prevalences)

    @property
    def undetermined(self) -> bool:
        """True when the answers cannot determine all of the model, however many there are."""
        return any(finding.kind == "not_identified" for finding in self.diagnostics.findings)

    @cached_property
    def prior_predictive(self) -> PriorPredictive:
        """What the priors imply for a study like this one, beside what was observed."""
        responses = self.posterior.responses
        n_answers = self.n_cases * len(responses.items)
        draws = min(PRIOR_DRAWS, max(FEWEST_PRIOR_DRAWS, PRIOR_ANSWERS // n_answers))
        return self.posterior.model.prior_predictive(
            responses=responses, draws=draws, seed=PRIOR_SEED
        )

    @property
    def n_missing(self) -> int:
        """Answers that are missing among the cases with at least one answer."""
        units = self.units
        return int(((units.pattern < 0).sum(axis=1) * units.count).sum())

    @property
    def looks_diagnostic(self) -> bool:
        """True when the study says that its items are tests, or their answers look like it."""
        return self.content.diagnostic or look_like_tests(self.posterior.model.items)

    @property
    def untrusted_ties(self) -> tuple[object, ...]:
        """Models in the tie, other than the answer's own, whose sampling is not to be trusted."""
        if self.content.comparison is None:
            return ()
        table = self.content.comparison.table
        return tuple(
            name
            for name, row in table.iterrows()
            if row["tied"] and not row["trustworthy"] and name != self.content.study_row
        )

    @property
    def tied(self) -> tuple[object, ...]:
        """Models that predict as well as the best, within their errors."""
        if self.content.comparison is None:
            return ()
        return self.content.comparison.tied

    @property
    def own_row(self) -> Mapping[str, Any] | None:
        """The row of the comparison that is the answer's own model; None where there is none."""
        comparison, name = self.content.comparison, self.content.study_row
        if comparison is None or name not in comparison.table.index:
            return None
        (row,) = comparison.table[comparison.table.index == name].to_dict("records")
        return {str(column): value for column, value in row.items()}

    @property
    def outside_tie(self) -> bool:
        """True when the answer's own model predicts worse than the best by more than a tie."""
        return self.own_row is not None and not self.own_row["tied"]


def overall_shares(posterior: Posterior, interval: float) -> tuple[Share, ...]:
    """Return the share of each class among all cases, groups weighted by their sizes."""
    names = posterior.model.class_names
    rows = posterior.prevalence(interval=interval).tail(len(names))  # the overall ones come last
    return tuple(
        Share(name, row["median"], row["lower"], row["upper"])
        for name, row in zip(names, rows.to_dict("records"), strict=True)
    )


MOST_LISTED = 4
"""With more classes, a sentence names the largest and the smallest only."""


WEIGHTED = "in the population, weighted for how the cases were sampled"


def shares_in_words(shares: tuple[Share, ...], n_cases: int | None = None) -> str:
    """Return a clause that says how common each class is, the largest first.

    Parameters
    ----------
    shares : tuple of Share
    n_cases : int, optional
        The cases that these are shares of; left out where they are of a population.
    """
    first, *others = sorted(shares, key=lambda share: -share.median)
    which = "the largest" if first.name.isdigit() else "the largest class"
    largest = (
        f"{which}, {called(first.name)}, holds {first.text}"
        if n_cases is None
        else f"{which}, {called(first.name)}, holds {first.text} of the cases, "
        f"{about_of(first.median, n_cases)}"
    )
    if len(shares) > MOST_LISTED:
        last = others[-1]
        return (
            f"of {in_words(len(shares))} classes, {largest}, and the smallest, "
            f"{called(last.name)}, {last.text}{_in_cases(last, n_cases)}"
        )
    rest = [_holds(share, n_cases) for share in others]
    if len(rest) > 1:
        rest[-1] = f"and {rest[-1]}"
    return "; ".join([largest, *rest])


def _holds(share: Share, n_cases: int | None) -> str:
    return f"{called(share.name)} holds {share.text}{_in_cases(share, n_cases)}"


def _in_cases(share: Share, n_cases: int | None) -> str:
    return "" if n_cases is None else f", about {whole(share.median * n_cases)}"
