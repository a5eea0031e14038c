"""P(number of classes | answers) again, under priors half and twice as strong.

The probability of a number of classes leans on the priors of all probabilities, far more than
predictive accuracy does. How far is seen by fitting every number once more under other priors:
Beta and Dirichlet parameters times 1/2 and 2, for prevalences and response probabilities alike.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bayeslca.assess.class_count.class_counts import ClassCounts, class_counts
from bayeslca.assess.comparison.progress import ComparisonMeter, Show, shown
from bayeslca.assess.comparison.seeds_of_rows import entropy_of, seed_of_row
from bayeslca.assess.comparison.words import Name, listed_with_and, row_in_words
from bayeslca.assess.priors.words import called
from bayeslca.exceptions import ModelError
from bayeslca.model.alternative_priors import HALF, TWICE, distinct_alternatives

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca._typing import Seed
    from bayeslca.posterior.posterior import Posterior

AS_STATED = "as stated"
MOSTLY = 0.05
"""Numbers with at least this probability are named."""


@dataclass(frozen=True, eq=False, repr=False)
class CountsUnderOtherPriors:
    """How probable each number of classes is, prior by prior.

    Attributes
    ----------
    table : DataFrame
        A row per ``prior`` ("as stated" first) and number of ``classes``, with ``log_evidence``,
        ``log_evidence_mcse``, ``probability``, ``probability_mcse``, ``reliable`` and ``reason``
        as in `ClassCounts`.
    by_prior : dict from str to ClassCounts
    left_out : dict from str to str
        Priors that were asked for and are not there, and why.
    verdict : str
        Whether the answer to "how many" hangs on the prior.
    """

    table: pd.DataFrame
    by_prior: dict[str, ClassCounts]
    left_out: dict[str, str]
    verdict: str

    def __repr__(self) -> str:
        shares = self.table["probability"].unstack("classes")
        shares = shares.loc[list(self.by_prior)]
        return f"P(number of classes | answers)\n{shares.round(3).to_string()}\n\n{self.verdict}"


def counts_under_other_priors(
    stated: ClassCounts,
    posteriors: Mapping[int, Posterior],
    names: Sequence[str] = (HALF, TWICE),
    *,
    seed: Seed = None,
    progress: bool | Show = True,
    **sampling: Any,
) -> CountsUnderOtherPriors:
    """Fit every number of classes under other priors and weigh the numbers anew.

    Parameters
    ----------
    stated : ClassCounts
        Under the priors as stated; also gives the prior on the number of classes.
    posteriors : mapping from int to Posterior
        Those it was found from.
    names : sequence of str
        Of `bayeslca.model.alternative_priors.ALTERNATIVES`.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    progress : bool or callable
        As in `bayeslca.compare_class_counts`.
    **sampling
        Options of ``model.sample``.

    Raises
    ------
    ModelError
        When a prior is not known.
    """
    counts = sorted(posteriors)
    models, left_out = distinct_alternatives(posteriors[counts[-1]].model, names)
    by_prior = {AS_STATED: stated}
    prior = dict(zip(stated.table.index, stated.table["prior"], strict=True))
    to_fit: dict[Name, int] = {f"{k}, {name}": k for name in models for k in counts}
    entropy = entropy_of(seed)
    with shown(progress) as show:
        meter = ComparisonMeter(show, to_fit, to_fit)
        found: dict[str, dict[int, Posterior]] = {}
        for name in models:
            found[name] = {}
            for k in counts:
                others, same = distinct_alternatives(posteriors[k].model, (name,))
                if same:  # one class and no prior of its own: nothing changes
                    found[name][k] = posteriors[k]
                    continue
                row = f"{k}, {name}"
                found[name][k] = others[name].sample(
                    posteriors[k].responses,
                    seed=seed_of_row(entropy, row),
                    progress=meter.of_fit(row),
                    **sampling,
                )
        for at, (name, fits) in enumerate(found.items()):
            by_prior[name] = class_counts(
                fits,
                prior=prior,
                tell=lambda done, at=at: meter.of_evidence((at + done) / len(found)),  # type: ignore[misc]
            )
    return CountsUnderOtherPriors(
        _table(by_prior), by_prior, left_out, _verdict(by_prior, left_out)
    )


def _table(by_prior: Mapping[str, ClassCounts]) -> pd.DataFrame:
    import pandas as pd

    columns = [
        "log_evidence", "log_evidence_mcse", "probability", "probability_mcse", "reliable", "reason"
    ]  # fmt: skip
    frames = {name: one.table[columns] for name, one in by_prior.items()}
    return pd.concat(frames, names=["prior", "classes"])


def _verdict(by_prior: Mapping[str, ClassCounts], left_out: Mapping[str, str]) -> str:
    """Say which numbers are probable under each prior, and whether the likeliest stays."""
    best: dict[str, int] = {}
    parts = []
    for name, one in by_prior.items():
        chance = one.table["probability"]
        if chance.isna().all():
            parts.append(f"{_under(name)}, no number could be weighed reliably")
            continue
        shares = {int(k): float(p) for k, p in zip(one.table.index, chance, strict=True)}
        ranked = sorted((k for k in shares if shares[k] >= MOSTLY), key=lambda k: -shares[k])
        best[name] = ranked[0]
        named = [f"{row_in_words(k)} ({shares[k]:.2f})" for k in ranked]
        parts.append(f"{_under(name)}, probable are {listed_with_and(named)}")
    text = "; ".join(parts) + "."
    text = text[0].upper() + text[1:]
    if len(best) > 1:
        if len(set(best.values())) == 1:
            most = row_in_words(next(iter(best.values())))
            text += f" Under each of these priors {most} {_are(best)} the most probable number."
        else:
            others = [f"{row_in_words(k)} {_under(name)}" for name, k in best.items()]
            text += " The most probable number hangs on the prior: " + listed_with_and(others) + "."
    for name, why in left_out.items():
        text += f" Not done for priors {called(name)}: {why}."
    return text


def _under(name: str) -> str:
    return f"under the priors {name}" if name == AS_STATED else f"under priors {called(name)}"


def _are(best: Mapping[str, int]) -> str:
    return "is" if next(iter(best.values())) == 1 else "are"


def counts_of(comparison_counts: ClassCounts | None) -> ClassCounts:
    """Return the counts of a comparison, or refuse.

    Raises
    ------
    ModelError
        When no numbers of classes were compared.
    """
    if comparison_counts is None:
        msg = "no numbers of classes were compared here, so there are none to weigh anew."
        raise ModelError(msg)
    return comparison_counts
