"""Maximum likelihood against published and independently computed figures, to the printed digits.

The figures, and where each is from, stand in tests/references/references.toml.
"""

from __future__ import annotations

import csv
import tomllib
from functools import cache
from itertools import permutations
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from scipy.stats import chi2

from bayeslca import LatentClassModel, Responses
from bayeslca.assess.likelihood.fit_statistics import criteria_table, information_criteria
from bayeslca.assess.likelihood.maximum_likelihood import MaximumLikelihood

SEED = 20261208
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = ("stouffer_toby_1951", "carcinoma_raters_1977", "academic_cheating_dayton_1998")
FITS = [(name, classes) for name in TABLES for classes in (1, 2, 3, 4)]
DIGITS = 6e-5
"""Figures are printed to four decimals."""


@cache
def entry(name: str) -> dict[str, Any]:
    tables = tomllib.loads((REFERENCES / "references.toml").read_text(encoding="utf-8"))["table"]
    return next(table for table in tables if table.get("file") == f"{name}.csv")


def published(name: str, what: str) -> dict[str, Any]:
    return next(part for part in entry(name)["published"] if part["name"] == what)


def computed(name: str, what: str) -> dict[str, Any]:
    return next(part for part in entry(name)["computed"] if part["name"] == what)


@cache
def responses_of(name: str) -> Responses:
    frame = pd.read_csv(REFERENCES / f"{name}.csv")
    frame = frame[frame["count"] > 0]
    items = [column for column in frame if column != "count"]
    return Responses.from_frame(frame, items=items, counts="count")


@cache
def fitted(name: str, classes: int) -> MaximumLikelihood:
    responses = responses_of(name)
    model = LatentClassModel(responses.items, classes)
    return model.maximum_likelihood(responses, starting_points=40, seed=SEED)


@pytest.mark.parametrize(("name", "classes"), FITS)
def test_computed_fits_to_the_printed_digits(name: str, classes: int) -> None:
    truth = next(part for part in entry(name)["computed_fit"] if part["classes"] == classes)
    fit = fitted(name, classes)
    assert fit.n_parameters == truth["n_par"]
    assert fit.df == truth["df_nominal"]
    assert_allclose(
        [fit.log_likelihood, fit.g2, fit.aic, fit.bic, fit.caic, fit.bic_sclove],
        [truth[key] for key in ("loglik", "G2", "AIC", "BIC", "CAIC", "SABIC")],
        atol=DIGITS,
    )
    if "caution" in truth:  # X2 and the estimates are not unique
        return
    assert fit.x2 == pytest.approx(truth["X2"], abs=DIGITS)
    if classes == 1:
        return
    assert fit.relative_entropy == pytest.approx(truth["relative_entropy"], abs=DIGITS)
    assert_allclose(fit.prevalence["estimate"], truth["class_weights"], atol=DIGITS)
    yes = fit.response_probability.query("category == '1'")["estimate"].to_numpy()
    assert_allclose(yes.reshape(classes, -1), truth["item_probs_by_class"], atol=DIGITS)


@pytest.mark.parametrize(
    ("name", "what", "classes"),
    [
        ("stouffer_toby_1951", "G2 independence", 1),
        ("stouffer_toby_1951", "G2 two classes", 2),
        ("carcinoma_raters_1977", "G2 one class", 1),
        ("carcinoma_raters_1977", "G2 two classes", 2),
        ("carcinoma_raters_1977", "G2 three classes", 3),
        ("carcinoma_raters_1977", "G2 four classes", 4),
        ("academic_cheating_dayton_1998", "G2 two classes", 2),
    ],
)
def test_published_likelihood_ratio_statistics(name: str, what: str, classes: int) -> None:
    # Goodman (1974), Agresti (2002), Dayton (1998); the printed values from memory.
    truth = published(name, what)
    fit = fitted(name, classes)
    assert fit.df == truth["df"]
    digits = len(str(truth["value"]).partition(".")[2])
    assert round(fit.g2, digits) == truth["value"]


def test_published_probabilities() -> None:
    # Dayton (1998); Agresti (2002): from memory.
    cheating = fitted(TABLES[2], 2)
    weights = published(TABLES[2], "two-class weights")["value"]
    assert cheating.prevalence["estimate"].round(2).tolist() == weights
    yes = cheating.response_probability.query("category == '1'")["estimate"].to_numpy()
    larger = published(TABLES[2], "yes-probabilities, larger class")["value"]
    smaller = published(TABLES[2], "yes-probabilities, smaller class")["value"]
    assert yes.round(2).tolist() == [*larger, *smaller]
    carcinoma = sorted(fitted(TABLES[1], 3).prevalence["estimate"].round(2))
    assert carcinoma == sorted(published(TABLES[1], "three-class weights")["value"])


