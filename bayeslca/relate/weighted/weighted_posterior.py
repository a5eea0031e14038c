"""What is known of the population under a sample's design, and its tables."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats
from bayeslca.findings import Finding
from bayeslca.posterior.posterior import Posterior, Rows
from bayeslca.posterior.summary import check_interval
from bayeslca.responses.responses import Responses
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.weighted.weighted_likelihood import WeightedMaximumLikelihood
    from bayeslca.responses.sample_design import SampleDesign

FEW_CLUSTERS = 20
DRIFT = 0.1
"""Halves of the short chains may differ by so many pooled standard deviations on average."""


@dataclass(frozen=True, eq=False, repr=False)
class WeightedPosterior:
    """Pooled draws of the fits of all pseudo-samples; made by `sample_weighted`.

    Tables have the columns ``median, mean, sd, lower, upper, mcse`` after their keys (``mcse``
    from the differences of pseudo-samples), then ``design_effect``: the variance of the pooled
    draws over that within pseudo-samples, which is what as many cases drawn at random, one by
    one, would leave. It is not below 1 here even where strata help; the linearised one of
    ``likelihood`` may be.

    Attributes
    ----------
    unweighted : Posterior
        The fit that takes the cases as they are.
    responses : Responses
    draws : Draws
        A "chain" is a pseudo-sample. The log likelihoods are of pseudo-samples and serve no
        comparison of models.
    group_share : ndarray, shape (pseudo-sample, group)
        Weighted share of each group of cases.
    likelihood : WeightedMaximumLikelihood or None
        Maximum likelihood under the weights, with linearised standard errors; None where no exact
        step of EM is written for the model's constraints.
    findings : tuple of Finding
    """

    unweighted: Posterior
    responses: Responses
    draws: Draws
    group_share: Floats
    likelihood: WeightedMaximumLikelihood | None
    findings: tuple[Finding, ...] = ()

    @classmethod
    def of(
        cls,
        *,
        unweighted: Posterior,
        responses: Responses,
        draws: Draws,
        group_share: Floats,
        likelihood: WeightedMaximumLikelihood | None,
    ) -> WeightedPosterior:
        """Put the parts together, and look at them."""
        bare = cls(unweighted, responses, draws, group_share, likelihood)
        found = tuple(_findings(bare))
        return cls(unweighted, responses, draws, group_share, likelihood, found)

    @property
    def design(self) -> SampleDesign:
        """The sample's design."""
        assert self.responses.design is not None  # sample_weighted refuses responses without
        return self.responses.design

    @property
    def n_pseudo_samples(self) -> int:
        """Number of pseudo-samples."""
        return self.draws.n_chains

    @cached_property
    def prevalence_draws(self) -> Floats:
        """Draws of the prevalences (pseudo-sample, draw, groups, K); overall last if grouped."""
        draws = self.draws.prevalence
        if self.unweighted.model.groups is None:
            return draws
        overall = np.einsum("bg,bdgk->bdk", self.group_share, draws)
        return np.concatenate([draws, overall[:, :, None]], axis=2)

    def prevalence(self, interval: float = 0.95) -> pd.DataFrame:
        """Return how common each class is in the population.

        Returns
        -------
        DataFrame
            Rows and keys as `Posterior.prevalence`; groups are weighted by what their cases
            stand for.
        """
        draws = self.prevalence_draws
        return self._summary(self._prevalence_keys(), draws.reshape(*draws.shape[:2], -1), interval)

    def response_probabilities(self, interval: float = 0.95) -> pd.DataFrame:
        """Return what each class looks like in the population; keys as in `Posterior`."""
        draws = self.pooled.response_probability_draws
        frame = self.unweighted.response_probabilities(interval)
        keys = frame[[c for c in _KEYS if c in frame]]
        return self._summary(keys, draws.reshape(*draws.shape[:2], -1), interval)

    def membership(self, interval: float = 0.95, rows: Rows = "patterns") -> pd.DataFrame:
        """Return how probably each response pattern (or case) is of each class.

        Returns
        -------
        DataFrame
            As `Posterior.membership`; with patterns, ``weighted_count`` says how many of the
            cases a pattern is worth under the weights.
        """
        frame = self.pooled.membership(None, interval, rows)
        if rows == "patterns":
            from bayeslca.relate.weighted.weighted_score import WeightedUnits

            units = WeightedUnits.of(self.unweighted.model, self.responses)
            at = list(frame.columns).index("count") + 1
            frame.insert(at, "weighted_count", units.counts)
        return frame

    def beside_unweighted(self, interval: float = 0.95) -> pd.DataFrame:
        """Return the weighted prevalences beside the unweighted ones.

        Returns
        -------
        DataFrame
            Keys of `prevalence`; ``weighted``, ``weighted_lower``, ``weighted_upper``,
            ``unweighted``, ``unweighted_lower``, ``unweighted_upper`` (medians and intervals),
            ``design_effect``, ``estimate`` and ``standard_error`` (weighted maximum likelihood,
            linearised; nan overall where there are groups), ``linearised_design_effect``, and
            ``differs``: the unweighted median lies outside the weighted interval.
        """
        return self._beside(
            self.prevalence(interval),
            self.unweighted.prevalence(interval),
            None if self.likelihood is None else self.likelihood.prevalence,
        )

    def response_probabilities_beside_unweighted(self, interval: float = 0.95) -> pd.DataFrame:
        """Return the same for response probabilities."""
        return self._beside(
            self.response_probabilities(interval),
            self.unweighted.response_probabilities(interval),
            None if self.likelihood is None else self.likelihood.response_probability,
        )

    @cached_property
    def pooled(self) -> Posterior:
        """The pooled draws in the form of a posterior, for what reads one.

        Its sizes of groups and its counts are those of the cases, unweighted, and so is whatever
        rests on them; its log likelihoods are of pseudo-samples.
        """
        model = self.unweighted.model
        shape = (self.draws.n_chains, self.draws.n_draws, model.n_groups, model.n_classes)
        same = np.broadcast_to(np.arange(model.n_classes), shape)
        return Posterior(model, self.responses, Relabelled(self.draws, same))

    def __repr__(self) -> str:
        from bayeslca.relate.weighted.words import as_terminal_text

        return as_terminal_text(self)

    def _prevalence_keys(self) -> pd.DataFrame:
        frame = self.unweighted.prevalence()
        return frame[[c for c in _KEYS if c in frame]]

    def _summary(self, keys: pd.DataFrame, draws: Floats, interval: float) -> pd.DataFrame:
        check_interval(interval)
        flat = draws.reshape(-1, draws.shape[-1])
        tail = (1.0 - interval) / 2.0
        lower, median, upper = np.quantile(flat, [tail, 0.5, 1.0 - tail], axis=0)
        between = draws.mean(axis=1).var(axis=0, ddof=1)
        within = draws.var(axis=1, ddof=1).mean(axis=0)
        variance = flat.var(axis=0, ddof=1)
        with np.errstate(invalid="ignore", divide="ignore"):
            effect = np.where(within > 0.0, variance / within, np.nan)
        frame = keys.assign(
            median=median,
            mean=flat.mean(axis=0),
            sd=np.sqrt(variance),
            lower=lower,
            upper=upper,
            mcse=np.sqrt(between / len(draws)),
            design_effect=np.maximum(effect, 1.0),
        )
        frame.attrs["interval"] = interval
        return frame

    def _beside(
        self, weighted: pd.DataFrame, unweighted: pd.DataFrame, likelihood: pd.DataFrame | None
    ) -> pd.DataFrame:
        keys = [c for c in _KEYS if c in weighted]
        columns: dict[str, Any] = {}
        for name, frame in (("weighted", weighted), ("unweighted", unweighted)):
            columns[name] = frame["median"].to_numpy()
            columns[f"{name}_lower"] = frame["lower"].to_numpy()
            columns[f"{name}_upper"] = frame["upper"].to_numpy()
        out = weighted[keys].assign(**columns, design_effect=weighted["design_effect"])
        wanted = ["estimate", "standard_error", "linearised_design_effect"]
        if likelihood is None:
            out = out.assign(**dict.fromkeys(wanted, np.nan))
        else:
            renamed = likelihood.rename(columns={"design_effect": "linearised_design_effect"})
            shared = [c for c in keys if c in renamed]
            out = out.merge(renamed[[*shared, *wanted]], on=shared, how="left", validate="1:1")
        outside = (out["unweighted"] < out["weighted_lower"]) | (
            out["unweighted"] > out["weighted_upper"]
        )
        out["differs"] = outside.to_numpy()
        out.attrs["interval"] = weighted.attrs["interval"]
        return out


