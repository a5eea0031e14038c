"""The posterior: what was learnt from the answers, and every table of it."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np

from bayeslca._typing import Floats, Seed
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.probabilities import log_unit_likelihood, response_probability
from bayeslca.model.table import Table, UnitTable
from bayeslca.posterior import membership as memberships
from bayeslca.posterior import partial_pooling as partial
from bayeslca.posterior import quantities as found_quantities
from bayeslca.posterior import separation as separations
from bayeslca.posterior import tables, together
from bayeslca.posterior.quantities import Quantity
from bayeslca.posterior.summary import Quantities, summary_frame
from bayeslca.posterior.versions import versions_now
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.progress import Progress
from bayeslca.sampling.relabel import Relabelled

if TYPE_CHECKING:
    import pandas as pd
    from xarray import DataTree

    from bayeslca.assess.convergence.diagnosis import Diagnostics
    from bayeslca.assess.fit.predictive_checks import PredictiveChecks
    from bayeslca.assess.hypothesis.hypotheses import HypothesisTest
    from bayeslca.assess.left_out.influence import Influence
    from bayeslca.assess.left_out.leave_one_unit_out import LeaveOneUnitOut
    from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity
    from bayeslca.assess.together.co_membership import CoMembership
    from bayeslca.posterior.prior_overlap import PriorMarks

Rows = Literal["cases", "patterns"]


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")


@dataclass(frozen=True, eq=False, repr=False)
class Posterior:
    """The posterior of a latent class model given responses.

    Made by ``model.sample(responses)`` or ``Posterior.load(path)``. Tables are pandas frames;
    those of quantities have the columns ``median, mean, sd, lower, upper, mcse, ess_bulk,
    ess_tail, r_hat`` after their keys, and the level of the interval in
    ``frame.attrs["interval"]``.

    Attributes
    ----------
    model : LatentClassModel
    responses : Responses
    relabelled : Relabelled
        The draws with classes that mean the same throughout, and how that was reached.
    created_at : str
        When it was sampled, ISO 8601, UTC.
    versions : mapping of str to str
        Versions of Python and of the packages that made it.
    """

    model: LatentClassModel
    responses: Responses
    relabelled: Relabelled
    created_at: str = field(default_factory=_now)
    versions: dict[str, str] = field(default_factory=versions_now)

    @property
    def draws(self) -> Draws:
        """The relabelled draws."""
        return self.relabelled.draws

    @property
    def table(self) -> Table:
        """The model as arrays."""
        return self.model.table

    @cached_property
    def units(self) -> Units:
        """The distinct answers, as the model sees them."""
        return self.model.units(self.responses)

    @cached_property
    def unit_table(self) -> UnitTable:
        """The distinct answers as arrays; units in the order of ``units``."""
        return compile_units(self.table, self.units)

    @cached_property
    def group_cases(self) -> Floats:
        """Number of cases (with an answer) of each group, shape (groups,)."""
        n_groups = self.table.n_prevalence_rows
        counts = np.bincount(self.units.group, weights=self.units.count, minlength=n_groups)
        return np.asarray(counts, dtype=np.float64)

    @property
    def prevalence_draws(self) -> Floats:
        """Draws of the prevalences, shape (chain, draw, groups, K)."""
        return self.draws.prevalence

    @cached_property
    def response_probability_draws(self) -> Floats:
        """Draws of P(answer | class), shape (chain, draw, G, K, A)."""
        return response_probability(self.table, self.draws.elements)

    @cached_property
    def log_likelihood_draws(self) -> Floats:
        """Log p(answers) of one case of each unit, class summed out, (chain, draw, unit)."""
        return log_unit_likelihood(
            self.table, self.unit_table, self.draws.elements, self.draws.prevalence
        )

    def prevalence(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how common each class is.

        Returns
        -------
        DataFrame
            A row per class with the key ``latent_class``; with groups, a row per ``group`` and
            class, then rows of the group "overall" (weighted by group sizes); of pooled units
            before them rows of a unit that was not observed ("a new district"). After the summary
            come ``cases``, ``cases_lower`` and ``cases_upper``: median, lower and upper share
            times the number of cases of the group that gave an answer.
        """
        return tables.prevalence_table(self, self._prevalence_quantities, interval)

    def partial_pooling(self, interval: float = 0.95) -> pd.DataFrame:
        """Return each pooled unit by itself and with the others taken into account.

        Returns
        -------
        DataFrame
            A row per ``group`` (unit) and ``latent_class`` with ``cases`` (of the unit),
            ``alone`` (the share that the unit's own cases are most probable under, given the
            response probabilities; nan without cases), the summary of the pooled prevalence, and
            ``borrowed``: the share of the estimate that comes from all units together, c / (c +
            cases), which is a lower bound where classes are not surely known.

        Raises
        ------
        BayesLCAError
            When the model does not pool its units.
        """
        return partial.partial_pooling(self, interval)

    def between_units(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how much pooled units differ.

        Returns
        -------
        DataFrame
            A row per ``quantity`` (and ``latent_class``): the spread, 0 when all units are alike
            and 1 when each holds one class only; the concentration; each class's mean prevalence
            over units, units counting alike, and its standard deviation between units. After the
            summary ``prior_median``, ``prior_lower`` and ``prior_upper``.

        Raises
        ------
        BayesLCAError
            When the model does not pool its units.
        """
        return partial.between_units(self, interval)

    def spread_sensitivity(self, interval: float = 0.95) -> pd.DataFrame:
        """Return what other priors on the spread between units would have given.

        Draws are weighed anew, which is exact but for the number of draws that count.

        Returns
        -------
        DataFrame
            A row per ``prior`` with the spread's ``median``, ``lower`` and ``upper``, the
            ``largest_change`` of any unit's mean prevalence, and ``draws_that_count``.
        """
        return partial.spread_sensitivity(self, interval)

    def response_probabilities(self, interval: float = 0.95) -> pd.DataFrame:
        """Return what each class looks like.

        Returns
        -------
        DataFrame
            A row per class, item and category, with the keys ``latent_class``, ``item``,
            ``category``; ``group`` before them where groups differ in response probabilities.
        """
        return tables.response_probability_table(
            self, self._response_probability_quantities, interval
        )

    def joint_answers(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how probable each joint answer is to items that are answered together.

        Returns
        -------
        DataFrame
            A row per set, class in which it is answered together, and joint answer, with the
            keys ``latent_class``, ``items`` and ``joint_answer``; ``group`` before them where
            groups differ in response probabilities. No row where nothing is answered together.
        """
        return together.joint_answers_table(self, interval)

    def conditional_dependence(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how pairs of items that are answered together go together within a class.

        Returns
        -------
        DataFrame
            Three rows per pair and class, with the keys ``latent_class``, ``item_1``, ``item_2``
            and ``measure``: "odds ratio" (for ordered answers, agreeing over disagreeing pairs of
            cases), "covariance" and "correlation" of the answers given the class, which for two
            diagnostic tests are those of Dendukuri & Joseph (2001). The mean, spread and error
            of an odds ratio are left out, as its mean need not exist. ``positive`` is the
            probability that the two go together more than independent items would. Pairs with
            an item whose answers have no order are left out.
        """
        return together.dependence_table(self, interval)

    def membership(
        self,
        responses: Responses | None = None,
        interval: float = 0.95,
        rows: Rows = "cases",
    ) -> pd.DataFrame:
        """Return how probably each case is of each class, given its answers.

        Parameters
        ----------
        responses : Responses, optional
            New cases; those of the fit when left out.
        interval : float
        rows : {"cases", "patterns"}
            A row per case (row of the responses), or per response pattern.

        Returns
        -------
        DataFrame
            Keys: ``case`` (and ``group``, where the model has groups), or the items' answers;
            ``count`` where a row stands for several cases. Then ``modal_class``,
            ``modal_probability``, and for each class ``probability_<class>`` with
            ``lower_<class>`` and ``upper_<class>``. The probability is the posterior mean of
            P(class | answers, parameters); the interval is of the same quantity, over the
            uncertainty in the parameters: it is not an interval for the class of a case. Cases
            without an answer get the prevalences of their group.
        """
        at = self.responses if responses is None else responses
        return memberships.membership_table(self, at, interval, rows)

    def assign(self, new_responses: Responses, interval: float = 0.95) -> pd.DataFrame:
        """Return the membership of new cases; see :meth:`membership`.

        Cases whose answers have probability 0 in every class get no membership: their row is
        empty, a warning names them, and so does ``frame.attrs["impossible_cases"]``.
        """
        return self.membership(new_responses, interval)

    def assignment_error(self, interval: float = 0.95) -> pd.DataFrame:
        """Return where the cases of each class end up when placed in their modal class.

        Returns
        -------
        DataFrame
            A row per ``latent_class`` and ``assigned_class`` with ``share``, the posterior mean
            of the share of the class's cases that are placed there (the shares of a class sum
            to 1), and the summary of that share over draws.
        """
        keys = separations.assignment_keys(self.model.class_names)
        frame = summary_frame(keys, self._assignment_quantities, interval)
        frame.insert(2, "share", frame["mean"])
        return frame

    def separation(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how well the classes are separated: relative entropy, found draw by draw.

        Returns
        -------
        DataFrame
            One row with the key ``quantity``; 1 when every case is placed surely, 0 when the
            answers say nothing. ``note`` says why it is nan where it is.
        """
        return separations.separation_table(self._separation_quantities, interval)

    def quantity(self, text: str, interval: float = 0.95) -> Quantity:
        """Return what is known of a quantity, such as a difference of probabilities.

        Parameters
        ----------
        text : str
            Such as ``"P(fees=yes | managed) - P(fees=yes | lapsed)"``.
        interval : float

        Raises
        ------
        StatementError
            When it is no quantity, or stands for several values (one for each group or class).
        """
        return found_quantities.quantity(self, text, interval)

    def quantities(
        self, texts: Mapping[str, str] | Sequence[str], interval: float = 0.95
    ) -> pd.DataFrame:
        """Return what is known of several quantities.

        Parameters
        ----------
        texts : sequence of str, or mapping from a name to str
        interval : float

        Returns
        -------
        DataFrame
            A row per ``quantity``; where one differs by group and names none, a row per
            ``group``; where it speaks of every class (``.``), a row per ``latent_class``. After
            the summary come ``prior_median``, ``prior_lower`` and ``prior_upper``: the same of
            the prior, nan where the prior does not tell the classes apart.
        """
        return found_quantities.quantities(self, texts, interval)

    def test(self, *statements: str, seed: int = 0) -> HypothesisTest:
        """Test a hypothesis, such as an order of probabilities; several are joined by "and".

        Parameters
        ----------
        *statements : str
            Such as ``"P(fees=yes | managed) > P(fees=yes | lapsed)"``.
        seed : int
            Of the draws that a Bayes factor needs beside those of the posterior.

        Raises
        ------
        StatementError
            When a statement claims nothing, or the model gives it no meaning.
        """
        from bayeslca.assess.hypothesis.hypotheses import hypothesis_test

        return hypothesis_test(self, *statements, seed=seed)

    def leave_one_unit_out(self, *, refit: bool = False, seed: int = 0) -> LeaveOneUnitOut:
        """Return how well each unit (group) is predicted from the others.

        The unit's own prevalences are summed out: accuracy for a *new* unit. Leave-one-out in
        ``compare`` is of a new case of a known unit.

        Parameters
        ----------
        refit : bool
            Fit the model anew without each unit whose importance weights are not reliable.
        seed : int

        Raises
        ------
        ModelError
            When the responses have no units, or the prevalences of units are constrained.
        """
        from bayeslca.assess.left_out.leave_one_unit_out import leave_one_unit_out

        return leave_one_unit_out(self, refit=refit, seed=seed)

    def prior_sensitivity(
        self,
        *,
        quantities: Mapping[str, str] | Sequence[str] = (),
        hypotheses: Mapping[str, Sequence[str]] | Sequence[str] = (),
        refit: Sequence[str] | None = None,
        seed: int = 0,
        progress: Callable[[str], None] | None = None,
    ) -> PriorSensitivity:
        """Return what the priors do: how much rests on them, and what moves under others.

        Parameters
        ----------
        quantities : mapping from a name to str, or sequence of str
            Such as ``"P(fees=yes | managed) - P(fees=yes | lapsed)"``.
        hypotheses : mapping from a claim to statements, or sequence of str
        refit : sequence of str, optional
            Priors to fit the model under again, of "half as strong", "twice as strong",
            "uniform", "Jeffreys"; when not given, those of the first two for which importance
            weights are not reliable.
        seed : int
            Of the refits, and of draws that Bayes factors need.
        progress : callable, optional
            Called with what is being done, in words.
        """
        from bayeslca.assess.priors.prior_sensitivity import prior_sensitivity

        return prior_sensitivity(
            self,
            quantities=quantities,
            hypotheses=hypotheses,
            refit=refit,
            seed=seed,
            progress=progress,
        )

    @cached_property
    def prior_marks(self) -> PriorMarks:
        """What rests mostly on the prior, row by row of the posterior's own tables."""
        from bayeslca.posterior.prior_overlap import prior_marks

        return prior_marks(self)

    def predictive_checks(
        self,
        *,
        replicates: int = 1000,
        seed: int = 0,
        interval: float = 0.95,
        calibrate: int = 0,
        calibrate_from: Literal["posterior", "prior"] = "posterior",
        progress: bool | Callable[[int, int], None] = True,
    ) -> PredictiveChecks:
        """Check whether the model reproduces the answers: patterns, items, pairs, sum scores.

        Parameters
        ----------
        replicates : int
            Replicates of the data, each from a draw of its own.
        seed : int
        interval : float
            Level of the replicates' intervals.
        calibrate : int
            Number of simulated studies among whose p-values those of the data are ranked; each
            is fitted anew. 0: not calibrated.
        calibrate_from : {"posterior", "prior"}
            Where the parameters of simulated studies come from.
        progress : bool or callable
            Of the calibration: called with studies done and studies to do.
        """
        from bayeslca.assess.fit.predictive_checks import predictive_checks

        return predictive_checks(
            self,
            replicates=replicates,
            seed=seed,
            interval=interval,
            calibrate=calibrate,
            calibrate_from=calibrate_from,
            progress=progress,
        )

    def co_membership(self, *, seed: Seed = None) -> CoMembership:
        """Return how probably two cases are in one class, and the sets of cases that follow.

        Parameters
        ----------
        seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
            Of the sampled partitions; by default it follows from the posterior's own seed.

        Raises
        ------
        ModelError
            When there are too many distinct response patterns.
        """
        from bayeslca.assess.together.co_membership import co_membership

        return co_membership(self, seed=seed)

    def influence(
        self,
        *,
        exact: bool | None = None,
        seed: int | None = None,
        threads: int | None = None,
        progress: bool | Callable[[Progress], None] = True,
    ) -> Influence:
        """Find the cases that stand out: improbable answers, and those that much rests on.

        Parameters
        ----------
        exact : bool, optional
            True refits every distinct pattern without one of its cases, False none; left out,
            those whose importance weights are poor, at most 12.
        seed : int, optional
            Of refits and replicates; that of the fit when left out.
        threads : int, optional
        progress : bool or callable
            Of the refits.
        """
        from bayeslca.assess.left_out.influence import influence

        return influence(self, exact=exact, seed=seed, threads=threads, progress=progress)

    def diagnostics(self) -> Diagnostics:
        """Return whether the sampling is to be trusted: findings, a table, and a verdict."""
        return self._diagnostics

    @cached_property
    def tree(self) -> DataTree:
        """Everything as an xarray DataTree in ArviZ's schema; see `bayeslca.posterior.tree`."""
        from bayeslca.posterior.tree import posterior_tree

        return posterior_tree(self)

    def to_arviz(self) -> DataTree:
        """Return the tree with the group ``log_likelihood``, a column per case.

        ArviZ's functions for leave-one-out and model comparison count its columns as cases.
        """
        from bayeslca.posterior.tree import with_case_log_likelihood

        return with_case_log_likelihood(self)

    def save(self, path: str | Path, replace: bool = False) -> None:
        """Write everything into a NetCDF file.

        Raises
        ------
        StorageError
            When the file exists and ``replace`` is False, or cannot be written.
        """
        from bayeslca.posterior.storage import save

        save(self, Path(path), replace=replace)

    @classmethod
    def load(cls, path: str | Path) -> Posterior:
        """Read what :meth:`save` wrote.

        Raises
        ------
        StorageError
            When the file is missing, broken, from another program, or from a newer version.
        """
        from bayeslca.posterior.storage import load

        return load(Path(path))

    @cached_property
    def _diagnostics(self) -> Diagnostics:
        from bayeslca.assess.convergence.diagnosis import diagnose

        return diagnose(self)

    @cached_property
    def _prevalence_quantities(self) -> Quantities:
        return tables.prevalence_quantities(self)

    @cached_property
    def _response_probability_quantities(self) -> Quantities:
        return tables.response_probability_quantities(self)

    @cached_property
    def _placement(self) -> separations.Placement:
        return separations.placement(self)

    @cached_property
    def _assignment_quantities(self) -> Quantities:
        shares = self._placement.shares
        return Quantities(shares.reshape(*shares.shape[:2], -1))

    @cached_property
    def _separation_quantities(self) -> Quantities:
        return Quantities(self._placement.separation[:, :, None])

    def __repr__(self) -> str:
        from bayeslca.posterior.show import as_terminal_text

        return as_terminal_text(self)

    def _repr_html_(self) -> str:
        from bayeslca.posterior.show import as_html

        return as_html(self)