def scale_model(kind: str) -> LatentClassModel:
    """Five ordered scale types: the answers of each are known, but for errors."""
    responses = responses_of(TABLES[0])
    types = ["0000", "0001", "0011", "0111", "1111"]
    names = [f"type_{t}" for t in types]
    items = [item.name for item in responses.items]
    statements = []
    if kind == "unscalable":
        for name, answers in zip(names, types, strict=True):
            for item, answer in zip(items, answers, strict=True):
                statements.append(f"P({item}=1 | {name}) = {answer}")
        names = [*names, "unscalable"]
    if kind == "one error rate":
        first = f"P({items[0]}=1 | {names[0]})"
        for name, answers in zip(names, types, strict=True):
            for item, answer in zip(items, answers, strict=True):
                wrong = f"P({item}={1 - int(answer)} | {name})"
                if wrong != first:
                    statements.append(f"{wrong} = {first}")
    return LatentClassModel(responses.items, tuple(names), statements)


def test_goodmans_scale_model() -> None:
    # Goodman (1975): known answers in five classes, one class without a pattern.
    fit = scale_model("unscalable").maximum_likelihood(responses_of(TABLES[0]), seed=SEED)
    truth = computed(TABLES[0], "G2 Goodman scale model")
    printed = published(
        TABLES[0], "G2 Goodman scale model: five ordered scale types plus one unscalable class"
    )
    assert fit.g2 == pytest.approx(truth["value"], abs=DIGITS)
    assert round(fit.g2, 2) == printed["value"]
    assert fit.df == printed["df"]
    # Known answers are no estimates, whatever their value.
    assert all("unscalable" in name for name in fit.boundary)
    shares = fit.prevalence["estimate"].to_numpy()
    expected = [*truth["scale_type_weights"], truth["unscalable_weight"]]
    assert_allclose(shares, expected, atol=DIGITS)


def test_proctors_scale_model() -> None:
    # Proctor (1970): one error rate, shared by all items and classes.
    fit = scale_model("one error rate").maximum_likelihood(responses_of(TABLES[0]), seed=SEED)
    truth = computed(TABLES[0], "G2 single-error-rate scale model")
    printed = published(TABLES[0], "G2 single-error-rate scale model, five scale types")
    # An error rate above a half is the mirror image of another scale, and may fit better; the
    # published one is below it.
    assert fit.df == printed["df"]
    assert fit.g2 == pytest.approx(truth["value"], abs=6e-4)
    assert round(fit.g2, 2) == printed["value"]


def anaesthetists() -> tuple[LatentClassModel, Responses]:
    frame = pd.read_csv(REFERENCES / "dawid_skene_1979_anaesthetists.csv")
    items = [column for column in frame if column != "patient"]
    responses = Responses.from_frame(frame, items=items, case="patient")
    same = [
        f"P(obs1_a={grade} | .) = P(obs1_{other}={grade} | .)"
        for grade in (1, 2, 3, 4)
        for other in "bc"
    ]
    return LatentClassModel(responses.items, 4, same), responses


def test_published_maximum_of_anaesthetists_is_a_local_one() -> None:
    """Dawid & Skene (1979): EM from the vote proportions; random starts find a higher maximum."""
    model, responses = anaesthetists()
    votes = np.stack([(responses.codes == grade).mean(axis=1) for grade in range(4)], axis=1)
    fit = model.maximum_likelihood(responses, start=votes)
    name = "dawid_skene_1979_anaesthetists"
    truth = computed(name, "EM from vote proportions (published solution)")
    assert fit.log_likelihood == pytest.approx(truth["loglik"], abs=DIGITS)
    by_class = fit.response_probability["estimate"].to_numpy().reshape(4, 7, 4)
    orders = [np.array(order) for order in permutations(range(4))]
    order = max(orders, key=lambda o: np.einsum("kjk->", by_class[o]))
    prevalence = fit.prevalence["estimate"].to_numpy()[order]
    assert_allclose(prevalence, truth["prevalences"], atol=DIGITS)
    assert_allclose(prevalence, published(name, "class prevalences")["value"], atol=0.0051)
    rates = by_class[order]
    for at, observer in ((0, 1), (1, 1), (2, 1), (3, 2), (4, 3), (5, 4), (6, 5)):
        assert_allclose(rates[:, at], truth[f"error_rates_obs{observer}"], atol=DIGITS)
    printed = published(name, "observer 1 error rates, rows = true class 1..4")["value"]
    assert_allclose(rates[:, 0], printed, atol=0.0051)
    shares = fit.membership()[:, order]
    assert (shares.argmax(axis=1) + 1).tolist() == truth["most_likely_class_by_patient"]
    assert shares.max(axis=1).min() == pytest.approx(truth["max_posterior_min"], abs=6e-4)

    best = computed(name, "best of 500 random-start EM runs")
    random = model.maximum_likelihood(responses, starting_points=500, seed=SEED)
    assert random.log_likelihood >= best["loglik"] - DIGITS
    assert random.log_likelihood == pytest.approx(best["loglik"], abs=DIGITS)
    assert 1 <= random.reached_best < 500
    assert_allclose(
        sorted(random.prevalence["estimate"]), sorted(best["prevalences_unordered"]), atol=6e-4
    )


