"""Drawn classes of cases (plausible values), for use where a class is needed in another program.

Class is not observed, so a single column of classes would claim too much. Several columns, each
drawn from the posterior, carry the uncertainty: analyse each and pool the results (Rubin 1987).
They are only right for relations that the model that drew them contains: drawn from the answers
alone, relations of class with other variables come out too weak.

References
----------
Mislevy, R. J. (1991), Randomization-based inference about latent variables from complex samples,
Psychometrika 56, 177-196 (from memory). Rubin, D. B. (1987), Multiple Imputation for Nonresponse
in Surveys (from memory).
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

import numpy as np

from bayeslca._typing import Ints, Seed
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import membership
from bayeslca.model.simulate import draw_categories
from bayeslca.posterior.membership import group_of_row
from bayeslca.sampling.run import seed_sequence

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

ATTENUATED = "made without covariates: relations with other variables will be attenuated"


class ClassDraws(Protocol):
    """A fitted relation (predictors of class, outcomes of class) that can draw classes."""

    @property
    def made_with(self) -> str:
        """The regression model, in words: "made with the predictors age + distance"."""
        ...

    def draw_classes(self, number: int, rng: np.random.Generator) -> Ints:
        """Draw the class of every case, shape (number, cases)."""
        ...


def plausible_values(
    posterior: Posterior, *, number: int = 20, seed: Seed = None, given: ClassDraws | None = None
) -> pd.DataFrame:
    """Draw classes for every case, several times.

    Parameters
    ----------
    posterior : Posterior
    number : int
        How many times; each takes the parameters from another draw of the posterior.
    seed : int, numpy.random.Generator, numpy.random.SeedSequence or None
    given : ClassDraws, optional
        The relation that the classes shall be used for, such as the joint fit of class predictors.
        Without it the classes are drawn from the answers alone, and marked so.

    Returns
    -------
    DataFrame
        ``case``, ``draw_1`` ... ``draw_<number>`` with names of classes, and ``made``: from what.
        A row of a table of response patterns is repeated for each of its cases.

    Raises
    ------
    ModelError
        When the number is not possible, or some answers are impossible in every class.
    """
    import pandas as pd

    _check_number(posterior, number)
    rng = np.random.default_rng(seed_sequence(seed))
    responses = posterior.responses
    if given is None:
        drawn, made = classes_from_answers(posterior, number, rng), ATTENUATED
    else:
        drawn, made = given.draw_classes(number, rng), given.made_with
    names = np.asarray(posterior.model.class_names, dtype=object)
    cases = np.repeat(np.asarray(responses.row_names, dtype=object), responses.counts)
    columns = {f"draw_{i + 1}": names[row] for i, row in enumerate(drawn)}
    return pd.DataFrame({"case": cases, **columns, "made": made})


def _check_number(posterior: Posterior, number: int) -> None:
    most = posterior.draws.n_chains * posterior.draws.n_draws
    if not 1 <= number <= most:
        msg = f"number={number}: give from 1 to {most:,}, the draws that the posterior holds."
        raise ModelError(msg)


def classes_from_answers(posterior: Posterior, number: int, rng: np.random.Generator) -> Ints:
    """Draw a class for each case from P(class | answers, parameters), shape (number, cases)."""
    model, draws, responses = posterior.model, posterior.draws, posterior.responses
    units = model.units(responses)
    table = compile_units(posterior.table, units)
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    at = np.where(
        units.unit_of_row >= 0,
        units.unit_of_row,
        units.n_units + group_of_row(posterior, responses),
    )
    row = np.repeat(at, responses.counts)
    # Evenly spread over the chains, so that the draws are as near to independent as they can be.
    chosen = np.linspace(0, len(elements) - 1, number).round().astype(int)
    out = np.empty((number, row.size), dtype=np.int64)
    for i, s in enumerate(chosen):
        by_unit = membership(posterior.table, table, elements[s], prevalence[s])
        if np.isnan(by_unit).any():
            msg = (
                "some cases gave answers that have probability 0 in every class, so no class can "
                "be drawn for them. See posterior.membership() for their names."
            )
            raise ModelError(msg)
        out[i] = draw_categories(np.concatenate([by_unit, prevalence[s]])[row], rng)
    return out
