"""The quantities whose dependence on the priors is followed, with draws after and before the data.

Prevalences, response probabilities, what the study asks for by name, and whether its hypotheses
hold, each with the blocks that it is made of: a block whose Dirichlet parameters are all 1 is
flat, and raising a flat prior to a power changes nothing.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.hypothesis.hypotheses import joined_relations
from bayeslca.exceptions import StatementError
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.evaluate import (
    Instance,
    ParameterDraws,
    instances,
    means_every_class,
    terms_of,
    varies_by_group,
)
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.statements.notation import to_text
from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.resolved import (
    MembershipTerm,
    PrevalenceTerm,
    ResolvedQuantity,
    ResponseTerm,
    Term,
)
from bayeslca.model.statements.syntax import Event, Name, Probability
from bayeslca.posterior.quantities import posterior_parameters

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior

Kind = Literal["prevalence", "response probability", "quantity", "hypothesis"]
OwnPrior = Literal["flat", "partly flat", "informative"]
PREVALENCES = -1
"""Stands for the prior of the prevalences among blocks of response probabilities."""


@dataclass(frozen=True, eq=False)
class Followed:
    """One quantity.

    Attributes
    ----------
    kind : {"prevalence", "response probability", "quantity", "hypothesis"}
    name : str
        In the notation of statements; of quantities and hypotheses, as they are called.
    values : ndarray, shape (S,)
        Its draws; of a hypothesis 1 where it holds and else 0.
    own_prior : {"flat", "partly flat", "informative"}
        Of the blocks that it is made of.
    place : tuple of int
        Where its answer or prevalence stands: (response group, class, column), (group, class);
        empty for others.
    """

    kind: Kind
    name: str
    values: Floats
    own_prior: OwnPrior
    place: tuple[int, ...] = ()


def followed(
    posterior: Posterior,
    draws: ParameterDraws,
    quantities: Mapping[str, str],
    hypotheses: Mapping[str, Sequence[str]],
) -> tuple[Followed, ...]:
    """Return all quantities at given draws, in the same order for every fit of a study.

    Parameters
    ----------
    posterior : Posterior
        Says what the names mean.
    draws : ParameterDraws
        Of the posterior, or of the prior.
    quantities : mapping from a name to str
    hypotheses : mapping from a claim to its statements
        Equalities have probability 0 and are left out.

    Raises
    ------
    StatementError
        When a text is no quantity, or no hypothesis.
    """
    flat = _Flatness(posterior.model)
    return (
        *_prevalences(posterior.model, draws, flat),
        *_answers(posterior.model, draws, flat),
        *_quantities(posterior, draws, quantities, flat),
        *_hypotheses(posterior, draws, hypotheses, flat),
    )


def after_the_data(
    posterior: Posterior,
    quantities: Mapping[str, str],
    hypotheses: Mapping[str, Sequence[str]],
) -> tuple[Followed, ...]:
    """Return all quantities at the posterior's draws, chains end to end."""
    return followed(posterior, posterior_parameters(posterior), quantities, hypotheses)


class _Flatness:
    """Which blocks of a model have a flat prior."""

    def __init__(self, model: LatentClassModel) -> None:
        table, source = model.table, model.prevalence_source
        self.model, self.table = model, table
        starts = table.block_start[:-1]
        off = np.abs(table.element_prior - 1.0)
        self.blocks = np.add.reduceat(off, starts) == 0.0 if starts.size else np.zeros(0, bool)
        if isinstance(source, PooledPrevalence):
            prior = np.append(source.mean_prior, source.spread_prior)
        elif isinstance(source, ConstrainedPrevalence):
            prior = source.blocks.element_prior
        else:
            prior = source.concentration
        self.prevalences = bool(np.all(prior == 1.0))

    def of(self, blocks: Iterable[int]) -> OwnPrior:
        flat = [self.prevalences if b == PREVALENCES else bool(self.blocks[b]) for b in set(blocks)]
        if all(flat):
            return "flat"
        return "partly flat" if any(flat) else "informative"

    def row(self, row: int, latent_class: int) -> set[int]:
        block = self.table.element_block
        cells = self.table.cells(row, latent_class)
        return {int(block[e]) for _, elements in cells for e in elements}

    def terms(self, terms: Iterable[Term]) -> OwnPrior:
        found: set[int] = set()
        for term in terms:
            if isinstance(term, PrevalenceTerm):
                found.add(PREVALENCES)
                continue
            if isinstance(term, MembershipTerm):
                found.add(PREVALENCES)
            found |= self._of_answers(term)
        return self.of(found)

    def _of_answers(self, term: ResponseTerm | MembershipTerm) -> set[int]:
        one = term.latent_class if isinstance(term, ResponseTerm) else None
        classes = range(self.table.n_classes) if one is None else (one,)
        groups = self.table.response_group
        chosen = groups[[term.group]] if isinstance(term.group, int) else np.unique(groups)
        return {
            block
            for g in chosen.tolist()
            for item, categories in term.answers
            for c in categories
            for k in classes
            for block in self.row(
                int(self.table.response_row[g, self.table.item_start[item] + c]), k
            )
        }


