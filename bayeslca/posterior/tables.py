"""Tables of prevalences and response probabilities."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.pooled_prevalence import new_unit_name
from bayeslca.posterior.partial_pooling import new_unit_draws
from bayeslca.posterior.summary import Quantities, summary_frame

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

OVERALL = "overall"
"""What the rows of all groups together are called."""


def overall_prevalence(prevalence: Floats, group_cases: Floats) -> Floats:
    """Return the prevalences (..., K) of all groups (..., group, K), weighted by their sizes."""
    return np.asarray(np.einsum("g,...gk->...k", group_cases / group_cases.sum(), prevalence))


def prevalence_quantities(posterior: Posterior) -> Quantities:
    """Return the draws of all prevalences: group by group, then overall where there are groups.

    Of pooled units those of a unit that was not observed stand before the overall ones.
    """
    draws = posterior.prevalence_draws
    flat = draws.reshape(*draws.shape[:2], -1)
    if posterior.model.groups is not None:
        new = [new_unit_draws(posterior)] if posterior.model.pooled else []
        overall = overall_prevalence(draws, posterior.group_cases)
        flat = np.concatenate([flat, *new, overall], axis=-1)
    return Quantities(flat)


def prevalence_table(posterior: Posterior, quantities: Quantities, interval: float) -> pd.DataFrame:
    """Return how common each class is; see `Posterior.prevalence`."""
    import pandas as pd

    names = posterior.model.class_names
    groups = posterior.model.groups
    sizes = posterior.group_cases
    keys = pd.DataFrame({"latent_class": names})
    if groups is not None:
        new = [new_unit_name(groups.name)] if posterior.model.pooled else []
        levels = [*groups.levels, *new, OVERALL]
        sizes = np.concatenate([sizes, [np.nan] * len(new), [sizes.sum()]])
        keys = pd.DataFrame(
            {
                "group": np.repeat(levels, len(names)),
                "latent_class": np.tile(names, len(levels)),
            }
        )
    frame = summary_frame(keys, quantities, interval)
    n_cases = np.repeat(sizes, len(names))
    for column, of in (("cases", "median"), ("cases_lower", "lower"), ("cases_upper", "upper")):
        frame[column] = frame[of] * n_cases
    return frame


def response_probability_quantities(posterior: Posterior) -> Quantities:
    """Return the draws of all response probabilities, by response group, class, answer."""
    draws = posterior.response_probability_draws
    return Quantities(draws.reshape(*draws.shape[:2], -1))


def response_probability_table(
    posterior: Posterior, quantities: Quantities, interval: float
) -> pd.DataFrame:
    """Return what each class looks like; see `Posterior.response_probabilities`."""
    import pandas as pd

    model = posterior.model
    answers = [(item.name, category) for item in model.items for category in item.categories]
    one_group = pd.DataFrame(
        [
            {"latent_class": name, "item": item, "category": category}
            for name in model.class_names
            for item, category in answers
        ]
    )
    keys = one_group
    if posterior.table.n_response_groups > 1:
        keys = pd.concat(
            [
                one_group.assign(group=_response_group_name(posterior, g))
                for g in range(posterior.table.n_response_groups)
            ],
            ignore_index=True,
        )
        keys.insert(0, "group", keys.pop("group"))
    return summary_frame(keys, quantities, interval)


def _response_group_name(posterior: Posterior, response_group: int) -> str:
    """Return the levels that share a response group, such as ``"north, south"``."""
    assert posterior.model.groups is not None  # one response group where there are no groups
    levels = np.asarray(posterior.model.groups.levels, dtype=object)
    return ", ".join(levels[posterior.table.response_group == response_group])
