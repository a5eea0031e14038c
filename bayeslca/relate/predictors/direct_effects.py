"""Direct effects: whether a covariate goes with an answer beyond class, item by item.

The regression assumes that covariates act on answers through class alone. A score test looks at
one item and one covariate at a time: is the part of the answer that class leaves open associated
with the covariate? The size is a one-step estimate of the log odds ratio, the same in all classes.

References
----------
Rao, C. R. (1948). Large sample tests of statistical hypotheses concerning several parameters.
Mathematical Proceedings of the Cambridge Philosophical Society 44, 50-57 (the score test).
Masyn, K. E. (2017). Measurement invariance and differential item functioning in latent class
analysis with stepwise multiple indicator multiple cause modeling. Structural Equation Modeling 24,
180-197 (why direct effects bias the regression; from memory).
Holm, S. (1979). A simple sequentially rejective multiple test procedure. Scandinavian Journal of
Statistics 6, 65-70.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.findings import Finding
from bayeslca.model.probabilities import response_probability
from bayeslca.model.simulate import draw_categories
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.predictors.ways import WayDraws
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.predictors.covariates import Design

LEVEL = 0.05
MOST_ROWS = 40_000
"""Replicated cases, about."""
LEAST_INFORMATION = 1.0
"""No test where the answers hold less: a direct effect's standard error would be above 1."""


@dataclass(frozen=True, eq=False)
class DirectEffects:
    """Direct effects of every covariate on every item.

    Attributes
    ----------
    table : DataFrame
        A row per ``item``, ``category`` (the first one left out) and ``covariate`` (column of the
        design): ``log_odds``, the one-step estimate of the change in the log odds of the answer,
        class given, ``sd``, ``z``, ``p_value``, and ``p_adjusted`` (Holm) over all rows.
    findings : tuple of Finding
        Rows whose adjusted p-value is below 0.05.
    """

    table: pd.DataFrame
    findings: tuple[Finding, ...]


