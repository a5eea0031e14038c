"""Scale models of the Stouffer-Toby table, stated in the notation, against published fits.

Sources (tests/references/references.toml): Goodman (1975, JASA 70, 755-768), G2 = 0.99 on 6 df for
five scale types beside one unscalable class; Proctor (1970, Psychometrika 35, 73-78), G2 = 27.16 on
10 df with one error rate; item-specific and two-sided error rates recomputed there. The log
likelihood of each constrained model at the fitted parameters must give that G2, and no draw of its
posterior may lie above the maximum.
"""

from __future__ import annotations

import csv
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from bayeslca import LatentClassModel, Responses
from bayeslca.model.compile import compile_units
from bayeslca.model.identifiability import count_free
from bayeslca.model.places import Place, ResponseVector
from bayeslca.model.probabilities import log_unit_likelihood

REFERENCES = Path(__file__).parents[2] / "references"
TYPES = ("0000", "0001", "0011", "0111", "1111")
ITEMS = ("w", "x", "y", "z")
SEED = 20261206


@pytest.fixture(scope="module")
def reference():
    tables = tomllib.loads((REFERENCES / "references.toml").read_text())["table"]
    return next(t for t in tables if t["id"] == "stouffer_toby_role_conflict")


@pytest.fixture(scope="module")
def responses():
    with (REFERENCES / "stouffer_toby_1951.csv").open(newline="") as file:
        rows = list(csv.reader(file))[1:]
    frame = pd.DataFrame(rows, columns=[*ITEMS, "n"]).astype({"n": int})
    return Responses.from_frame(frame, items=ITEMS, counts="n")


def computed(reference, name):
    return next(one for one in reference["computed"] if one["name"] == name)


def log_likelihood_from(reference, g2):
    two = next(fit for fit in reference["computed_fit"] if fit["classes"] == 2)
    return two["loglik"] + two["G2"] / 2 - g2 / 2


def right(name, scale_type):
    """Probability statement of an item's answer that agrees with a scale type."""
    return f"P({name}={scale_type[ITEMS.index(name)]} | type{scale_type})"


def single_rate():
    every = [right(name, t) for t in TYPES for name in ITEMS]
    return [f"{one} = {every[0]}" for one in every[1:]]


def rate_by_item():
    return [f"{right(name, t)} = {right(name, TYPES[0])}" for t in TYPES[1:] for name in ITEMS]


def rate_by_answer():
    every = [(name, t, t[j]) for t in TYPES for j, name in enumerate(ITEMS)]
    first = {answer: next((n, t) for n, t, a in every if a == answer) for answer in "01"}
    return [
        f"{right(name, t)} = {right(*first[answer])}"
        for name, t, answer in every
        if (name, t) != first[answer]
    ]


def certain():
    return [f"{right(name, t)} = 1" for t in TYPES for name in ITEMS]


def scale_model(responses, statements, unscalable=False):
    classes = [f"type{t}" for t in TYPES] + (["unscalable"] if unscalable else [])
    return LatentClassModel(responses.items, classes, statements)


def at(model, responses, prevalence, right_answer):
    """Log likelihood where ``right_answer(item, class)`` is P(the second answer)."""
    elements = np.full(model.table.n_elements, np.nan)
    for k, name in enumerate(model.class_names):
        for j in range(len(ITEMS)):
            yes = right_answer(j, name)
            for category, value in enumerate((1 - yes, yes)):
                form = model.response_assumptions.tied.forms[
                    Place(ResponseVector(0, j, k), category)
                ]
                if form.elements:
                    elements[form.elements[0]] = value / form.constant
    units = compile_units(model.table, model.units(responses))
    shares = np.asarray(prevalence)[None] / np.sum(prevalence)
    return float(log_unit_likelihood(model.table, units, elements, shares) @ units.count)


MODELS = {
    "single-error-rate": ("G2 single-error-rate scale model", single_rate, 5),
    "item-specific": ("G2 item-specific error rates scale model", rate_by_item, 8),
    "by answer": ("G2 0->1 and 1->0 error rates scale model", rate_by_answer, 6),
}


def test_the_single_error_rate_model_has_proctors_g2(reference, responses):
    found = computed(reference, "G2 single-error-rate scale model")
    model = scale_model(responses, single_rate())
    assert count_free(model.table) == 5  # 15 - 5 = 10 degrees of freedom, as published
    rate = found["error_rate"]
    value = at(
        model,
        responses,
        found["scale_type_weights"],
        lambda j, name: rate if name[4 + j] == "0" else 1 - rate,
    )
    assert value == pytest.approx(log_likelihood_from(reference, 27.164), abs=0.01)


def test_the_scale_model_with_an_unscalable_class_has_goodmans_g2(reference, responses):
    found = computed(reference, "G2 Goodman scale model")
    model = scale_model(responses, certain(), unscalable=True)
    assert count_free(model.table) == 9  # 15 - 9 = 6 degrees of freedom, as published
    draws = model.sample(responses, seed=SEED, progress=False, draws=1000).draws
    maximum = log_likelihood_from(reference, found["value"])
    assert draws.log_likelihood.max() <= maximum + 1e-3
    assert draws.log_likelihood.max() > maximum - 3.0
    share = draws.prevalence.mean(axis=(0, 1))[0]
    weights = [*found["scale_type_weights"], found["unscalable_weight"]]
    assert np.abs(share - weights).max() < 0.12  # a posterior mean of 216 cases, not the maximum


@pytest.mark.parametrize("name", MODELS)
def test_no_draw_exceeds_the_constrained_maximum(name, reference, responses):
    title, statements, n_free = MODELS[name]
    model = scale_model(responses, statements())
    assert count_free(model.table) == n_free
    draws = model.sample(responses, seed=SEED, progress=False, draws=1000).draws
    maximum = log_likelihood_from(reference, computed(reference, title)["value"])
    assert draws.log_likelihood.max() <= maximum + 1e-3
    # Twice the gap is about chi-square on n_free df; the best of 4000 draws comes near.
    assert draws.log_likelihood.max() > maximum - 1.5
