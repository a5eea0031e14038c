"""The density of one case given the others, from draws of both posteriors: with it and without.

The mean of p(case | parameters) over the posterior without the case has a heavy tail when the
case has nearly a class to itself: few draws have that class. Its inverse over the posterior with
the case (which importance sampling takes) has a heavy tail for the same reason, seen from the
other side. A bridge between the two posteriors takes means of bounded functions of each.

References
----------
Meng, X.-L. & Wong, W. H. (1996). Simulating ratios of normalizing constants via a simple
identity. Statistica Sinica 6, 831-860, equation 4.1 (two samples: Bennett 1976, J. Comput. Phys.
22, 245-268). From memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats

ROUNDS = 200
CLOSE = 1e-10


@dataclass(frozen=True, eq=False)
class Bridged:
    """A log density of one case, and what each draw adds to it to first order.

    Attributes
    ----------
    log_density : float
    without : ndarray of float64, shape (chain, draw)
        Of the draws of the posterior without the case.
    given : ndarray of float64, shape (chain, draw)
        Of the draws of the posterior with it.
    least_draws : float
        Draws that the mean which rests on fewer of them rests on: (sum)^2 / sum of squares.
    """

    log_density: float
    without: Floats
    given: Floats
    least_draws: float


def one_case_bridge(without: Floats, given: Floats) -> Bridged:
    """Return the log density of a case given the others.

    Parameters
    ----------
    without : ndarray, shape (chain, draw)
        log p(case | parameters) at draws of the posterior without it.
    given : ndarray, shape (chain, draw)
        The same at draws of the posterior with it.

    Notes
    -----
    r = mean of p / (s1 p + s2 r) without, over mean of 1 / (s1 p + s2 r) with it, solved by
    repetition; s1 and s2 are the shares of the draws. The weights' own dependence on r does not
    matter to first order, as every weight gives the right ratio.
    """
    share = given.size / (given.size + without.size)
    log_given, log_without = np.log(share), np.log1p(-share)
    log_r = float(logsumexp(without) - np.log(without.size))
    for _ in range(ROUNDS):
        above = without - np.logaddexp(log_given + without, log_without + log_r)
        below = -np.logaddexp(log_given + given, log_without + log_r)
        before = log_r
        log_r = float(logsumexp(above) - np.log(above.size) - logsumexp(below) + np.log(below.size))
        if abs(log_r - before) < CLOSE:
            break
    parts = [np.exp(x - logsumexp(x) + np.log(x.size)) for x in (above, below)]
    return Bridged(
        log_density=log_r,
        without=parts[0] - 1.0,
        given=1.0 - parts[1],
        least_draws=min(float(x.sum() ** 2 / np.square(x).sum()) for x in parts),
    )
