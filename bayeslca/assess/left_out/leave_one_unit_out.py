"""How well a model predicts a unit (a district, a herd) that it has not seen.

Leaving one case out asks about a new case of a known unit; leaving one unit out asks about a new
unit, whose own prevalences are summed out under the prior they come from. The two measure
different things and are never mixed.

References
----------
Merkle, E. C., Furr, D. & Rabe-Hesketh, S. (2019). Bayesian comparison of latent variable models:
conditional versus marginal likelihoods. Psychometrika 84, 802-829.
Vehtari, A., Gelman, A. & Gabry, J. (2017). Practical Bayesian model evaluation using
leave-one-out cross-validation and WAIC. Statistics and Computing 27, 1413-1432.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.comparison.comparison import is_tie
from bayeslca.assess.comparison.information_criteria import psis_loo, standard_error
from bayeslca.assess.comparison.seeds_of_rows import seed_of_row
from bayeslca.assess.hypothesis.bridge import ess
from bayeslca.assess.left_out.unit_likelihood import log_likelihood_of_unit
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.probabilities import log_joint, log_unit_likelihood
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units
from bayeslca.sampling.stopping import some_units

if TYPE_CHECKING:
    import pandas as pd

MOST_DRAWS = 2000
"""Draws at which the units' probabilities are worked out."""
STREAM = 7103


@dataclass(frozen=True, eq=False, repr=False)
class LeaveOneUnitOut:
    """How well each unit is predicted from the others.

    Attributes
    ----------
    table : DataFrame
        A row per ``group`` (unit) with cases: ``cases``, ``elpd`` (log probability of all the
        unit's answers, given the other units), ``elpd_mcse``, ``pareto_k`` (nan after a refit)
        and ``method`` ("importance" or "refit").
    elpd, se : float
        Sum over units and its standard error over units.
    elpd_mcse : float
        Monte Carlo standard error of the sum.
    unreliable : tuple of str
        Units whose importance weights are not reliable (Pareto k too high) and that were not
        fitted anew.
    group : str
        What the units are.
    """

    table: pd.DataFrame
    elpd: float
    se: float
    elpd_mcse: float
    unreliable: tuple[str, ...]
    group: str

    @property
    def conditioning(self) -> str:
        """What was left out, and what the prediction is given."""
        return (
            f"one {self.group} left out at a time: all its answers are predicted from the others, "
            f"the {self.group}'s own prevalences summed out"
        )

    def __repr__(self) -> str:
        text = (
            f"Accuracy for a new {self.group}: {self.elpd:.1f} ± {self.se:.1f} over "
            f"{len(self.table)} units ({self.conditioning})."
        )
        if self.unreliable:
            text += (
                f" Not reliable for {len(self.unreliable)} of them ({', '.join(self.unreliable)}):"
                " use refit=True."
            )
        return text


