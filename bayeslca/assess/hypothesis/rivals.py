"""Rival hypotheses: how probable each is, with "none of these" among them.

Each hypothesis is weighed against the fitted model; "none of these" is what the model holds
beyond all of them. Posterior probabilities follow from the Bayes factors and the prior weights,
which are equal unless given: they weigh theories against each other, and are not the probability
that a theory has among the draws of the model.

Reference
---------
Hoijtink, H., Mulder, J., van Lissa, C. & Gu, X. (2019). A tutorial on testing hypotheses using
the Bayes factor. Psychological Methods 24, 539-556.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Bools
from bayeslca.assess.hypothesis.bridge import ess
from bayeslca.assess.hypothesis.hypotheses import HypothesisTest, hypothesis_test, joined_relations
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.model.prior_draws import draw_prior
from bayeslca.posterior.quantities import group_share, posterior_parameters

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

NONE_OF_THESE = "none of these"
PRIOR_DRAWS = 100_000
BOUNDED_PRIOR_DRAWS = 20_000


@dataclass(frozen=True, eq=False)
class Rivals:
    """A set of hypotheses that compete.

    Attributes
    ----------
    table : DataFrame
        A row per hypothesis, "none of these" last where they leave something over; columns
        ``statement``, ``prior_weight``,
        ``posterior_weight`` (the posterior probability among the rivals), ``log_bayes_factor``
        and ``log_bayes_factor_mcse`` (against the model), ``posterior_probability`` and
        ``prior_probability`` (among the draws of the model; nan for equalities).
    tests : mapping of str to HypothesisTest
    findings : tuple of Finding
        Rivals that overlap, or that lie within one another.
    """

    table: pd.DataFrame
    tests: Mapping[str, HypothesisTest]
    findings: tuple[Finding, ...]

    @property
    def best(self) -> str:
        """The hypothesis with the highest posterior weight."""
        return str(self.table["posterior_weight"].idxmax())

    def __repr__(self) -> str:
        shares = ", ".join(
            f"{name}: {share:.2f}" for name, share in self.table["posterior_weight"].items()
        )
        noticed = "".join(f" {finding.message}" for finding in self.findings)
        return f"Posterior probabilities among the rivals: {shares}.{noticed}"


def compare_rivals(
    posterior: Posterior,
    hypotheses: Mapping[str, str | Sequence[str]],
    *,
    weights: Mapping[str, float] | None = None,
    none_of_these: bool = True,
    seed: int = 0,
) -> Rivals:
    """Weigh hypotheses against each other.

    Parameters
    ----------
    posterior : Posterior
    hypotheses : mapping from a name to a statement, or several that are all meant
    weights : mapping from a name to float, optional
        Prior weights; equal when left out. "none of these" may have one too.
    none_of_these : bool
        False when one of the hypotheses is held to be true. Rivals that cover everything, such
        as an order and its opposite, have no such row unless it was given a weight.
    seed : int

    Raises
    ------
    ModelError
        When there are fewer than two hypotheses, or a weight is not positive.
    """
    import pandas as pd

    if len(hypotheses) + none_of_these < 2:
        msg = "one hypothesis has no rivals. Give two or more, or call posterior.test(...)."
        raise ModelError(msg)
    texts = {
        name: (said,) if isinstance(said, str) else tuple(said) for name, said in hypotheses.items()
    }
    tests = {
        name: hypothesis_test(posterior, *statements, seed=seed)
        for name, statements in texts.items()
    }
    after, before = _holding(posterior, texts, seed)
    rows = {
        name: {
            "statement": test.text,
            "log_bayes_factor": test.log_bayes_factor,
            "log_bayes_factor_mcse": test.log_bayes_factor_mcse,
            "posterior_probability": test.posterior_probability,
            "prior_probability": test.prior_probability,
        }
        for name, test in tests.items()
    }
    asked = len(hypotheses) < 2 or NONE_OF_THESE in (weights or {})
    if none_of_these and (asked or _something_is_left(after, before)):
        rows[NONE_OF_THESE] = _none_of_these(after, before, posterior.draws.n_chains)
    table = pd.DataFrame.from_dict(rows, orient="index")
    table.index.name = "hypothesis"
    prior = _weights(list(table.index), weights or {})
    log_weight = np.log(prior) + table["log_bayes_factor"].to_numpy(dtype=float)
    shares = np.exp(log_weight - log_weight.max())
    table.insert(1, "prior_weight", prior)
    table.insert(2, "posterior_weight", shares / shares.sum())
    return Rivals(table, tests, _overlaps(before))


def _weights(names: Sequence[str], given: Mapping[str, float]) -> np.ndarray:
    unknown = [name for name in given if name not in names]
    if unknown:
        msg = f"a weight is given for {unknown[0]!r}, which is none of {', '.join(names)}."
        raise ModelError(msg)
    values = np.array([float(given.get(name, 1.0)) for name in names])
    if not np.all(np.isfinite(values)) or np.any(values <= 0):
        msg = "prior weights must be positive numbers. Leave a hypothesis out instead of giving 0."
        raise ModelError(msg)
    return np.asarray(values / values.sum())


def _holding(
    posterior: Posterior, texts: Mapping[str, Sequence[str]], seed: int
) -> tuple[dict[str, Bools], dict[str, Bools]]:
    """Return in which draws of posterior and prior each hypothesis holds."""
    n = BOUNDED_PRIOR_DRAWS if posterior.table.is_bounded else PRIOR_DRAWS
    prior = draw_prior(posterior.model, n, np.random.default_rng(seed), group_share(posterior))
    drawn = posterior_parameters(posterior)
    relations = {name: joined_relations(posterior, said) for name, said in texts.items()}
    return (
        {name: drawn.holds(said) for name, said in relations.items()},
        {name: prior.holds(said) for name, said in relations.items()},
    )


def _something_is_left(after: Mapping[str, Bools], before: Mapping[str, Bools]) -> bool:
    """Whether any draw is of none of the hypotheses: rivals that cover everything leave nothing."""
    return not all(bool(np.any(list(held.values()), axis=0).all()) for held in (after, before))


def _none_of_these(
    after: Mapping[str, Bools], before: Mapping[str, Bools], chains: int
) -> dict[str, object]:
    """Return the row of what the model holds beyond the hypotheses; equalities take nothing."""
    left = 1.0 - np.any(list(after.values()), axis=0).reshape(chains, -1)
    prior_left = 1.0 - np.any(list(before.values()), axis=0)
    n, m = ess(left), prior_left.size
    share, prior = float(left.mean()), float(prior_left.mean())
    factor = error = -math.inf
    if share > 0 and prior > 0:
        factor = math.log(share) - math.log(prior)
        error = math.hypot(((1 - share) / (n * share)) ** 0.5, ((1 - prior) / (m * prior)) ** 0.5)
    elif prior > 0:  # in no draw: 3 of n at the most (rule of three)
        factor, error = math.log(3.0 / n) - math.log(prior), math.inf
    return {
        "statement": NONE_OF_THESE,
        "log_bayes_factor": factor,
        "log_bayes_factor_mcse": error,
        "posterior_probability": share,
        "prior_probability": prior,
    }


def _overlaps(before: Mapping[str, Bools]) -> tuple[Finding, ...]:
    """Name the pairs that can both be true."""
    out, names = [], list(before)
    for i, one in enumerate(names):
        for two in names[i + 1 :]:
            both = before[one] & before[two]
            if not both.any():
                continue
            kind, how = "hypotheses_overlap", f"“{one}” and “{two}” overlap: both can be true."
            if np.array_equal(both, before[one]) or np.array_equal(both, before[two]):
                inner, outer = (one, two) if np.array_equal(both, before[one]) else (two, one)
                kind = "hypotheses_nested"
                how = f"“{inner}” lies within “{outer}”: when it is true, so is the other."
            out.append(
                Finding(
                    kind=kind,
                    level="note",
                    message=how,
                    remedy="Read their shares as support for each theory as a whole.",
                    about=(one, two),
                )
            )
    return tuple(out)
