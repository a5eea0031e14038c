"""What the priors do: how much of each result rests on them, and what moves under others."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.priors.followed import Followed, after_the_data, followed
from bayeslca.assess.priors.other_priors import (
    Moved,
    Weighed,
    by_refit,
    by_weights,
    refit_under,
    weighed_by_refit,
    weighed_by_weights,
)
from bayeslca.assess.priors.power_scaling import PowerScaling, power_scaling
from bayeslca.assess.priors.words import (
    called,
    diagnosis,
    sensitivity_findings,
    verdict_in_words,
)
from bayeslca.findings import Finding
from bayeslca.model.alternative_priors import (
    HALF,
    TWICE,
    check_alternatives,
    distinct_alternatives,
)
from bayeslca.posterior.prior_overlap import (
    PriorMarks,
    density,
    mostly_prior,
    overlap,
    prior_draws,
)
from bayeslca.posterior.summary import Quantities

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

MOST_DRAWN, GRID_POINTS = 6, 201
"""Quantities whose densities are kept, and points of each."""
FAR = 1.0
"""A quantity that moves by more of its posterior standard deviations is marked."""


@dataclass(frozen=True, eq=False)
class PriorSensitivity:
    """What the priors do.

    Attributes
    ----------
    table : DataFrame
        A row per quantity: ``kind``, ``quantity``, ``mean``, ``sd``, ``own_prior`` ("flat",
        "partly flat" or "informative": power scaling cannot see a flat prior),
        ``prior_median``, ``prior_lower`` and ``prior_upper`` (95 %), ``prior_sensitivity`` and
        ``likelihood_sensitivity`` by power scaling (nan where every prior is flat, or the
        quantity never varies), ``prior_overlap`` (0 to 1), ``prior_share``, ``mostly_prior`` and
        ``diagnosis`` in words.
    moved : DataFrame
        A row per quantity, other prior and method ("weights" or "refit"): ``mean_before``,
        ``mean``, ``sd``, ``moved`` (change of the mean in posterior standard deviations of the
        original), ``moved_mcse``, ``far`` (more than one) and ``reliable``.
    hypotheses : DataFrame
        A row per claim, prior ("as stated" first) and method, with probabilities before and after
        the data and the log Bayes factor against the model.
    priors : DataFrame
        A row per other prior and method: ``reliable``, ``pareto_k``, ``same_places``, ``note``.
    left_out : mapping of str to str
        Other priors that were not tried, and why.
    scaling : PowerScaling
        Holds the Pareto k of the weights behind the power scaling.
    densities : DataFrame
        Of the quantities that rest most on their priors: ``quantity``, ``value``, and the
        densities ``prior`` and ``posterior`` there, a row a point.
    findings : tuple of Finding
    verdict : str
    """

    table: pd.DataFrame
    moved: pd.DataFrame
    hypotheses: pd.DataFrame
    priors: pd.DataFrame
    left_out: Mapping[str, str]
    scaling: PowerScaling
    densities: pd.DataFrame
    findings: tuple[Finding, ...]
    verdict: str

    def __repr__(self) -> str:
        return self.verdict


def prior_sensitivity(
    posterior: Posterior,
    *,
    quantities: Mapping[str, str] | Sequence[str] = (),
    hypotheses: Mapping[str, Sequence[str]] | Sequence[str] = (),
    refit: Sequence[str] | None = None,
    seed: int = 0,
    progress: Callable[[str], None] | None = None,
) -> PriorSensitivity:
    """Return what the priors do; see `Posterior.prior_sensitivity`.

    Raises
    ------
    ModelError
        When a prior to refit under is unknown.
    StatementError
        When a text is no quantity, or no hypothesis.
    """
    say = progress or (lambda words: None)
    texts = dict(quantities) if isinstance(quantities, Mapping) else {q: q for q in quantities}
    claims = (
        {claim: tuple(statements) for claim, statements in hypotheses.items()}
        if isinstance(hypotheses, Mapping)
        else {claim: (claim,) for claim in hypotheses}
    )
    asked = None if refit is None else check_alternatives(refit)
    after = after_the_data(posterior, texts, claims)
    scaling = power_scaling(posterior, after)
    before = followed(posterior, prior_draws(posterior), texts, claims)
    table = _table(posterior, after, before, scaling)
    found, left_out = distinct_alternatives(posterior.model, (HALF, TWICE, *(asked or ())))
    moved: list[Moved] = []
    weighed = _as_stated(posterior, claims, seed)
    for at, (name, other) in enumerate(found.items()):
        one, weight = by_weights(posterior, name, other, after)
        moved.append(one)
        weighed += weighed_by_weights(posterior, one, weight, other, claims)
        again = not one.reliable if asked is None else _is_asked(name, asked, left_out)
        if again:
            say(f"Fitting again under priors {called(name)}")
            fit, same = refit_under(posterior, name, other, seed + at + 1)
            moved.append(by_refit(fit, name, same, texts, claims))
            weighed += weighed_by_refit(fit, name, claims, seed)
    frame = _moved_table(after, table, moved)
    findings = tuple(sensitivity_findings(table, frame, moved, scaling))
    return PriorSensitivity(
        table=table,
        moved=frame,
        hypotheses=_hypotheses_table(weighed),
        priors=_priors_table(moved),
        left_out=left_out,
        scaling=scaling,
        densities=_densities(table, after, before),
        findings=findings,
        verdict=verdict_in_words(table, frame, moved, left_out),
    )


def _is_asked(name: str, asked: Sequence[str], left_out: Mapping[str, str]) -> bool:
    """Tell whether a refit under a prior, or under one that is the same, was asked for."""
    twins = [other for other, why in left_out.items() if f"“{name}”" in why]
    return name in asked or any(twin in asked for twin in twins)


def _table(
    posterior: Posterior,
    after: Sequence[Followed],
    before: Sequence[Followed],
    scaling: PowerScaling,
) -> pd.DataFrame:
    import pandas as pd

    marks = posterior.prior_marks
    named = not posterior.model.exploratory
    rows = []
    for at, (one, earlier) in enumerate(zip(after, before, strict=True)):
        lies, share = _marks_of(posterior, marks, one, earlier)
        finite = bool(np.all(np.isfinite(one.values)))
        rows.append(
            {
                "kind": one.kind,
                "quantity": one.name,
                "mean": float(one.values.mean()) if finite else np.nan,
                "sd": float(one.values.std(ddof=1)) if finite else np.nan,
                "own_prior": one.own_prior,
                **_before_the_data(earlier, named or one.kind != "quantity"),
                "prior_sensitivity": scaling.prior[at],
                "likelihood_sensitivity": scaling.likelihood[at],
                "prior_overlap": lies,
                "prior_share": share,
                "mostly_prior": bool(mostly_prior(np.array(lies), np.array(share))),
            }
        )
    frame = pd.DataFrame(rows)
    frame["diagnosis"] = [diagnosis(row, scaling) for row in frame.to_dict("records")]
    return frame


def _marks_of(
    posterior: Posterior, marks: PriorMarks, one: Followed, before: Followed
) -> tuple[float, float]:
    """Return the overlap and the prior's share of one quantity; nan where there is none."""
    if one.kind == "prevalence":
        g, k = one.place
        row = g * posterior.model.n_classes + k
        return float(marks.prevalence_overlap[row]), float(marks.prevalence_share[row])
    if one.kind == "response probability":
        g, k, column = one.place
        n_columns = int(posterior.table.item_start[-1])
        row = (g * posterior.model.n_classes + k) * n_columns + column
        return float(marks.answer_overlap[row]), float(marks.answer_share[row])
    if one.kind == "hypothesis":  # a yes or a no has no density
        return np.nan, np.nan
    shape = (posterior.draws.n_chains, posterior.draws.n_draws, 1)
    if not np.all(np.isfinite(one.values)):
        return np.nan, np.nan
    effective = Quantities(one.values.reshape(shape)).monte_carlo()["ess_bulk"][0]
    return overlap(before.values, one.values, float(effective)), np.nan


