"""Where NUTS chains start: the labelling that the priors favour, the likelihood unchanged."""

import numpy as np
import pytest

from bayeslca.exceptions import SamplingError
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.pymc.blocks import Names, block_variables
from bayeslca.model.pymc.model import Parts, as_cases
from bayeslca.responses.item import Item
from bayeslca.responses.responses import Responses
from bayeslca.sampling.nuts import draw_with_nuts, nuts_findings
from bayeslca.sampling.nuts_starts import best_labelling

ITEMS = (Item("fees", ("no", "yes")), Item("meets", ("no", "yes")))
NAMED = LatentClassModel(ITEMS, ("managed", "lapsed"), ("P(fees=yes | managed) ~ Beta(3, 1)",))
RESPONSES = Responses(
    items=ITEMS,
    codes=np.array([[0, 0], [1, 1]], dtype=np.int16),
    counts=np.array([2, 3]),
    group_codes=np.zeros(2, dtype=np.int32),
)


def test_chains_start_in_the_labelling_the_priors_favour():
    table, source = NAMED.table, NAMED.prevalence_source
    units = compile_units(table, as_cases(RESPONSES.units, RESPONSES.counts))
    parts = Parts(table, units, source, block_variables(table, Names.of(NAMED)), False)
    elements = np.full(table.n_elements, 0.5)
    fees = table.direct_element[table.response_row[0, 1]]  # fees=yes, by class
    elements[fees] = 0.2, 0.9  # the wrong way round: managed should pay
    elements[table.direct_element[table.response_row[0, 0]]] = 0.8, 0.1
    prevalence = np.array([[0.3, 0.7]])
    moved, shares, *_ = best_labelling(parts, NAMED.symmetry, elements, prevalence)
    assert moved[fees].tolist() == [0.9, 0.2]
    assert shares.tolist() == [[0.7, 0.3]]
    assert log_prior(table, source, moved, shares) > log_prior(table, source, elements, prevalence)
    np.testing.assert_allclose(
        log_unit_likelihood(table, units, moved, shares),
        log_unit_likelihood(table, units, elements, prevalence),
    )


def test_labellings_that_nuts_does_not_visit_are_a_finding():
    assert [f.kind for f in nuts_findings(NAMED.symmetry)] == ["labellings_not_visited"]
    assert nuts_findings(LatentClassModel(ITEMS, 2).symmetry) == ()


@pytest.mark.pymc
def test_an_unknown_backend_is_refused():
    with pytest.raises(SamplingError, match="'auto', 'pymc' or 'nutpie'"):
        draw_with_nuts(NAMED, RESPONSES, seed=1, nuts_backend="fast", progress=False)