_KEYS = ("group", "latent_class", "item", "category")


def _findings(posterior: WeightedPosterior) -> list[Finding]:
    out = []
    design = posterior.design
    if design.degrees_of_freedom < FEW_CLUSTERS:
        unit = "clusters" if design.cluster_name is not None else "cases"
        out.append(
            Finding(
                "few_clusters",
                "warning",
                f"{design.n_clusters} {unit} in {design.n_strata} "
                f"{'stratum' if design.n_strata == 1 else 'strata'} leave "
                f"{design.degrees_of_freedom} degrees of freedom: how much {unit} vary is itself "
                "poorly known.",
                "Take the weighted intervals as rough.",
                value=float(design.degrees_of_freedom),
            )
        )
    flat = posterior.draws.prevalence
    half = flat.shape[1] // 2
    apart = np.abs((flat[:, half:].mean(axis=1) - flat[:, :half].mean(axis=1)).mean(axis=0))
    sd = flat.reshape(-1, *flat.shape[2:]).std(axis=0)
    drift = float(np.max(apart / np.maximum(sd, 1e-12)))
    if drift > DRIFT:
        out.append(
            Finding(
                "weighted_chains_drift",
                "warning",
                "The short chains of the pseudo-samples still move: their second halves differ "
                f"from their first by up to {drift:.2f} standard deviations on average.",
                "Classes may be poorly told apart; raise draws, or state more.",
                value=drift,
            )
        )
    return [*out, *_modes(posterior)]


def _modes(posterior: WeightedPosterior) -> list[Finding]:
    """Compare with maximum likelihood under the weights, which looks for the best of all modes."""
    likelihood = posterior.likelihood
    if likelihood is None:
        return []
    draws = posterior.draws.flat_prevalence
    apart = np.abs(draws.mean(axis=0) - likelihood.parameters.prevalence)
    sd = np.maximum(draws.std(axis=0), 1e-12)
    if float(np.max(apart / sd)) < 3.0:
        return []
    return [
        Finding(
            "weighted_solutions_differ",
            "warning",
            "Maximum likelihood under the weights gives prevalences more than three standard "
            "deviations from the pooled draws: there may be another solution that the weights "
            "favour, or the priors decide.",
            "Compare posterior.likelihood with the tables; fit fewer classes, or state more.",
            value=float(np.max(apart / sd)),
        )
    ]
