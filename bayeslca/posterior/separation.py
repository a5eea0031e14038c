"""How well classes are separated, and what placing cases in their modal class gets wrong."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import xlogy

from bayeslca._typing import Floats
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.posterior.summary import Quantities, summary_frame

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

ONE_CLASS = "with one class there is nothing to separate"


@dataclass(frozen=True, eq=False)
class Placement:
    """What the memberships give in each draw.

    Attributes
    ----------
    shares : ndarray, shape (chain, draw, K, K)
        Of the cases of class k, the share whose modal class is the second index. The modal class
        is the one of the posterior mean, the same in every draw; nan where a draw expects
        no case in the class.
    separation : ndarray, shape (chain, draw)
        Relative entropy; nan with one class.
    """

    shares: Floats
    separation: Floats


def placement(posterior: Posterior) -> Placement:
    """Go through all draws once for the membership of every unit."""
    draws, units, table = posterior.draws, posterior.unit_table, posterior.table
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    n_draws, n_classes = elements.shape[0], table.n_classes
    mean = np.zeros((n_classes, units.n_units))
    entropy = np.empty(n_draws)
    for piece, joint in log_joint(table, units, elements, prevalence):
        share = class_shares(joint)
        mean += share.sum(axis=2) / n_draws
        entropy[piece] = -units.count @ xlogy(share, share).sum(axis=0)
    placed = (mean.argmax(axis=0)[:, None] == np.arange(n_classes)) * units.count[:, None]
    shares = np.empty((n_draws, n_classes, n_classes))
    for piece, joint in log_joint(table, units, elements, prevalence):
        shares[piece] = np.einsum("kus,ua->ska", class_shares(joint), placed, optimize=True)
    with np.errstate(invalid="ignore", divide="ignore"):
        shares /= shares.sum(axis=2, keepdims=True)
        separation = 1.0 - entropy / (units.n_cases * np.log(n_classes))
    if n_classes == 1:
        separation[:] = np.nan
    leading = (draws.n_chains, draws.n_draws)
    return Placement(shares.reshape(*leading, n_classes, n_classes), separation.reshape(leading))


def assignment_keys(class_names: Sequence[str]) -> pd.DataFrame:
    """Return the key columns of the table of assignment error."""
    import pandas as pd

    pairs = [(one, two) for one in class_names for two in class_names]
    return pd.DataFrame(pairs, columns=["latent_class", "assigned_class"])


def separation_table(quantities: Quantities, interval: float) -> pd.DataFrame:
    """Return the summary of the relative entropy, with the reason where it is nan."""
    import pandas as pd

    frame = summary_frame(pd.DataFrame({"quantity": ["separation"]}), quantities, interval)
    frame["note"] = ONE_CLASS if np.isnan(quantities.draws).all() else ""
    return frame
