"""Comparing class counts and models: which are fitted, and with which seeds."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayeslca._typing import Seed
from bayeslca.assess.class_count.class_counts import PriorOnCount, checked_prior
from bayeslca.assess.comparison.comparison import Comparison, comparison_of
from bayeslca.assess.comparison.progress import ComparisonMeter, FitProgress, Show, shown
from bayeslca.assess.comparison.seeds_of_rows import entropy_of, seed_of_row
from bayeslca.assess.comparison.words import OWN, Name
from bayeslca.assess.left_out.folds import refuse_folds
from bayeslca.exceptions import ModelError
from bayeslca.model.answered_together import AnsweredTogether, checked_together
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

__all__ = ["Comparison", "FitProgress", "class_count_model", "compare", "compare_class_counts"]


def class_count_model(
    responses: Responses,
    n_classes: int,
    *,
    statements: Sequence[str] = (),
    groups: bool = True,
    pooled: bool = False,
    spread_prior: tuple[float, float] = (1.0, 1.0),
    answered_together: Sequence[AnsweredTogether | Sequence[str]] = (),
) -> LatentClassModel:
    """Return the model of a number of classes that a comparison of class counts fits.

    Parameters
    ----------
    responses : Responses
    n_classes : int
    statements : sequence of str
        What is stated of all classes alike, such as ``"P(fees=yes | .) ~ Beta(2, 2)"``.
    groups : bool
        Whether groups that the responses have get prevalences of their own.
    pooled, spread_prior
        Whether these are pooled, and the prior on their spread; see `LatentClassModel`. With one
        class there is nothing to pool.
    answered_together : sequence of AnsweredTogether
        Items that may go together within every class.
    """
    return LatentClassModel(
        responses.items,
        n_classes,
        statements=tuple(statements),
        groups=responses.groups if groups else None,
        pooled=pooled and n_classes > 1,
        spread_prior=spread_prior if pooled and n_classes > 1 else (1.0, 1.0),
        answered_together=checked_together(answered_together),
    )


def compare_class_counts(
    responses: Responses,
    counts: Iterable[int],
    *,
    statements: Sequence[str] = (),
    groups: bool = True,
    pooled: bool = False,
    spread_prior: tuple[float, float] = (1.0, 1.0),
    answered_together: Sequence[AnsweredTogether | Sequence[str]] = (),
    seed: Seed = None,
    fitted: Mapping[int, Posterior] | None = None,
    own: LatentClassModel | Posterior | None = None,
    prior_on_count: PriorOnCount | None = None,
    exact: bool | None = None,
    folds: int = 0,
    progress: bool | Show = True,
    **sampling: Any,
) -> Comparison:
    """Compare models with different numbers of classes, under one prior.

    Parameters
    ----------
    responses : Responses
    counts : iterable of int
        The numbers of classes, such as ``range(1, 7)``.
    statements : sequence of str
        Stated of all classes alike, in every model.
    groups : bool
        Whether groups that the responses have get prevalences of their own.
    pooled, spread_prior
        As in `class_count_model`.
    answered_together : sequence of AnsweredTogether
        Items that may go together within every class, in every model.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
        Each count has a stream of its own, so that its row does not depend on the others.
    fitted : mapping from int to Posterior, optional
        Fits that need not be done again.
    own : LatentClassModel or Posterior, optional
        The study's own model; it gets the row "this study".
    prior_on_count : mapping from int to float, optional
        Prior weight of each number of classes; all equal when left out.
    exact : bool, optional
        True: leave-one-out by refitting without one case of each distinct pattern. False: by
        importance sampling alone. Left out: refits where importance sampling is poor, at most
        12 for each row.
    folds : int
        Compare by so many folds of cases as well (10 is usual); 0 for none.
    progress : bool or callable
        True shows one bar on a terminal, over all fits, refits and evidences; a callable is given
        a `FitProgress`.
    **sampling
        Options of ``model.sample``: chains, draws, ess, r_hat, max_sweeps, sampler, threads.
    """
    wanted = _checked_counts(counts)
    checked_prior(prior_on_count, wanted)  # before anything is sampled
    entries: dict[Name, LatentClassModel | Posterior] = {}
    for n in wanted:
        model = class_count_model(
            responses,
            n,
            statements=statements,
            groups=groups,
            pooled=pooled,
            spread_prior=spread_prior,
            answered_together=answered_together,
        )
        entries[n] = (fitted or {}).get(n, model)
    if own is not None:
        entries[OWN] = own
    fit = _Fitting(responses, seed, progress, sampling, exact, folds)
    return _compared(entries, "classes", fit, prior_on_count)


def compare(
    models: Mapping[str, LatentClassModel | Posterior],
    responses: Responses | None = None,
    *,
    seed: Seed = None,
    exact: bool | None = None,
    folds: int = 0,
    progress: bool | Show = True,
    **sampling: Any,
) -> Comparison:
    """Compare models of the same answers by how well they predict them.

    Parameters
    ----------
    models : mapping from str to LatentClassModel or Posterior
        Models are sampled on ``responses``; posteriors are taken as they are.
    responses : Responses, optional
        Needed when a model is not fitted yet.
    seed, exact, folds, progress, **sampling
        As in `compare_class_counts`.

    Raises
    ------
    ModelError
        When nothing is given, or posteriors are of different items, cases or groups.
    """
    if not models:
        msg = "there is nothing to compare. Give a mapping of names to models or posteriors."
        raise ModelError(msg)
    for name, entry in models.items():
        if not isinstance(entry, LatentClassModel | Posterior):
            msg = (
                f"{name!r} is {type(entry).__name__}, not a LatentClassModel or a Posterior. "
                "Give a mapping of names to these."
            )
            raise ModelError(msg)
        if responses is None and isinstance(entry, LatentClassModel):
            msg = (
                f"{name!r} is a model that is not fitted yet, and there are no responses to fit "
                "it to. Give responses=..., or a posterior."
            )
            raise ModelError(msg)
    entries: dict[Name, LatentClassModel | Posterior] = {n: entry for n, entry in models.items()}
    fit = _Fitting(responses, seed, progress, sampling, exact, folds)
    return _compared(entries, "model", fit)


@dataclass(frozen=True)
class _Fitting:
    """How what is compared is fitted and refitted."""

    responses: Responses | None
    seed: Seed
    progress: bool | Show
    sampling: Mapping[str, Any]
    exact: bool | None
    folds: int


def _compared(
    entries: Mapping[Name, LatentClassModel | Posterior],
    index: str,
    how: _Fitting,
    prior: PriorOnCount | None = None,
) -> Comparison:
    given = {name: e.responses for name, e in entries.items() if isinstance(e, Posterior)}
    _refuse_different_answers(given, how.responses)
    if how.folds:
        refuse_folds((how.responses or next(iter(given.values()))).units, how.folds)
    classes = {
        name: (entry.model if isinstance(entry, Posterior) else entry).n_classes
        for name, entry in entries.items()
    }
    to_fit = {n: classes[n] for n, entry in entries.items() if isinstance(entry, LatentClassModel)}
    with shown(how.progress) as show:
        meter = ComparisonMeter(show, to_fit, classes)
        return comparison_of(
            _fitted(entries, how, meter),
            index,
            prior,
            exact=how.exact,
            folds=how.folds,
            progress=meter.of_refits,
            tell=meter.of_evidence,
        )


def _fitted(
    entries: Mapping[Name, LatentClassModel | Posterior], how: _Fitting, meter: ComparisonMeter
) -> dict[Name, Posterior]:
    """Sample what is not fitted yet, each with a seed of its own."""
    entropy = entropy_of(how.seed)
    posteriors: dict[Name, Posterior] = {}
    for name, entry in entries.items():
        if isinstance(entry, Posterior):
            posteriors[name] = entry
            continue
        assert how.responses is not None  # refused before
        posteriors[name] = entry.sample(
            how.responses,
            seed=seed_of_row(entropy, name),
            progress=meter.of_fit(name),
            **how.sampling,
        )
    return posteriors


def _checked_counts(counts: Iterable[int]) -> list[int]:
    given = [counts] if isinstance(counts, int) else list(counts)  # one count is a list of one
    wanted = [n.item() if isinstance(n, np.integer) else n for n in given]
    wrong = [n for n in wanted if isinstance(n, bool) or not isinstance(n, int) or n < 1]
    if wrong or not wanted:
        shown = repr(wrong[0]) if wrong else "no number"
        msg = f"{shown} given as a number of classes. Give whole numbers from 1, as range(1, 7)."
        raise ModelError(msg)
    return sorted(set(wanted))


def _refuse_different_answers(given: Mapping[Name, Responses], responses: Responses | None) -> None:
    """Refuse posteriors of other cases, items or groups than the rest."""
    known: dict[Name, Responses] = {} if responses is None else {"responses": responses}
    known.update(given)
    if len(known) < 2:
        return
    (first, reference), *rest = known.items()
    for name, other in rest:
        if other.data_hash == reference.data_hash:
            continue
        what = "the same items have different answers"
        if other.items != reference.items:
            what = "the items differ"
        elif other.groups != reference.groups:
            what = "the groups differ"
        elif other.n_cases != reference.n_cases:
            what = f"{other.n_cases} cases against {reference.n_cases}"
        msg = (
            f"{name!r} cannot be compared with {first!r}: {what}. Accuracy is of the same answers "
            "of the same cases; fit all models to one set of responses."
        )
        raise ModelError(msg)
