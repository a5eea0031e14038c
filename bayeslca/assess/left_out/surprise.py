"""How surprising a case's answers are: its predictive density against those of new cases.

Cases are compared with new cases of their own group that answered the same items, as fewer
answers are more probable whoever gives them. The lowest of many cases is low by chance alone, so
it is judged against the lowest of whole replicates of the data.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.fit.replicates import spread_draws
from bayeslca.assess.fit.strata import Strata, strata_of
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import log_unit_likelihood, row_probability
from bayeslca.model.simulate import draw_categories
from bayeslca.responses.units import MISSING, Units, collapse

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_CASES = 200_000
MOST_REPLICATES, FEWEST_REPLICATES = 1000, 20
SCORING_DRAWS = 1000
"""Draws over which the density of a new case's answers is averaged."""
CLOSE = 1e-9


@dataclass(frozen=True, eq=False)
class Surprise:
    """How low the predictive densities of the responses' units are.

    Attributes
    ----------
    p : ndarray of float64, shape (U,)
        Probability that a new case, of the same group and with the same items answered, has
        answers as improbable, or more so.
    p_lowest : ndarray of float64, shape (U,)
        Share of replicates of the whole data that hold a case with as small a ``p``.
    replicates : int
    """

    p: Floats
    p_lowest: Floats
    replicates: int


def surprise(posterior: Posterior, log_density: Floats, seed: int) -> Surprise:
    """Judge how low predictive densities are.

    Parameters
    ----------
    posterior : Posterior
    log_density : ndarray, shape (U,)
        Leave-one-out log density of a case of each of the responses' units.
    seed : int

    Notes
    -----
    A new case is scored given all cases, an observed one given all others: as far as the model
    is right the two are exchangeable. A new case with the very answers of the observed one ties
    with it, as each would have the other among the cases that it is scored by.
    """
    strata = strata_of(posterior.model, posterior.responses)
    n_cases = int(strata.size.sum())
    wanted = int(np.clip(MOST_CASES // n_cases, FEWEST_REPLICATES, MOST_REPLICATES))
    draws = posterior.draws
    at = spread_draws(draws.n_draws, draws.n_chains, wanted)
    elements = np.concatenate(draws.elements[:, at])
    prevalence = draws.prevalence[:, at].reshape(-1, *draws.prevalence.shape[2:])
    rows = row_probability(posterior.table, elements)
    codes = _new_cases(posterior, strata, rows, prevalence, np.random.default_rng(seed))
    key, scores = _scored(posterior, strata, codes, len(elements))
    p = np.ones(log_density.size)
    smallest = np.ones(len(elements))
    first = 0
    for s, size in enumerate(strata.size.tolist()):
        inside = slice(first, first + size)
        mine, keys = scores[:, inside], key[:, inside]
        ranked = np.sort(mine, axis=None)
        tail = np.searchsorted(ranked, mine + CLOSE, side="right") / ranked.size
        smallest = np.minimum(smallest, tail.min(axis=1))
        for u in np.flatnonzero(strata.stratum_of_unit == s):
            low = (mine <= log_density[u] + CLOSE) | (keys == u)
            p[u] = low.mean()
        first += size
    # A case that no replicate came near: one more draw than there were is the least that is known
    floor = 1.0 / (len(elements) * strata.size[strata.stratum_of_unit] + 1.0)
    shares = np.array([np.mean(smallest <= one + CLOSE) for one in p])
    return Surprise(np.maximum(p, floor), shares, len(elements))


def _new_cases(
    posterior: Posterior,
    strata: Strata,
    rows: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> Ints:
    """Draw a replicate of the data at each draw: codes (D, case, item), stratum by stratum."""
    table, fields = posterior.table, strata.fields
    n_draws = len(rows)
    parts = []
    for s, size in enumerate(strata.size.tolist()):
        shares = prevalence[:, strata.prevalence_row[s]]
        latent = draw_categories(
            np.broadcast_to(shares[:, None], (n_draws, size, table.n_classes)), rng
        )
        codes = np.full((n_draws, size, table.n_items), MISSING, dtype=np.int16)
        for f in strata.field[strata.field_start[s] : strata.field_start[s + 1]]:
            answers = fields.row[fields.start[f] : fields.start[f + 1]]
            by_class = np.swapaxes(rows[:, answers], 1, 2)  # (D, K, answers)
            answer = draw_categories(by_class[np.arange(n_draws)[:, None], latent], rng)
            for item, size_of in zip(fields.item[f, ::-1], fields.size[f, ::-1], strict=True):
                answer, category = np.divmod(answer, size_of)
                if item >= 0:
                    codes[..., item] = category
        parts.append(codes)
    return np.concatenate(parts, axis=1)


def _scored(posterior: Posterior, strata: Strata, codes: Ints, n_draws: int) -> tuple[Ints, Floats]:
    """Return the unit of the responses that each new case is like (-1: none), and its density.

    Both of shape (D, case).
    """
    n_cases = codes.shape[1]
    flat = codes.reshape(-1, codes.shape[2])
    group = np.tile(np.repeat(strata.group, strata.size), n_draws).astype(np.int32)
    categories = tuple(item.n_categories for item in strata.items)
    new = collapse(flat, group, np.ones(len(flat), dtype=np.int64), categories)
    pooled = posterior.model.groups is None
    seen = replace(new, group=np.zeros_like(new.group)) if pooled else new
    table, draws = posterior.table, posterior.draws
    at = spread_draws(draws.n_draws, draws.n_chains, SCORING_DRAWS)
    log_p = log_unit_likelihood(
        table,
        compile_units(table, seen),
        np.concatenate(draws.elements[:, at]),
        draws.prevalence[:, at].reshape(-1, *draws.prevalence.shape[2:]),
    )
    density = logsumexp(log_p, axis=0) - np.log(len(log_p))
    like = _like(new, strata.units)
    unit = new.unit_of_row.reshape(n_draws, n_cases)
    return like[unit], density[unit]


def _like(new: Units, known: Units) -> Ints:
    """Return the known unit with the same group and answers of each new one; -1 for none."""
    place = {
        (int(g), pattern.tobytes()): u
        for u, (g, pattern) in enumerate(
            zip(known.group, known.pattern.astype(np.int16), strict=True)
        )
    }
    return np.array(
        [
            place.get((int(g), pattern.tobytes()), -1)
            for g, pattern in zip(new.group, new.pattern.astype(np.int16), strict=True)
        ],
        dtype=np.int64,
    )
