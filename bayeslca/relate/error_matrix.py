"""The classification-error matrix: where the cases of each class end up when they are placed.

Three-step estimators place each case in a class, regress on the placed class, and undo the error
of placement. Both published corrections start from P(placed in s | class t), found from the
memberships of a model without the variable that is related to class.

References
----------
Bolck, A., Croon, M. & Hagenaars, J. (2004). Estimating latent structure models with categorical
variables: one-step versus three-step estimators. Political Analysis 12, 3-27.
Vermunt, J. K. (2010). Latent class modeling with covariates: two improved three-step approaches.
Political Analysis 18, 450-469 (equations 6, 11 and 14).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError

Placement = Literal["modal", "proportional"]
PLACEMENTS: tuple[Placement, ...] = ("modal", "proportional")
LEAST_KEPT = 1e-8
"""A matrix whose smallest singular value is below this cannot be inverted: classes coincide."""


@dataclass(frozen=True, eq=False)
class ErrorMatrix:
    """How cases were placed, and how often the placement is wrong.

    N cases, K classes, G groups whose prevalences differ (one when there are none).

    Attributes
    ----------
    placed : ndarray, shape (N, K)
        Share of each case in each placed class: one 1 per row when placed in the modal class, the
        memberships when placed in proportion to them. Rows sum to 1.
    share : ndarray, shape (G, K, K)
        ``share[g, t, s]``: P(placed in s | class t) in group g. Rows sum to 1.
    class_share : ndarray, shape (G, K)
        Expected share of each class in each group.
    group : ndarray of int, shape (N,)
    """

    placed: Floats
    share: Floats
    class_share: Floats
    group: Ints

    @property
    def inverse_weights(self) -> Floats:
        """Weights (N, K) of each case in each class that undo the error; some are negative.

        The product of ``placed`` and the inverse of ``share``: in expectation given the true
        class they are 1 in that class and 0 elsewhere (Bolck, Croon & Hagenaars 2004).

        Raises
        ------
        ModelError
            When the matrix of a group cannot be inverted.
        """
        out = np.empty_like(self.placed)
        for g, share in enumerate(self.share):
            if np.linalg.svd(share, compute_uv=False)[-1] < LEAST_KEPT:
                of_group = " of a group (each has its own)" if len(self.share) > 1 else ""
                msg = (
                    f"the classification-error matrix{of_group} cannot be inverted: cases "
                    "of two classes are placed alike, so placement says nothing of them. Take "
                    "fewer classes, or relate by the joint or the cut way."
                )
                raise ModelError(msg)
            mine = self.group == g
            out[mine] = self.placed[mine] @ np.linalg.inv(share)
        return out

    @property
    def log_likelihood(self) -> Floats:
        """Log of P(placed as it was | class), shape (N, K), which is held fixed in step three.

        Raises
        ------
        ModelError
            When cases are placed in shares: each share is then a record of its own, see
            `mean_log_mixture`.
        """
        if np.any(self.placed.max(axis=1) < 1.0):
            msg = "cases are placed in shares, so a case has no single log likelihood."
            raise ModelError(msg)
        return np.asarray(np.einsum("ns,nts->nt", self.placed, self._log_share[self.group]))

    def mean_log_mixture(self, log_joint: Floats) -> Floats:
        """Return the log likelihood of each case, averaged over where it was placed.

        Parameters
        ----------
        log_joint : ndarray, shape (N, K)
            log P(class) + log density of what is related to class.

        Returns
        -------
        ndarray, shape (N,)
            Sum over s of (share placed in s) log sum over t of P(t) density P(s | t) (Vermunt
            2010, equation 14).
        """
        logs = self._log_share
        out = np.zeros(len(log_joint))
        for s in range(log_joint.shape[1]):
            mine = self.placed[:, s] > 0.0
            if mine.any():
                terms = log_joint[mine] + logs[self.group[mine], :, s]
                highest = terms.max(axis=1)
                logged = highest + np.log(np.exp(terms - highest[:, None]).sum(axis=1))
                out[mine] += self.placed[mine, s] * logged
        return out

    @cached_property
    def _log_share(self) -> Floats:
        """Logs of ``share``, shape (G, K true, K placed); those of 0 very small."""
        with np.errstate(divide="ignore"):
            return np.maximum(np.log(self.share), np.log(np.finfo(np.float64).tiny))


def error_matrix(
    membership: Floats,
    *,
    by: Placement = "modal",
    counts: Floats | Ints | None = None,
    group: Ints | None = None,
) -> ErrorMatrix:
    """Place the cases and find how often that is wrong.

    Parameters
    ----------
    membership : ndarray, shape (N, K)
        P(class | answers) from the measurement model alone.
    by : {"modal", "proportional"}
        Place each case in its most probable class, or in all classes by its probabilities.
    counts : ndarray, shape (N,), optional
        Cases per row; 1 when left out.
    group : ndarray of int, shape (N,), optional
        Groups whose prevalences differ: each has a matrix of its own. One when left out.

    Returns
    -------
    ErrorMatrix

    Raises
    ------
    ModelError
        When ``by`` is unknown, or a class is expected to have no case in a group.

    Notes
    -----
    share[t, s] = sum_i m_it w_is / sum_i m_it, with memberships m and placements w.
    """
    if by not in PLACEMENTS:
        msg = f"by={by!r}: cases are placed by 'modal' or by 'proportional'."
        raise ModelError(msg)
    n_cases, n_classes = membership.shape
    times = np.ones(n_cases) if counts is None else np.asarray(counts, dtype=np.float64)
    at = np.zeros(n_cases, dtype=np.int64) if group is None else np.asarray(group, dtype=np.int64)
    n_groups = int(at.max(initial=0)) + 1
    placed = np.array(membership, dtype=np.float64)
    if by == "modal":
        placed = np.eye(n_classes)[membership.argmax(axis=1)]
    share = np.empty((n_groups, n_classes, n_classes))
    class_share = np.empty((n_groups, n_classes))
    for g in range(n_groups):
        mine = at == g
        weighted = membership[mine] * times[mine, None]
        expected = weighted.sum(axis=0)
        if np.any(expected <= 0.0):
            where = f" in group {g + 1}" if n_groups > 1 else ""
            msg = (
                f"class {int(np.argmin(expected)) + 1} has no expected case{where}, so it is not "
                "known how its cases are placed. Relate by the joint or the cut way."
            )
            raise ModelError(msg)
        share[g] = weighted.T @ placed[mine] / expected[:, None]
        class_share[g] = expected / expected.sum()
    return ErrorMatrix(placed, share, class_share, at)