def _before_the_data(before: Followed, told: bool) -> dict[str, float]:
    """Return median and 95 % interval of the prior; nan where it does not tell classes apart."""
    columns = ("prior_median", "prior_lower", "prior_upper")
    if not told or before.kind == "hypothesis" or not np.all(np.isfinite(before.values)):
        return dict.fromkeys(columns, np.nan)
    found = np.quantile(before.values, [0.5, 0.025, 0.975])
    return dict(zip(columns, found.tolist(), strict=True))


def _densities(
    table: pd.DataFrame, after: Sequence[Followed], before: Sequence[Followed]
) -> pd.DataFrame:
    """Return prior and posterior densities of the quantities with the largest overlaps."""
    import pandas as pd

    columns = ["quantity", "value", "prior", "posterior"]
    ranked = table["prior_overlap"].dropna().sort_values(ascending=False, kind="stable")
    parts = []
    for at in ranked.index[:MOST_DRAWN]:
        draws = before[at].values, after[at].values
        low = min(0.0, *(float(x.min()) for x in draws))
        high = max(1.0, *(float(x.max()) for x in draws))
        values = np.linspace(low, high, GRID_POINTS)
        curves = (density(x, values) for x in draws)
        parts.append(
            pd.DataFrame(
                dict(zip(columns, (table.loc[at, "quantity"], values, *curves), strict=True))
            )
        )
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=columns)


