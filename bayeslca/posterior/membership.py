"""Membership: how probably a case is of each class, given its answers."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import BayesLCAError, BayesLCAWarning
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import PIECE, membership
from bayeslca.model.table import UnitTable
from bayeslca.posterior.summary import check_interval
from bayeslca.responses.units import Units
from bayeslca.sampling.stopping import some_units

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses


@dataclass(frozen=True, eq=False)
class MembershipSummary:
    """P(class | answers) over the draws of the parameters.

    Attributes
    ----------
    mean, lower, upper : ndarray, shape (..., K)
        Posterior mean, and ends of the equal-tailed interval.
    """

    mean: Floats
    lower: Floats
    upper: Floats

    @classmethod
    def of(cls, draws: Floats, interval: float) -> MembershipSummary:
        """Summarise draws (draw, ..., K)."""
        tail = (1.0 - interval) / 2.0
        lower, upper = np.quantile(draws, [tail, 1.0 - tail], axis=0)
        return cls(draws.mean(axis=0), lower, upper)

    def rows(self, which: Ints) -> MembershipSummary:
        """Return some of the rows."""
        return MembershipSummary(self.mean[which], self.lower[which], self.upper[which])

    def followed_by(self, other: MembershipSummary) -> MembershipSummary:
        """Return the rows of both."""
        return MembershipSummary(
            np.concatenate([self.mean, other.mean]),
            np.concatenate([self.lower, other.lower]),
            np.concatenate([self.upper, other.upper]),
        )


def membership_draws(posterior: Posterior, unit_table: UnitTable) -> Iterator[tuple[Ints, Floats]]:
    """Yield units, some at a time to keep memory bounded, and P(class | answers) in each draw.

    Yields
    ------
    which : ndarray of int, shape (units,)
    draws : ndarray of float64, shape (draw, units, K)
        Draws of all chains, one chain after another; nan where no class allows the answers.
    """
    draws, table = posterior.draws, posterior.table
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    size = max(1, 4 * PIECE // (elements.shape[0] * table.n_classes))
    for first in range(0, unit_table.n_units, size):
        which = np.arange(first, min(first + size, unit_table.n_units))
        yield which, membership(table, some_units(unit_table, which), elements, prevalence)


def unit_membership(
    posterior: Posterior, unit_table: UnitTable, interval: float
) -> MembershipSummary:
    """Return the membership of each unit."""
    none = np.zeros((0, posterior.table.n_classes))
    out = MembershipSummary(none, none, none)
    for _, found in membership_draws(posterior, unit_table):
        out = out.followed_by(MembershipSummary.of(found, interval))
    return out


def membership_table(
    posterior: Posterior,
    responses: Responses,
    interval: float,
    rows: Literal["cases", "patterns"],
) -> pd.DataFrame:
    """Return the table of memberships; see `Posterior.membership`."""
    check_interval(interval)
    if rows not in ("cases", "patterns"):
        msg = f"rows={rows!r}: a row is one of 'cases' or 'patterns'."
        raise BayesLCAError(msg)
    units = posterior.model.units(responses)
    found = unit_membership(posterior, compile_units(posterior.table, units), interval)
    impossible = np.asarray(np.isnan(found.mean).any(axis=1))
    if rows == "patterns":
        frame = pattern_keys(posterior.model, units)
    else:
        frame = _case_keys(posterior, responses)
        found = _by_case(posterior, responses, units, found, interval)
    frame = _with_probabilities(frame, posterior.model.class_names, found)
    frame.attrs["interval"] = interval
    frame.attrs["impossible_cases"] = _name_impossible(responses, units, impossible)
    return frame


def _by_case(
    posterior: Posterior,
    responses: Responses,
    units: Units,
    found: MembershipSummary,
    interval: float,
) -> MembershipSummary:
    """Give each row its unit's membership; rows without an answer have their group's prevalence."""
    draws = posterior.draws.prevalence
    prevalence = MembershipSummary.of(draws.reshape(-1, *draws.shape[2:]), interval)
    group = group_of_row(posterior, responses)
    unit = units.unit_of_row
    return found.followed_by(prevalence).rows(np.where(unit >= 0, unit, units.n_units + group))


def group_of_row(posterior: Posterior, responses: Responses) -> Ints:
    """Return each row's prevalence row: its group's, or 0 without groups."""
    if posterior.model.groups is None:
        return np.zeros(responses.n_rows, dtype=np.int64)
    return np.asarray(responses.group_codes, dtype=np.int64)


def _case_keys(posterior: Posterior, responses: Responses) -> pd.DataFrame:
    import pandas as pd

    keys: dict[str, Any] = {"case": list(responses.row_names)}
    if posterior.model.groups is not None:
        levels = np.asarray(posterior.model.groups.levels, dtype=object)
        keys["group"] = levels[group_of_row(posterior, responses)]
    if responses.is_table_of_patterns:
        keys["count"] = responses.counts
    return pd.DataFrame(keys)


def pattern_keys(model: LatentClassModel, units: Units) -> pd.DataFrame:
    """Return a row per unit: its group, where the model has groups, its answers, its count."""
    import pandas as pd

    keys: dict[str, Any] = {}
    if model.groups is not None:
        keys["group"] = np.asarray(model.groups.levels, dtype=object)[units.group]
    for j, item in enumerate(model.items):
        names = np.asarray([*item.categories, None], dtype=object)  # a missing answer is -1
        keys[item.name] = names[units.pattern[:, j]]
    return pd.DataFrame({**keys, "count": units.count})


def _with_probabilities(
    frame: pd.DataFrame, class_names: tuple[str, ...], found: MembershipSummary
) -> pd.DataFrame:
    import pandas as pd

    names = np.asarray(class_names, dtype=object)
    possible = np.asarray(~np.isnan(found.mean).any(axis=1))
    modal = np.where(possible, np.nan_to_num(found.mean, nan=-1.0).argmax(axis=1), 0)
    columns: dict[str, Any] = {
        "modal_class": [
            name if known else None for name, known in zip(names[modal], possible, strict=True)
        ],
        "modal_probability": found.mean[np.arange(len(modal)), modal],
    }
    for k, name in enumerate(class_names):
        columns[f"probability_{name}"] = found.mean[:, k]
        columns[f"lower_{name}"] = found.lower[:, k]
        columns[f"upper_{name}"] = found.upper[:, k]
    return pd.concat([frame, pd.DataFrame(columns, index=frame.index)], axis=1)


def _name_impossible(responses: Responses, units: Units, impossible: Bools) -> tuple[str, ...]:
    """Warn of cases that no class allows, and return their names."""
    if not impossible.any():
        return ()
    rows = np.flatnonzero(np.isin(units.unit_of_row, np.flatnonzero(impossible)))
    names = tuple(responses.row_names[r] for r in rows)
    shown = ", ".join(repr(name) for name in names[:5]) + (", ..." if len(names) > 5 else "")
    warnings.warn(
        f"{len(names)} cases gave answers that have probability 0 in every class, so they get no "
        f"membership: {shown}. The model is certainly wrong for them.",
        BayesLCAWarning,
        stacklevel=4,
    )
    return names