def find_direct_effects(
    posterior: Posterior, design: Design, way: WayDraws, seed: int = 0
) -> DirectEffects:
    """Test every item and covariate at the posterior means of a model with covariates.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    design : Design
    way : WayDraws
        The joint way, or the cut.
    seed : int
        Of the replicates of the answers.

    Notes
    -----
    With case scores s of a direct effect and u of the model's own parameters, the statistic is
    sum(s - u B) over its standard deviation. B and that deviation are those of replicates of the
    answers from the model, with the cases' covariates and missing answers: scores of the cases
    themselves are too few where an answer is rare.
    """
    import pandas as pd
    from scipy.stats import norm

    point = _Point.of(posterior, design, way)
    codes = posterior.responses.codes[design.used].astype(np.int64)
    rng = np.random.default_rng(seed)
    replicates = int(np.clip(MOST_ROWS // len(codes), 20, 400))
    rows = np.tile(np.arange(len(codes)), replicates)
    own, residuals = point.scores(codes, np.arange(len(codes)))
    own_again, residuals_again = point.scores(point.replicate(codes[rows], rows, rng), rows)
    inverse = np.linalg.pinv(own_again.T @ own_again, rcond=1e-10, hermitian=True)
    out = []
    for (j, category), residual in residuals.items():
        item = posterior.model.items[j]
        for p, column in enumerate(design.columns):
            if p == 0:
                continue
            score = residual * design.matrix[:, p]
            again = residuals_again[j, category] * design.matrix[rows, p]
            weights = inverse @ (own_again.T @ again)
            left = again - own_again @ weights
            information = float(left @ left) / replicates
            tested = information > LEAST_INFORMATION
            total = float(score.sum() - own.sum(axis=0) @ weights)
            out.append(
                {
                    "item": item.name,
                    "category": item.categories[category],
                    "covariate": column.name,
                    "log_odds": total / information if tested else np.nan,
                    "sd": information**-0.5 if tested else np.nan,
                    "z": total * information**-0.5 if tested else np.nan,
                }
            )
    table = pd.DataFrame(out)
    table["p_value"] = 2.0 * norm.sf(np.abs(table["z"]))
    table["p_adjusted"] = _holm(table["p_value"].to_numpy())
    return DirectEffects(table, _findings(table))


@dataclass(frozen=True, eq=False)
class _Point:
    """A model with covariates at one value of its parameters; n cases, A answers of all items.

    Attributes
    ----------
    design : ndarray, shape (n, P)
    prevalence : ndarray, shape (n, K)
    response : ndarray, shape (G, K, A)
        P(answer | class) of each response group.
    group : ndarray of int, shape (n,)
        Response group of each case.
    item_start : ndarray of int, shape (J + 1,)
    """

    design: Floats
    prevalence: Floats
    response: Floats
    group: Ints
    item_start: Ints

    @classmethod
    def of(cls, posterior: Posterior, design: Design, way: WayDraws) -> _Point:
        """Return the model at its posterior means."""
        from bayeslca.relate.predictors.tables import probabilities

        table = posterior.table
        grouped = posterior.model.groups is not None
        of_case = posterior.responses.group_codes[design.used]
        group = of_case if grouped else np.zeros_like(of_case)
        return cls(
            design.matrix,
            probabilities(design.matrix, way.coefficients.mean(axis=(0, 1))),
            response_probability(table, way.draws.elements.mean(axis=(0, 1))),
            table.response_group[group],
            np.asarray(table.item_start),
        )

    def replicate(self, codes: Ints, rows: Ints, rng: np.random.Generator) -> Ints:
        """Draw answers of the cases in ``rows``, missing where ``codes`` are."""
        latent_class = draw_categories(self.prevalence[rows], rng)
        out = np.full(codes.shape, MISSING, dtype=np.int64)
        for j in range(codes.shape[1]):
            columns = slice(self.item_start[j], self.item_start[j + 1])
            chance = self.response[self.group[rows], latent_class, columns]
            out[:, j] = np.where(codes[:, j] == MISSING, MISSING, draw_categories(chance, rng))
        return out

    def scores(self, codes: Ints, rows: Ints) -> tuple[Floats, dict[tuple[int, int], Floats]]:
        """Return case scores (n, own parameters) and the residual (n,) of each answer.

        The first answer of an item is left out: it is 1 minus the others.
        """
        expected = self.response[self.group[rows]]  # (n, K, A)
        prevalence = self.prevalence[rows]
        with np.errstate(divide="ignore"):
            joint = np.log(prevalence)
            for j in range(codes.shape[1]):
                at = np.flatnonzero(codes[:, j] != MISSING)
                joint[at] += np.log(expected[at, :, self.item_start[j] + codes[at, j]])
        joint -= joint.max(axis=1, keepdims=True)
        shares = np.exp(joint)
        shares /= shares.sum(axis=1, keepdims=True)
        own = [((shares - prevalence)[:, :, None] * self.design[rows][:, None, :])]
        residuals = {}
        for j in range(codes.shape[1]):
            for category in range(1, int(self.item_start[j + 1] - self.item_start[j])):
                is_answer = (codes[:, j] == category).astype(np.float64)
                part = shares * (is_answer[:, None] - expected[:, :, self.item_start[j] + category])
                part[codes[:, j] == MISSING] = 0.0
                own.append(part[:, :, None])
                residuals[j, category] = part.sum(axis=1)
        return np.concatenate([part.reshape(len(codes), -1) for part in own], axis=1), residuals


def _holm(p_values: Floats) -> Floats:
    """Return p-values adjusted for all tests (Holm 1979); nan stays nan."""
    out = np.full(p_values.size, np.nan)
    known = np.flatnonzero(np.isfinite(p_values))
    order = known[np.argsort(p_values[known], kind="stable")]
    steps = p_values[order] * np.arange(order.size, 0, -1)
    out[order] = np.minimum(np.maximum.accumulate(steps), 1.0)
    return out


def _findings(table: pd.DataFrame) -> tuple[Finding, ...]:
    found = table[table["p_adjusted"] < LEVEL].sort_values("p_value")
    return tuple(
        Finding(
            "direct_effect",
            "warning",
            f"{row['item']} goes with {row['covariate']} beyond class: the log odds of "
            f"{row['category']!r} change by about {row['log_odds']:+.2f} (z = {row['z']:.1f}, "
            f"p = {row['p_adjusted']:.2g} after all tests).",
            remedy=(
                "Rely on the cut rather than the joint way for this covariate; for a covariate "
                "of categories, let the item differ by it (groups and free_by_group)."
            ),
            about=(str(row["item"]), str(row["covariate"])),
            value=float(row["z"]),
        )
        for row in found.to_dict("records")
    )
