"""Cases that stand out: how improbable their answers are, and how much they move the prevalences.

Both come from leaving a case out. Its predictive density given all others says how well the model
knows it; the prevalences without it, beside those with it, say how much rests on it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.comparison.information_criteria import (
    mcse_of_mean,
    relative_efficiency,
    smoothed_weights,
)
from bayeslca.assess.left_out.exact_loo import LeaveOneOut, left_out
from bayeslca.assess.left_out.folds import model_unit
from bayeslca.assess.left_out.influence_words import (
    influence_findings,
    influence_text,
    verdict_in_words,
)
from bayeslca.assess.left_out.surprise import Surprise, surprise
from bayeslca.findings import Finding
from bayeslca.sampling.match_labels import matched_prevalence
from bayeslca.sampling.progress import Show

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior


@dataclass(frozen=True, eq=False, repr=False)
class Influence:
    """Cases by how much they stand out.

    Attributes
    ----------
    table : DataFrame
        A row per distinct pattern (within its group), the least probable first.

        ==================== ============================================================
        group, the items     the answers; ``group`` where the responses have groups
        count                cases that gave them
        rows                 rows of the responses, from 1: ``"3, 17"``
        log_density          log predictive density of one of them given all other cases
        log_density_mcse     its Monte Carlo error; nan where it was not refitted
        p_new_case           probability that a new case of the same group that answered the
                             same items has answers as improbable, or more so
        p_replicate          share of replicates of the data that hold a case with as small
                             a ``p_new_case``: the lowest of many cases is low by chance alone
        pareto_k             of the importance weights
        refitted             whether the posterior without the case was sampled
        reliable             whether weights or refit are good enough
        change_<class>       prevalence of the class (in the case's group) without one of the
                             cases less that with all, in percentage points
        sd_<class>           the same in the posterior's standard deviations
        largest              of the ``sd_`` columns, the one furthest from 0
        largest_mcse         its Monte Carlo error
        ==================== ============================================================
    verdict : str
    findings : tuple of Finding
    loo : LeaveOneOut
    replicates : int
        Replicates of the data that densities were compared with.
    class_names : tuple of str
    """

    table: pd.DataFrame
    verdict: str
    findings: tuple[Finding, ...]
    loo: LeaveOneOut
    replicates: int
    class_names: tuple[str, ...]

    def __repr__(self) -> str:
        return influence_text(self.table, self.verdict, [f.message for f in self.findings])


def influence(
    posterior: Posterior,
    *,
    exact: bool | None = None,
    seed: int | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
) -> Influence:
    """Find the cases that stand out, and those that much rests on.

    Parameters
    ----------
    posterior : Posterior
    exact : bool, optional
        True: every distinct pattern is refitted without one of its cases. False: none is. Left
        out: those whose importance weights are poor, at most 12.
    seed : int, optional
        Of refits and replicates; that of the posterior when left out.
    threads, progress
        As in `bayeslca.assess.left_out.exact_loo.leave_one_out`.

    Raises
    ------
    SamplingError
        When ``exact`` is True and a part of the model has no exact Gibbs step.
    """
    reference = _mean_membership(posterior)

    def without(elements: Floats, prevalence: Floats) -> Floats:
        named = matched_prevalence(
            posterior.model,
            posterior.unit_table,
            np.concatenate(elements),
            np.concatenate(prevalence),
            reference,
        )
        return named.reshape(prevalence.shape)

    loo = left_out(posterior, exact, seed, threads, progress, without)
    root = seed if seed is not None else posterior.draws.seed or 0
    of_unit = model_unit(posterior)
    surprised = surprise(posterior, loo.loo.pointwise[of_unit], root)
    changes = _changes(posterior, loo)
    table = _table(posterior, loo, surprised, changes, of_unit)
    names = posterior.model.class_names
    return Influence(
        table=table,
        verdict=verdict_in_words(table, names, surprised.replicates, loo.no_refit),
        findings=influence_findings(table, names),
        loo=loo,
        replicates=surprised.replicates,
        class_names=names,
    )


def _mean_membership(posterior: Posterior) -> Floats:
    """Return the mean P(class | answers) of each unit (U, K)."""
    from bayeslca.posterior.membership import unit_membership

    return unit_membership(posterior, posterior.unit_table, 0.95).mean


@dataclass(frozen=True, eq=False)
class _Changes:
    """What leaving out one case of each of the model's units does to its group's prevalences.

    All of shape (U, K): the change, the posterior's standard deviation, the error of the change.
    """

    change: Floats
    sd: Floats
    mcse: Floats


def _changes(posterior: Posterior, loo: LeaveOneOut) -> _Changes:
    draws = posterior.prevalence_draws
    efficiency = relative_efficiency(draws, posterior.response_probability_draws)
    row = posterior.unit_table.prevalence_row
    log_p = posterior.log_likelihood_draws
    mean, sd = draws.mean(axis=(0, 1)), draws.std(axis=(0, 1), ddof=1)
    change = np.empty((row.size, draws.shape[-1]))
    mcse = np.empty_like(change)
    for u, g in enumerate(row.tolist()):
        apart = draws[:, :, g] - mean[g]
        refit = loo.refits.get(u)
        if refit is not None and refit.summary is not None:
            other = refit.summary[:, :, g]
            change[u] = other.mean(axis=(0, 1)) - mean[g]
            mcse[u] = [
                np.hypot(mcse_of_mean(other[..., k]), mcse_of_mean(apart[..., k]))
                for k in range(change.shape[1])
            ]
            continue
        log_weight, _ = smoothed_weights(np.ascontiguousarray(log_p[:, :, u]).ravel(), efficiency)
        weight = np.exp(log_weight).reshape(log_p.shape[:2]) * log_weight.size
        change[u] = (weight[..., None] * apart).mean(axis=(0, 1))
        moved = weight[..., None] * (apart - change[u]) - apart  # to first order, draw by draw
        mcse[u] = [mcse_of_mean(moved[..., k]) for k in range(change.shape[1])]
    return _Changes(change, sd[row], mcse)


def _table(
    posterior: Posterior,
    loo: LeaveOneOut,
    surprised: Surprise,
    changes: _Changes,
    of_unit: Ints,
) -> pd.DataFrame:
    import pandas as pd

    from bayeslca.posterior.membership import pattern_keys

    responses = posterior.responses
    units = responses.units
    keys = pattern_keys(posterior.model, units)
    if responses.groups is not None and "group" not in keys:
        levels = np.asarray(responses.groups.levels, dtype=object)
        keys.insert(0, "group", levels[units.group])
    found = loo.table.iloc[of_unit].reset_index(drop=True)
    in_sd = np.divide(
        changes.change, changes.sd, out=np.zeros_like(changes.change), where=changes.sd > 0
    )
    furthest = np.abs(in_sd).argmax(axis=1)
    at = np.arange(len(in_sd)), furthest
    largest_mcse = np.divide(
        changes.mcse[at], changes.sd[at], out=np.zeros(len(in_sd)), where=changes.sd[at] > 0
    )
    by_class: Mapping[str, Floats] = {
        f"change_{name}": 100.0 * changes.change[of_unit, k]
        for k, name in enumerate(posterior.model.class_names)
    } | {f"sd_{name}": in_sd[of_unit, k] for k, name in enumerate(posterior.model.class_names)}
    table = keys.assign(
        rows=_rows(units.unit_of_row, units.n_units),
        log_density=found["log_density"],
        log_density_mcse=found["log_density_mcse"],
        p_new_case=surprised.p,
        p_replicate=surprised.p_lowest,
        pareto_k=found["pareto_k"],
        refitted=found["refitted"],
        reliable=found["reliable"],
    )
    table = pd.concat([table, pd.DataFrame(dict(by_class))], axis=1).assign(
        largest=in_sd[at][of_unit], largest_mcse=largest_mcse[of_unit]
    )
    return table.sort_values("log_density", kind="stable", ignore_index=True)


def _rows(unit_of_row: Ints, n_units: int) -> list[str]:
    """Return the rows of each unit, from 1, as text."""
    listed: list[list[str]] = [[] for _ in range(n_units)]
    for row, unit in enumerate(unit_of_row.tolist()):
        if unit >= 0:
            listed[unit].append(str(row + 1))
    return [", ".join(rows) for rows in listed]