def leave_one_unit_out(
    posterior: Posterior, *, refit: bool = False, seed: int = 0
) -> LeaveOneUnitOut:
    """Predict the answers of each unit from the other units.

    Parameters
    ----------
    posterior : Posterior
        Of pooled units, of units with a prior each, or of a model without groups; its responses
        say which case is of which unit.
    refit : bool
        Fit the model anew without each unit whose importance weights are not reliable.
    seed : int
        Of refits, and of units so large that their probability is estimated by particles.

    Raises
    ------
    ModelError
        When the responses have no units, or the prevalences of units are constrained.
    """
    import pandas as pd

    responses, model = posterior.responses, posterior.model
    units = _units_of(posterior)
    groups = responses.groups
    assert groups is not None  # seen to in _units_of
    present = np.unique(units.group)
    values = unit_log_likelihood(posterior, units, present, seed)
    ones: Ints = np.ones(present.size, dtype=np.int64)
    found = psis_loo(values, ones)
    elpd, k = found.pointwise.copy(), np.asarray(found.pareto_k).copy()
    mcse = np.array([psis_loo(values[:, :, [g]], ones[:1]).mcse for g in range(present.size)])
    method = np.full(present.size, "importance", dtype=object)
    left = found.unreliable.copy()
    total_mcse = found.mcse
    if refit and left.any():
        for at in np.flatnonzero(left):
            level = groups.levels[int(present[at])]
            elpd[at], mcse[at] = _refitted(posterior, units, int(present[at]), level, seed)
            k[at], method[at], left[at] = math.nan, "refit", False
        kept = np.flatnonzero(method == "importance")
        rest = psis_loo(values[:, :, kept], ones[kept]).mcse if kept.size else 0.0
        total_mcse = math.hypot(rest, float(np.sqrt(np.sum(mcse[method == "refit"] ** 2))))
    cases = np.bincount(units.group, weights=units.count, minlength=len(groups.levels))
    table = pd.DataFrame(
        {
            "group": [groups.levels[g] for g in present],
            "cases": cases[present].astype(np.int64),
            "elpd": elpd,
            "elpd_mcse": mcse,
            "pareto_k": k,
            "method": method,
        }
    )
    return LeaveOneUnitOut(
        table=table,
        elpd=float(elpd.sum()),
        se=standard_error(elpd, ones),
        elpd_mcse=total_mcse,
        unreliable=tuple(groups.levels[g] for g in present[left]),
        group=groups.name if model.groups is None else model.groups.name,
    )


def compare_units(
    posteriors: Mapping[str, Posterior], *, refit: bool = False, seed: int = 0
) -> pd.DataFrame:
    """Compare models by how well they predict a unit that they have not seen.

    Parameters
    ----------
    posteriors : mapping of str to Posterior
        Of the same responses; pooled, with a prior for each unit, or without groups.
    refit, seed : see `leave_one_unit_out`

    Returns
    -------
    DataFrame
        A row per model: ``elpd``, ``elpd_se``, ``elpd_mcse``, ``elpd_diff`` and ``elpd_diff_se``
        from the best, ``tied`` and ``pareto_k_high`` (units that are not reliable).

    Raises
    ------
    ModelError
        When nothing is given, or posteriors are of different answers.
    """
    import pandas as pd

    hashes = {posterior.responses.data_hash for posterior in posteriors.values()}
    if len(hashes) != 1:
        what = "are of different answers" if hashes else "are missing"
        msg = f"the posteriors to compare {what}. Give posteriors of one set of responses."
        raise ModelError(msg)
    found = {
        name: leave_one_unit_out(one, refit=refit, seed=seed) for name, one in posteriors.items()
    }
    best = max(found, key=lambda name: found[name].elpd)
    pointwise = {name: one.table["elpd"].to_numpy(np.float64) for name, one in found.items()}
    rows = []
    for name, one in found.items():
        by_unit = pointwise[name] - pointwise[best]
        error = standard_error(by_unit, np.ones(by_unit.size, dtype=np.int64))
        gap = float(by_unit.sum())
        rows.append(
            {
                "elpd": one.elpd,
                "elpd_se": one.se,
                "elpd_mcse": one.elpd_mcse,
                "elpd_diff": gap,
                "elpd_diff_se": 0.0 if name == best else error,
                "tied": name == best or is_tie(gap, error),
                "pareto_k_high": len(one.unreliable),
            }
        )
    frame = pd.DataFrame(rows, index=pd.Index(list(found), name="model"))
    frame.attrs["conditioning"] = next(iter(found.values())).conditioning
    return frame