def test_published_criteria_are_this_arithmetic() -> None:
    # PLOS ONE e0266588, table 1: the log likelihood is printed to 0.1, so criteria agree to 0.2.
    with (REFERENCES / "information_criteria_rows.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    for row in rows:
        found = information_criteria(float(row["loglik"]), int(row["n_par_implied"]), 5228)
        for mine, printed in (
            (found.aic, row["aic"]),
            (found.bic, row["bic"]),
            (found.bic_sclove, row["sabic"]),
            (found.caic, row["caic"]),
        ):
            assert abs(mine - float(printed)) < 0.25


def test_long_table_of_criteria() -> None:
    fits = {classes: fitted(TABLES[1], classes) for classes in (1, 2, 3, 4)}
    table = criteria_table(fits)
    assert list(table.columns) == ["model", "criterion", "value", "above_best"]
    assert len(table) == 4 * 5
    best = table[table["above_best"] == 0].set_index("criterion")["model"]
    # Of the computed fits: smallest AIC and Sclove's BIC at three classes, CAIC and BIC too.
    assert best.to_dict() == dict.fromkeys(["aic", "bic", "bic_sclove", "caic"], 3) | {"aicc": 3}
    bic = table[table["criterion"] == "bic"].set_index("model")["above_best"]
    assert bic[4] == pytest.approx(726.4629 - 697.1357, abs=1e-3)


@pytest.mark.parametrize("name", [TABLES[0], TABLES[2]])
def test_chi_square_tails_are_scipys(name: str) -> None:
    fit = fitted(name, 2)
    assert fit.g2_p_value == pytest.approx(chi2(6).sf(fit.g2))
    assert fit.x2_p_value == pytest.approx(chi2(6).sf(fit.x2))
    assert fit.chi_square == ""


def test_no_chi_square_where_it_is_not_to_be_trusted() -> None:
    assert "sparse" in fitted(TABLES[1], 2).chi_square
    assert "not identified" in fitted(TABLES[0], 3).chi_square
    assert "no degrees of freedom" in fitted(TABLES[0], 4).chi_square
    for name, classes in ((TABLES[1], 2), (TABLES[0], 3), (TABLES[0], 4)):
        assert np.isnan(fitted(name, classes).g2_p_value)
        assert np.isnan(fitted(name, classes).x2_p_value)


def test_boundary_estimates_are_named() -> None:
    # references.toml: item probabilities on the boundary in the two-class solution.
    assert set(fitted(TABLES[1], 2).boundary) == {
        "P(rater_a=1 | 1) = 1",
        "P(rater_g=1 | 1) = 1",
        "P(rater_c=1 | 2) = 0",
        "P(rater_d=1 | 2) = 0",
        "P(rater_f=1 | 2) = 0",
    }
    at_edge = fitted(TABLES[1], 2).response_probability.query("at_boundary")
    assert at_edge["standard_error"].isna().all()
    assert len(at_edge) == 10


def test_errors_take_boundary_estimates_as_known() -> None:
    free = fitted(TABLES[1], 2)
    known = [
        "P(rater_a=1 | one) = 1",
        "P(rater_g=1 | one) = 1",
        *(f"P(rater_{rater}=1 | two) = 0" for rater in "cdf"),
    ]
    model = LatentClassModel(free.model.items, ("one", "two"), known)
    stated = model.maximum_likelihood(responses_of(TABLES[1]), starting_points=20, seed=SEED)
    assert stated.log_likelihood == pytest.approx(free.log_likelihood, abs=1e-6)
    assert not stated.boundary
    inside = ~free.response_probability["at_boundary"]
    assert inside.sum() == 18
    assert_allclose(
        free.response_probability["standard_error"][inside],
        stated.response_probability["standard_error"][inside],
        rtol=1e-4,
    )


@pytest.mark.parametrize("seed", range(4))
def test_the_best_run_is_taken(seed: int) -> None:
    # Four classes: about a third of the runs reach the best maximum (log likelihood -289.2858).
    responses = responses_of(TABLES[1])
    model = LatentClassModel(responses.items, 4)
    fit = model.maximum_likelihood(responses, starting_points=25, seed=seed)
    assert fit.log_likelihood == pytest.approx(-289.2858, abs=DIGITS)
    assert 1 <= fit.reached_best < 25