def _prevalences(
    model: LatentClassModel, draws: ParameterDraws, flat: _Flatness
) -> Iterator[Followed]:
    if model.n_classes == 1:
        return
    from bayeslca.model.position_names import prevalence_names

    own = flat.of([PREVALENCES])
    for g, names in enumerate(prevalence_names(model)):
        for k, name in enumerate(names):
            yield Followed("prevalence", name, draws.prevalence[:, g, k], own, (g, k))


def _answers(model: LatentClassModel, draws: ParameterDraws, flat: _Flatness) -> Iterator[Followed]:
    """Yield the answers that count as yes, and every answer of items with more than two."""
    table = model.table
    first = [int(np.argmax(table.response_group == g)) for g in range(table.n_response_groups)]
    for j, item in enumerate(model.items):
        yes = item.categories.index(item.yes or item.categories[-1])
        chosen = range(item.n_categories) if item.n_categories > 2 else (yes,)
        groups = range(table.n_response_groups) if j in model.free_items else (0,)
        for g in groups:
            for k, latent_class in enumerate(model.class_names):
                given = [Event(Name(latent_class))]
                if len(groups) > 1 and model.groups is not None:
                    level = Name(model.groups.levels[first[g]])
                    given.append(Event(Name(model.groups.name), "=", (level,)))
                for c in chosen:
                    column = int(table.item_start[j]) + c
                    event = Event(Name(item.name), "=", (Name(item.categories[c]),))
                    blocks = flat.row(int(table.response_row[g, column]), k)
                    if blocks:  # else it is known
                        yield Followed(
                            "response probability",
                            to_text(Probability((event,), tuple(given))),
                            draws.response_probability[:, first[g], k, column],
                            flat.of(blocks),
                            (g, k, column),
                        )


def _quantities(
    posterior: Posterior, draws: ParameterDraws, texts: Mapping[str, str], flat: _Flatness
) -> Iterator[Followed]:
    model = posterior.model
    for name, text in texts.items():
        resolved = resolve(text, model.vocabulary)
        if not isinstance(resolved, ResolvedQuantity):
            msg = "this is no quantity: it assumes or claims something"
            remedy = "Leave out the comparison, or give it as a hypothesis."
            raise StatementError(msg, statement=text, position=0, remedy=remedy)
        terms = terms_of(resolved)
        by_group, by_class = varies_by_group(terms, model.table), means_every_class(terms)
        for at in instances(terms, model.table):
            values = draws.expression(resolved.expression, resolved.terms, at)
            called = name + _where(model, at, by_group, by_class)
            yield Followed("quantity", called, values, flat.terms(terms))


def _where(model: LatentClassModel, at: Instance, by_group: bool, by_class: bool) -> str:
    parts = []
    if by_group and model.groups is not None:
        parts.append(model.groups.levels[at.group])
    if by_class:
        parts.append(model.class_names[at.latent_class])
    return f" ({', '.join(parts)})" if parts else ""


def _hypotheses(
    posterior: Posterior,
    draws: ParameterDraws,
    claims: Mapping[str, Sequence[str]],
    flat: _Flatness,
) -> Iterator[Followed]:
    for claim, statements in claims.items():
        joined = joined_relations(posterior, list(statements))
        if any("=" in relation.signs for relation in joined.relations):
            continue
        holds = draws.holds(joined).astype(np.float64)
        yield Followed("hypothesis", claim, holds, flat.terms(terms_of(joined)))