def unit_log_likelihood(posterior: Posterior, units: Units, present: Ints, seed: int) -> Floats:
    """Return log p(all answers of a unit | parameters of all units), (chain, draw, unit).

    Of some draws, evenly spaced; the units' own prevalences are summed out.
    """
    draws, model, table = posterior.draws, posterior.model, posterior.table
    step = max(1, -(-draws.n_chains * draws.n_draws // MOST_DRAWS))
    elements = draws.elements[:, ::step]
    shape = elements.shape[:2]
    flat = np.concatenate(elements)
    out = np.empty((*shape, present.size))
    if model.groups is None:  # nothing of the unit's own to sum out
        unit_table = compile_units(table, replace(units, group=np.zeros_like(units.group)))
        by_unit = log_unit_likelihood(table, unit_table, elements, draws.prevalence[:, ::step])
        for at, g in enumerate(present):
            mine = np.flatnonzero(units.group == g)
            out[..., at] = by_unit[..., mine] @ units.count[mine].astype(np.float64)
        return out
    unit_table = compile_units(table, units)
    even = np.full((flat.shape[0], table.n_prevalence_rows, table.n_classes), 1.0)
    for at, g in enumerate(present):
        mine = np.flatnonzero(units.group == g)
        pieces = log_joint(table, some_units(unit_table, mine), flat, even)
        likelihood = np.concatenate([joint for _, joint in pieces], axis=2).transpose(2, 1, 0)
        rng = np.random.default_rng([STREAM, seed, int(g)])
        found, _ = log_likelihood_of_unit(
            likelihood, units.count[mine], _concentration(posterior, int(g), step), rng
        )
        out[..., at] = found.reshape(shape)
    return out


def _concentration(posterior: Posterior, row: int, step: int) -> Floats:
    """Return the Dirichlet parameters (S, K) that a unit's prevalences come from."""
    draws = posterior.draws
    if draws.concentration is not None:
        return draws.concentration[:, ::step].reshape(-1, draws.n_classes)
    source = posterior.model.prevalence_source
    assert not isinstance(source, PooledPrevalence | ConstrainedPrevalence)
    n = draws.n_chains * len(range(0, draws.n_draws, step))
    return np.tile(source.concentration[row], (n, 1))


def _units_of(posterior: Posterior) -> Units:
    """Return the distinct answers by unit, whether the model has groups or not."""
    if posterior.responses.groups is None:
        msg = (
            "the responses have no units to leave out. Read them with group=..., the column that "
            "says which unit (district, herd) a case is of."
        )
        raise ModelError(msg)
    if isinstance(posterior.model.prevalence_source, ConstrainedPrevalence):
        msg = (
            "the prevalences of units are held to be known, equal, bounded or ordered, and no way "
            "is written to sum them out for a unit that is left out. Leave out these statements."
        )
        raise ModelError(msg)
    return posterior.responses.units


def _refitted(
    posterior: Posterior, units: Units, row: int, level: str, seed: int
) -> tuple[float, float]:
    """Fit the model without a unit; return the log probability of its answers, with its error."""
    responses, draws = posterior.responses, posterior.draws
    without = _without(responses, row)
    again = posterior.model.sample(
        without,
        seed=seed_of_row(seed, f"without {level}"),
        sampler=draws.sampler,
        chains=draws.n_chains,
        draws=draws.n_draws,
        ess=min(1000.0, 0.5 * draws.n_chains * draws.n_draws),
        progress=False,
    )
    values = unit_log_likelihood(again, units, np.array([row]), seed)[..., 0]
    highest = float(values.max())
    weight = np.exp(values - highest)
    mean = float(weight.mean())
    spread = float(weight.std(ddof=1)) / mean
    error = spread / math.sqrt(min(ess(weight), float(weight.size))) if spread > 0 else 0.0
    return float(logsumexp(values) - math.log(values.size)), error


def _without(responses: Responses, row: int) -> Responses:
    """Leave out the cases of a unit; its name stays, so that the model stays what it is."""
    keep = np.flatnonzero(responses.group_codes != row)
    if not keep.size:
        msg = "all cases are of one unit, so that none is left to predict it from."
        raise ModelError(msg)
    ids = responses.case_ids
    return replace(
        responses,
        codes=np.asfortranarray(responses.codes[keep]),
        counts=responses.counts[keep],
        group_codes=responses.group_codes[keep],
        case_ids=None if ids is None else tuple(ids[i] for i in keep.tolist()),
        findings=(),
    )
