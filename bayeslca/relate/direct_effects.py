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
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.predictor_ways import WayDraws
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.covariates import Design

LEVEL = 0.05
FEWEST_LEFT = 1e-6
"""No test where the model's own parameters leave less than this share of the score unexplained."""


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


def find_direct_effects(posterior: Posterior, design: Design, way: WayDraws) -> DirectEffects:
    """Test every item and covariate at the posterior means of a model with covariates.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model.
    design : Design
    way : WayDraws
        The joint way, or the cut.

    Notes
    -----
    With case scores s of a direct effect and u of the model's own parameters, the statistic is
    sum(e) / sqrt(sum(e^2) n / (n - rank u)), with e what a regression of s on u leaves.
    """
    import pandas as pd
    from scipy.stats import norm

    codes = posterior.responses.codes[design.used]
    memberships, expected = _at_the_means(posterior, design, way, codes)
    shares = memberships[0]
    own = [(shares - memberships[1])[:, :, None] * design.matrix[:, None, :]]
    left_over: list[tuple[int, int, Floats]] = []
    start = posterior.table.item_start
    for j in range(posterior.table.n_items):
        for category in range(1, int(start[j + 1] - start[j])):
            is_answer = (codes[:, j] == category).astype(np.float64)
            residual = shares * (is_answer[:, None] - expected[:, :, start[j] + category])
            residual[codes[:, j] == MISSING] = 0.0
            own.append(residual[:, :, None])
            left_over.append((j, category, residual.sum(axis=1)))
    nuisance = np.concatenate([part.reshape(len(codes), -1) for part in own], axis=1)
    basis, sizes, _ = np.linalg.svd(nuisance, full_matrices=False)
    basis = basis[:, sizes > 1e-8 * sizes.max()]
    n, rank = basis.shape
    rows = []
    for j, category, residual in left_over:
        item = posterior.model.items[j]
        for p, column in enumerate(design.columns):
            if p == 0:
                continue
            score = residual * design.matrix[:, p]
            rest = score - basis @ (basis.T @ score)
            information = float(rest @ rest) * n / max(n - rank, 1)
            tested = information > FEWEST_LEFT * float(score @ score) and n > rank
            total = float(score.sum())
            rows.append(
                {
                    "item": item.name,
                    "category": item.categories[category],
                    "covariate": column.name,
                    "log_odds": total / information if tested else np.nan,
                    "sd": information**-0.5 if tested else np.nan,
                    "z": total * information**-0.5 if tested else np.nan,
                }
            )
    table = pd.DataFrame(rows)
    table["p_value"] = 2.0 * norm.sf(np.abs(table["z"]))
    table["p_adjusted"] = _holm(table["p_value"].to_numpy())
    return DirectEffects(table, _findings(table))


def _at_the_means(
    posterior: Posterior, design: Design, way: WayDraws, codes: Ints
) -> tuple[tuple[Floats, Floats], Floats]:
    """Return memberships and prevalences (n, K) and P(answer | class) (n, K, A) of each case."""
    from bayeslca.relate.predictor_tables import probabilities

    table = posterior.table
    elements = way.draws.elements.mean(axis=(0, 1))
    prevalence = probabilities(design.matrix, way.coefficients.mean(axis=(0, 1)))
    by_group = response_probability(table, elements)  # (G, K, A)
    grouped = posterior.model.groups is not None
    group = posterior.responses.group_codes[design.used] if grouped else np.zeros(len(codes), int)
    expected = by_group[table.response_group[group]]
    with np.errstate(divide="ignore"):
        joint = np.log(prevalence)
        for j in range(table.n_items):
            at = np.flatnonzero(codes[:, j] != MISSING)
            column = table.item_start[j] + codes[at, j]
            joint[at] += np.log(expected[at, :, column])
    joint -= joint.max(axis=1, keepdims=True)
    shares = np.exp(joint)
    return (shares / shares.sum(axis=1, keepdims=True), prevalence), expected


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