def _as_stated(
    posterior: Posterior, claims: Mapping[str, Sequence[str]], seed: int
) -> list[Weighed]:
    from dataclasses import replace

    found = weighed_by_refit(posterior, "as stated", claims, seed)
    return [replace(one, method="weights") for one in found]


def _moved_table(
    after: Sequence[Followed], table: pd.DataFrame, moved: Sequence[Moved]
) -> pd.DataFrame:
    import pandas as pd

    mean, sd = table["mean"].to_numpy(), table["sd"].to_numpy()
    parts = []
    for one in moved:
        with np.errstate(divide="ignore", invalid="ignore"):
            by = np.where(sd > 0.0, (one.mean - mean) / sd, np.nan)
            error = np.where(sd > 0.0, one.mcse / sd, np.nan)
        parts.append(
            pd.DataFrame(
                {
                    "kind": [each.kind for each in after],
                    "quantity": [each.name for each in after],
                    "prior": one.prior,
                    "method": one.method,
                    "mean_before": mean,
                    "mean": one.mean,
                    "sd": one.sd,
                    "moved": by,
                    "moved_mcse": error,
                    "far": np.abs(by) > FAR,
                    "reliable": one.reliable,
                }
            )
        )
    columns = [
        "kind", "quantity", "prior", "method", "mean_before", "mean", "sd", "moved",
        "moved_mcse", "far", "reliable",
    ]  # fmt: skip
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=columns)


def _hypotheses_table(weighed: Sequence[Weighed]) -> pd.DataFrame:
    import pandas as pd

    order = {claim: at for at, claim in enumerate(dict.fromkeys(one.claim for one in weighed))}
    columns = {
        "claim": [one.claim for one in weighed],
        "prior": [one.prior for one in weighed],
        "method": ["" if one.prior == "as stated" else one.method for one in weighed],
        "posterior_probability": [one.posterior_probability for one in weighed],
        "prior_probability": [one.prior_probability for one in weighed],
        "log_bayes_factor": [one.log_bayes_factor for one in weighed],
        "log_bayes_factor_mcse": [one.log_bayes_factor_mcse for one in weighed],
        "grade": [one.grade for one in weighed],
        "note": [one.note for one in weighed],
    }
    frame = pd.DataFrame(columns)
    return frame.sort_values("claim", key=lambda c: c.map(order), kind="stable", ignore_index=True)


def _priors_table(moved: Sequence[Moved]) -> pd.DataFrame:
    import pandas as pd

    return pd.DataFrame(
        {
            "prior": [one.prior for one in moved],
            "method": [one.method for one in moved],
            "reliable": [one.reliable for one in moved],
            "pareto_k": [one.pareto_k for one in moved],
            "same_places": [one.same_places for one in moved],
            "note": [one.note for one in moved],
        }
    )
