"""Quantities: sums, differences, products and ratios of probabilities, with what is known of them.

A quantity is computed draw by draw from the posterior, and beside it from the prior, constraints
kept and classes named by the same rules, so that what rests on the prior can be seen.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import StatementError
from bayeslca.model.evaluate import (
    Instance,
    ParameterDraws,
    instances,
    means_every_class,
    terms_of,
    varies_by_group,
)
from bayeslca.model.prior_draws import draw_prior
from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.resolved import ResolvedQuantity
from bayeslca.posterior.summary import SUMMARY_COLUMNS, Quantities, check_interval

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

PRIOR_DRAWS = 20_000
PRIOR_SEED = 20_261_201
PRIOR_COLUMNS = ("prior_median", "prior_lower", "prior_upper")


@dataclass(frozen=True, slots=True)
class Quantity:
    """What is known of one quantity.

    Attributes
    ----------
    text : str
        As it was asked for.
    median, mean, sd, lower, upper : float
        Of the posterior; ``lower`` and ``upper`` end the equal-tailed interval.
    mcse : float
        Monte Carlo standard error of the mean; nan for a constant, as the next three.
    ess_bulk, ess_tail, r_hat : float
    prior_median, prior_lower, prior_upper : float
        The same of the prior; nan where the prior does not tell the classes apart.
    interval : float
        Level of both intervals.
    """

    text: str
    median: float
    mean: float
    sd: float
    lower: float
    upper: float
    mcse: float
    ess_bulk: float
    ess_tail: float
    r_hat: float
    prior_median: float
    prior_lower: float
    prior_upper: float
    interval: float = 0.95

    def __repr__(self) -> str:
        level = f"{100 * self.interval:g} %"
        known = (
            f"{self.text} is {_digits(self.median)} "
            f"({level} interval {_digits(self.lower)} to {_digits(self.upper)})"
        )
        if np.isnan(self.prior_median):
            return f"{known}."
        return (
            f"{known}; before the data it was {_digits(self.prior_median)} "
            f"({_digits(self.prior_lower)} to {_digits(self.prior_upper)})."
        )


def _digits(value: float) -> str:
    """Return a number with three digits; one that is nearly 0 as 0.0000, without an exponent."""
    return f"{value:.4f}" if 0 < abs(value) < 1e-3 else f"{value:.3g}"


def posterior_parameters(posterior: Posterior) -> ParameterDraws:
    """Return the relabelled draws of all chains, end to end."""
    draws = posterior.draws
    return ParameterDraws(
        posterior.table,
        draws.flat_elements,
        draws.flat_prevalence,
        group_share(posterior),
    )


def group_share(posterior: Posterior) -> Floats:
    """Return the share of the cases in each group."""
    return np.asarray(posterior.group_cases / posterior.group_cases.sum())


def quantity(posterior: Posterior, text: str, interval: float = 0.95) -> Quantity:
    """Return what is known of one quantity; see `Posterior.quantity`."""
    check_interval(interval)
    resolved = _resolved(posterior, text)
    found = instances(terms_of(resolved), posterior.table)
    if len(found) > 1:
        raise _several(posterior, resolved)
    rows = _summaries(posterior, resolved, found, interval)
    return Quantity(text, **rows[0], interval=interval)


def quantities(
    posterior: Posterior, texts: Mapping[str, str] | Sequence[str], interval: float = 0.95
) -> pd.DataFrame:
    """Return what is known of several quantities; see `Posterior.quantities`."""
    import pandas as pd

    check_interval(interval)
    named = dict(texts) if isinstance(texts, Mapping) else {text: text for text in texts}
    resolved = {name: _resolved(posterior, text) for name, text in named.items()}
    model, rows = posterior.model, []
    for name, one in resolved.items():
        terms = terms_of(one)
        found = instances(terms, posterior.table)
        by_group, by_class = varies_by_group(terms, posterior.table), means_every_class(terms)
        for at, summary in zip(found, _summaries(posterior, one, found, interval), strict=True):
            level = model.groups.levels[at.group] if by_group and model.groups else ""
            latent_class = model.class_names[at.latent_class] if by_class else ""
            keys = {"quantity": name, "group": level, "latent_class": latent_class}
            rows.append({**keys, "text": one.text, **summary})
    columns = ["quantity", "group", "latent_class", "text", *SUMMARY_COLUMNS, *PRIOR_COLUMNS]
    frame = pd.DataFrame(rows, columns=columns)
    frame = frame.drop(columns=[c for c in ("group", "latent_class") if not frame[c].any()])
    frame.attrs["interval"] = interval
    return frame


def _resolved(posterior: Posterior, text: str) -> ResolvedQuantity:
    resolved = resolve(text, posterior.model.vocabulary)
    if not isinstance(resolved, ResolvedQuantity):
        msg = "this is no quantity: it assumes or claims something"
        raise StatementError(
            msg,
            statement=text,
            position=0,
            remedy="Leave out the comparison; to test it, call posterior.test(...).",
        )
    return resolved


def _several(posterior: Posterior, resolved: ResolvedQuantity) -> StatementError:
    groups, terms = posterior.model.groups, terms_of(resolved)
    by_group = groups is not None and varies_by_group(terms, posterior.table)
    remedy = "Call posterior.quantities([...]), which gives a row for each"
    if by_group and groups is not None:
        remedy += f", or name a group, {groups.name}={groups.levels[0]}, or 'overall'"
    return StatementError(
        f"this stands for several values, one for each {'group' if by_group else 'class'}",
        statement=resolved.text,
        position=resolved.expression.position,
        remedy=f"{remedy}.",
    )


def _summaries(
    posterior: Posterior,
    resolved: ResolvedQuantity,
    at: Sequence[Instance],
    interval: float,
) -> list[dict[str, float]]:
    """Return the summary of the posterior, then of the prior, for each instance."""
    values = _values(posterior_parameters(posterior), resolved, at)
    shape = (posterior.draws.n_chains, posterior.draws.n_draws, len(at))
    columns = Quantities(values.reshape(shape)).summary(interval)
    before = _prior_quantiles(posterior, resolved, at, interval)
    columns |= dict(zip(PRIOR_COLUMNS, before, strict=True))
    return [{name: float(column[i]) for name, column in columns.items()} for i in range(len(at))]


def _prior_quantiles(
    posterior: Posterior, resolved: ResolvedQuantity, at: Sequence[Instance], interval: float
) -> Floats:
    """Return median, lower and upper (3, instances) of the prior; nan without names."""
    if posterior.model.exploratory and means_every_class(terms_of(resolved)):
        return np.full((3, len(at)), np.nan)
    rng = np.random.default_rng(PRIOR_SEED)
    draws = draw_prior(posterior.model, PRIOR_DRAWS, rng, group_share(posterior))
    tail = (1.0 - interval) / 2.0
    values = _values(draws, resolved, at)
    return np.asarray(np.quantile(values, [0.5, tail, 1.0 - tail], axis=0))


def _values(draws: ParameterDraws, resolved: ResolvedQuantity, at: Sequence[Instance]) -> Floats:
    """Return the draws (S, instances) of a quantity, or refuse 0 / 0."""
    values = np.stack(
        [draws.expression(resolved.expression, resolved.terms, one) for one in at], axis=1
    )
    undefined = int(np.isnan(values).any(axis=1).sum())
    if undefined:
        msg = f"this divides 0 by 0 in {undefined:,} of {len(values):,} draws"
        raise StatementError(
            msg,
            statement=resolved.text,
            position=resolved.expression.position,
            remedy="Ask for a difference, or for a ratio whose lower part is never 0.",
        )
    return values
