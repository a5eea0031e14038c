"""The model as the analyst states it: items, classes, and statements about them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal

from bayeslca._typing import Bools, Seed
from bayeslca.findings import Finding
from bayeslca.model.agreement import check_agreement
from bayeslca.model.answered_together import (
    AnsweredTogether,
    ItemSet,
    checked_together,
    item_sets,
    margin_priors,
)
from bayeslca.model.assumptions import Assumptions, prevalence_source, response_assumptions
from bayeslca.model.bounds_probability import LogProbability, log_bounds_probability
from bayeslca.model.cautions import model_findings
from bayeslca.model.compile import compile_table, pool_groups
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.constraints import read_links
from bayeslca.model.describe import describe
from bayeslca.model.identifiability import Identifiability, identifiability
from bayeslca.model.model_arguments import (
    check_items,
    check_pooled,
    check_sources,
    checked_classes,
    checked_free,
    checked_spread,
    checked_statements,
    refuse_mixed_classes,
)
from bayeslca.model.naming import classes_named
from bayeslca.model.naming_links import naming_links
from bayeslca.model.places import Link
from bayeslca.model.plain_values import arguments_from, plain_values, shown
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.position_names import element_names, prevalence_names
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.priors import PriorTable, prior_table
from bayeslca.model.simulate import Parameters, Simulation, simulate
from bayeslca.model.statements.resolve import ModelStatements, read_statements
from bayeslca.model.statements.resolved import ResolvedNamingRule
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.model.sums import refuse_links_on_sums, refuse_priors_on_sums
from bayeslca.model.symmetry import Symmetry, symmetry
from bayeslca.model.table import Table
from bayeslca.responses.item import Groups, Item

if TYPE_CHECKING:
    from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood
    from bayeslca.model.prior_predictive import PriorPredictive
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses
    from bayeslca.responses.units import Units


@dataclass(frozen=True, repr=False)
class LatentClassModel:
    """A latent class model.

    Parameters
    ----------
    items : tuple of Item
        The items, usually ``responses.items``.
    classes : int or tuple of str
        A number of classes (exploratory: they are called "1", "2", ... by falling prevalence)
        or their names (confirmatory: something stated must tell them apart).
    statements : tuple of str
        Priors, constraints and naming rules, such as ``"P(fees=yes | managed) ~ Beta(9, 2)"``,
        ``"P(fees=yes | managed) > P(fees=yes | lapsed)"`` and ``"managed is where P(fees=yes) is
        highest"``. What is not stated is uniform and free.
    groups : Groups, optional
        Groups of cases with prevalences of their own, usually ``responses.groups``.
    statement_sources : mapping from str to str
        Where a statement comes from, for the report.
    free_by_group : bool or tuple of str
        Items whose response probabilities differ by group; True: all, False: none.
    pooled : bool
        True: the groups are units of one kind (districts, herds), whose prevalences are drawn
        from one Dirichlet with an estimated mean and spread, so that units with few cases borrow
        from the others. A prior on the prevalences is then that of their mean.
    spread_prior : tuple of float
        Beta parameters of the prior on the spread between units, from 0 (all alike) to 1 (each
        holds one class only); see `bayeslca.model.pooled_prevalence.PooledPrevalence`.
    answered_together : tuple of AnsweredTogether
        Sets of items that may go together within a class; a list of names is a set for all
        classes.

    Raises
    ------
    ModelError
        When something is given twice or missing, a statement cannot be used, or nothing tells
        two named classes apart.

    Examples
    --------
    >>> from bayeslca import Item, LatentClassModel
    >>> items = [Item("fees", ("no", "yes")), Item("meets", ("no", "yes"))]
    >>> LatentClassModel(items, 2).class_names
    ('1', '2')
    """

    items: tuple[Item, ...]
    classes: int | tuple[str, ...]
    statements: tuple[str, ...] = ()
    groups: Groups | None = None
    statement_sources: Mapping[str, str] = field(default_factory=dict, hash=False)
    free_by_group: bool | tuple[str, ...] = False
    pooled: bool = False
    spread_prior: tuple[float, float] = (1.0, 1.0)
    answered_together: tuple[AnsweredTogether, ...] = ()

    def __post_init__(self) -> None:
        # Lists are welcome where tuples are kept; a frozen dataclass is set through object.
        keep = object.__setattr__
        keep(self, "items", tuple(self.items))
        keep(self, "classes", checked_classes(self.classes))
        keep(self, "statements", checked_statements(self.statements))
        keep(self, "statement_sources", dict(self.statement_sources))
        check_items(self.items)
        check_sources(self.statement_sources, self.statements)
        keep(self, "free_by_group", checked_free(self.free_by_group, self.items, self.groups))
        keep(self, "spread_prior", checked_spread(self.spread_prior))
        check_pooled(self)
        keep(self, "answered_together", checked_together(self.answered_together))
        self._refuse_classes_not_told_apart()

    @property
    def exploratory(self) -> bool:
        """True when the classes were given as a number."""
        return isinstance(self.classes, int)

    @property
    def class_names(self) -> tuple[str, ...]:
        """Names of the classes; "1".."K" when only their number was given."""
        if isinstance(self.classes, int):
            return tuple(str(k + 1) for k in range(self.classes))
        return self.classes

    @property
    def n_classes(self) -> int:
        """Number of classes, K."""
        return len(self.class_names)

    @property
    def n_groups(self) -> int:
        """Number of groups of cases; 1 when there are none."""
        return len(self.groups.levels) if self.groups else 1

    @cached_property
    def free_items(self) -> frozenset[int]:
        """Items whose response probabilities differ by group."""
        if isinstance(self.free_by_group, bool):
            return frozenset(range(len(self.items)) if self.free_by_group else ())
        return frozenset(j for j, i in enumerate(self.items) if i.name in self.free_by_group)

    @cached_property
    def item_sets(self) -> tuple[ItemSet, ...]:
        """Sets of items that are answered together, with the classes in which they are."""
        return item_sets(
            self.answered_together,
            self.items,
            self.class_names,
            exploratory=self.exploratory,
            free_items=self.free_items,
        )

    @property
    def n_response_groups(self) -> int:
        """Number of response groups: 1 where all groups share their response probabilities."""
        return self.n_groups if self.free_items else 1

    @cached_property
    def vocabulary(self) -> Vocabulary:
        """The names that statements about this model may use."""
        return Vocabulary(self.items, self.class_names, self.groups, self.exploratory)

    @cached_property
    def stated(self) -> ModelStatements:
        """What the statements say, by what they do."""
        return read_statements(self.statements, self.vocabulary)

    @cached_property
    def priors(self) -> PriorTable:
        """The Dirichlet parameters of all prevalences and response probabilities."""
        refuse_priors_on_sums(self)
        return prior_table(
            self.stated.priors,
            self.vocabulary,
            free_items=self.free_items,
            item_defaults=margin_priors(self.item_sets),
        )

    @cached_property
    def links(self) -> tuple[Link, ...]:
        """The comparisons of single probabilities that constraints and naming rules make."""
        stated = read_links(
            self.stated.constraints, self.vocabulary, self.free_items, self.item_sets
        )
        links = (*stated, *naming_links(self))
        refuse_links_on_sums(self, links)
        return links

    @cached_property
    def response_assumptions(self) -> Assumptions:
        """What the response probabilities are made of."""
        return response_assumptions(self)

    @cached_property
    def log_bounds_probability(self) -> LogProbability:
        """Log prior probability of all bounds and orders, with its Monte Carlo error.

        The constrained prior is the stated one, cut off at the bounds and divided by this.
        """
        parts = [log_bounds_probability(self.table)]
        if isinstance(self.prevalence_source, ConstrainedPrevalence):
            parts.append(log_bounds_probability(self.prevalence_source.blocks))
        return LogProbability(
            sum(part.value for part in parts), sum(part.mcse**2 for part in parts) ** 0.5
        )

    @property
    def naming_rules(self) -> tuple[ResolvedNamingRule, ...]:
        """The rules that say which class gets which name."""
        return self.stated.naming_rules

    @cached_property
    def prevalence_source(self) -> DirichletPrevalence | ConstrainedPrevalence | PooledPrevalence:
        """The prior of the prevalences."""
        return prevalence_source(self)

    @cached_property
    def table(self) -> Table:
        """The compiled form that engines read."""
        return compile_table(self)

    @cached_property
    def symmetry(self) -> Symmetry:
        """Which classes the table, the priors and the naming rules leave exchangeable."""
        named = classes_named(self.naming_rules, self.n_classes)
        return symmetry(self.table, self.prevalence_source, named=named)

    def response_prior_origin(self, response_group: int, item: int, latent_class: int) -> str:
        """Return the statement that set a prior, or ``"default"``."""
        return self.priors.response_origin[response_group][item][latent_class]

    def units(self, responses: Responses) -> Units:
        """Return the distinct answers of responses, as this model sees them.

        Cases of all groups are pooled when the model has no groups.

        Raises
        ------
        ModelError
            When the responses do not have the model's items or groups.
        """
        check_agreement(self, responses)
        if self.groups is None and responses.groups is not None:
            return pool_groups(responses.units)
        return responses.units

    def describe(self, responses: Responses | None = None) -> str:
        """Return the model in words; with responses, also what each prior weighs against them."""
        return describe(self, responses)

    def findings(self, responses: Responses) -> tuple[Finding, ...]:
        """Return what should be known of the model before it is sampled on these responses."""
        return model_findings(self, responses)

    def identifiability(
        self,
        responses: Responses | None = None,
        seed: int = 0,
        estimate: Parameters | None = None,
    ) -> Identifiability:
        """Check whether the answers determine the parameters.

        Parameters
        ----------
        responses : Responses, optional
            Which items were answered together; all when left out.
        seed : int
            For the random points at which the rank is found.
        estimate : Parameters, optional
            A posterior mean, to see what is weakly identified there; needs responses.
        """
        return identifiability(
            self.table,
            (element_names(self), prevalence_names(self)),
            units=None if responses is None else self.units(responses),
            seed=seed,
            estimate=estimate,
            source=self.prevalence_source,
        )

    def simulate(
        self,
        n: int | Sequence[int],
        seed: Seed = None,
        parameters: Parameters | None = None,
        answered: Bools | None = None,
    ) -> Simulation:
        """Draw responses from the prior, or from given parameters.

        Parameters
        ----------
        n : int or sequence of int
            Number of cases; with groups, of each group (a single number is divided evenly).
        seed : int or numpy Generator, optional
        parameters : Parameters, optional
            What to draw from; see ``bayeslca.model.simulate.parameters_from``.
        answered : ndarray of bool, shape (case, item), optional
            Which answers are given; all when left out.
        """
        return simulate(self, n, seed, parameters, answered)

    def prior_predictive(
        self,
        n_cases: int | Sequence[int] | None = None,
        *,
        draws: int = 1000,
        seed: Seed = None,
        responses: Responses | None = None,
    ) -> PriorPredictive:
        """Return what the priors imply, constraints and naming rules kept.

        Parameters
        ----------
        n_cases : int or sequence of int, optional
            Cases of the study; with groups, of each group (a single number is divided evenly).
        draws : int
            Draws of the parameters, and studies simulated from them.
        seed : int or numpy Generator, optional
        responses : Responses, optional
            In place of ``n_cases``: take number of cases, groups and missing answers from these,
            and put what was observed beside what the priors imply. A prior should be argued
            about before that is seen.
        """
        from bayeslca.model.prior_predictive import prior_predictive

        return prior_predictive(self, n_cases, draws=draws, seed=seed, responses=responses)

    def sample(
        self,
        responses: Responses,
        *,
        seed: int | None = None,
        sampler: Literal["auto", "gibbs", "nuts"] = "auto",
        chains: int = 4,
        draws: int = 1000,
        ess: float = 1000,
        r_hat: float = 1.01,
        progress: bool | Callable[..., None] = True,
        **options: Any,
    ) -> Posterior:
        """Sample the posterior of this model given responses.

        Parameters
        ----------
        responses : Responses
        seed : int, optional
            Makes the result the same every time, whatever the number of threads.
        sampler : {"auto", "gibbs", "nuts"}
        chains, draws : int
            Number of chains, and of draws that are kept of each.
        ess, r_hat : float
            Sampling goes on until every quantity has this effective sample size and R-hat.
        progress : bool or callable
        **options
            Further options of ``bayeslca.posterior.fit.fit``.
        """
        from bayeslca.posterior.fit import fit

        return fit(
            self,
            responses,
            seed=seed,
            sampler=sampler,
            chains=chains,
            draws=draws,
            ess=ess,
            r_hat=r_hat,
            progress=progress,
            **options,
        )

    def maximum_likelihood(
        self,
        responses: Responses,
        *,
        starting_points: int = 100,
        seed: int | None = None,
        start: Any = None,
    ) -> MaximumLikelihood:
        """Fit this model by maximum likelihood; stated priors play no part in the estimates.

        Parameters
        ----------
        responses : Responses
        starting_points : int
            Runs of EM from scattered points.
        seed : int, optional
        start : Parameters, or ndarray of shape (row, K), optional
            One start of one's own instead: parameters, or the probability of each class for
            each row of the responses.
        """
        from bayeslca.assess.likelihood.maximum_likelihood import maximum_likelihood

        return maximum_likelihood(
            self, responses, starting_points=starting_points, seed=seed, start=start
        )

    def to_pymc(
        self,
        responses: Responses,
        *,
        by_case: bool = False,
        gibbs: bool = False,
        concentration: Any = None,
        into: Any = None,
    ) -> Any:
        """Return the model as an ordinary ``pymc.Model``, to be extended or sampled.

        Parameters
        ----------
        responses : Responses
        by_case : bool
            A line per case rather than per distinct pattern of answers: what pointwise log
            likelihoods and predictive draws of cases need. Slower.
        gibbs : bool
            Leave out the transforms to the real line, as ``GibbsStep`` needs.
        concentration : tensor or array, optional
            Dirichlet parameters of the prevalences in place of the model's own.
        into : pymc.Model, optional
            Add to this model instead of a new one.
        """
        from bayeslca.model.pymc.model import build

        return build(
            self,
            responses,
            by_case=by_case,
            gibbs=gibbs,
            concentration=concentration,
            into=into,
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the model as plain values, for saving."""
        return plain_values(self)

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> LatentClassModel:
        """Return the model that ``to_dict`` gave."""
        return cls(**arguments_from(values))

    def __repr__(self) -> str:
        return shown(self)

    def _refuse_classes_not_told_apart(self) -> None:
        """Refuse names that nothing stated gives a meaning; also reads all statements."""
        if self.exploratory:
            _ = self.table, self.prevalence_source
        else:
            refuse_mixed_classes(self)
