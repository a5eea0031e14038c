"""The regression of class on covariates, against formulas, statsmodels, calibration and NUTS."""

from __future__ import annotations

from statistics import NormalDist

import numba
import numpy as np
import pandas as pd
import pytest

import bayeslca as lca
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.table_builder import TableBuilder
from bayeslca.relate.error_matrix import error_matrix
from bayeslca.relate.predictors.three_steps import three_step_regression
from bayeslca.responses.units import Units
from bayeslca.sampling.joint_chain import JointChain, joint_task
from bayeslca.sampling.joint_gibbs import sample_held
from bayeslca.sampling.logistic_step import LogisticStep
from bayeslca.sampling.polya_gamma import polya_gamma

SEED = 20261213


@numba.njit
def many(n, c, out, rng):
    for i in range(out.size):
        out[i] = polya_gamma(n, c, rng)


@pytest.mark.parametrize(
    ("n", "c"), [(1, 0.0), (1, 0.5), (1, -2.0), (1, 3.3), (1, 12.0), (1, 70.0), (4, 1.5)]
)
def test_polya_gamma_has_the_published_moments_and_transform(n, c):
    """Polson, Scott & Windle (2013): mean, variance (their section 2), Laplace transform (eq. 4).

    E exp(-w t) of PG(n, c) is (cosh(c / 2) / cosh(sqrt(c^2 / 4 + t / 2)))^n.
    """
    draws = np.empty(200_000)
    many(n, c, draws, np.random.default_rng(SEED))
    a = abs(c)
    mean = n / 4 if a == 0 else n / (2 * a) * np.tanh(a / 2)
    # sinh(a) / cosh(a / 2)^2 = 2 tanh(a / 2)
    spread = 2 * np.tanh(a / 2) - a / np.cosh(a / 2) ** 2
    variance = n / 24 if a == 0 else n / (4 * a**3) * spread
    limit = NormalDist().inv_cdf(1 - 1e-4 / (2 * 21))
    error = np.sqrt(variance / draws.size)
    assert abs(draws.mean() - mean) < limit * error
    squares = (draws - mean) ** 2
    assert abs(squares.mean() - variance) < limit * squares.std() / np.sqrt(draws.size)
    t = 1.0 / mean
    transform = np.exp(n * (np.log(np.cosh(c / 2)) - np.log(np.cosh(np.sqrt(c**2 / 4 + t / 2)))))
    values = np.exp(-t * draws)
    assert abs(values.mean() - transform) < limit * values.std() / np.sqrt(draws.size)


def sure_study(n_cases=300):
    """Three classes told apart almost without error by nine items."""
    rng = np.random.default_rng(SEED)
    x = rng.normal(size=(n_cases, 2))
    slopes = np.array([[0.0, 0.0, 0.0], [0.4, 0.9, 0.0], [-0.2, 0.0, -0.8]])
    share = np.exp(slopes[:, 0] + x @ slopes[:, 1:].T)
    share /= share.sum(axis=1, keepdims=True)
    z = (rng.random(n_cases)[:, None] > share.cumsum(axis=1)).sum(axis=1)
    yes = np.full((3, 12), 0.02)
    for k in range(3):
        yes[k, 4 * k : 4 * k + 4] = 0.98
    answers = rng.random((n_cases, 12)) < yes[z]
    items = [f"item_{j + 1}" for j in range(12)]
    frame = pd.DataFrame(np.where(answers, "yes", "no"), columns=items)
    frame["x"], frame["w"] = x.T
    return frame, items, z


def test_with_sure_classes_all_ways_are_ordinary_regression():
    """Outside check: statsmodels' MNLogit on the true classes; priors made nearly flat."""
    import statsmodels.api as sm

    frame, items, z = sure_study()
    responses = lca.Responses.from_frame(
        frame,
        items=[lca.ItemSpec(name, categories=("no", "yes"), yes="yes") for name in items],
    )
    model = lca.LatentClassModel(
        responses.items,
        ["a", "b", "c"],
        statements=[
            f"{name} is where P({item}=yes) is highest"
            for name, item in (("a", "item_1"), ("b", "item_5"), ("c", "item_9"))
        ],
    )
    posterior = model.sample(responses, seed=1, draws=500, ess=500, progress=False)
    found = lca.class_predictors(
        posterior, frame, "x + w", seed=2, prior_scale=10.0, intercept_scale=10.0,
        draws=1000, ess=1000,
    )  # fmt: skip
    scaled = sm.add_constant(
        (frame[["x", "w"]] - frame[["x", "w"]].mean()) / frame[["x", "w"]].std(ddof=0)
    )
    reference = sm.MNLogit(z, scaled).fit(disp=0)
    table = found.odds_ratios(against="a")
    for way in ("joint", "cut", "three_steps"):
        rows = table[table["way"] == way]
        for k, name in enumerate(("b", "c")):
            mine = rows[rows["latent_class"] == name].set_index("covariate")
            for theirs, ours in (("const", "intercept"), ("x", "x"), ("w", "w")):
                value, error = reference.params[k][theirs], reference.bse[k][theirs]
                # A posterior mean lies a little beyond the maximum (skewness): a quarter of an
                # error; two cases of 300 may be placed wrongly.
                allowed = 0.25 * error + (
                    0.0 if way == "three_steps" else 4 * mine.loc[ours, "mcse"]
                )
                assert abs(mine.loc[ours, "mean"] - value) < allowed, (way, name, ours)
                assert mine.loc[ours, "sd"] == pytest.approx(error, rel=0.12), (way, name, ours)


def test_penalised_maximum_is_where_the_posterior_lies_with_known_classes():
    """Outside check: scikit-learn's multinomial regression with an L2 penalty is the mode."""
    from sklearn.linear_model import LogisticRegression

    rng = np.random.default_rng(SEED)
    x = rng.normal(size=(400, 2))
    z = rng.integers(3, size=400)
    z[x[:, 0] > 0.8] = 2
    step = LogisticStep(x, np.full(2, 0.7), 3, rng)
    counts = np.eye(3, dtype=np.int64)[z]
    share = np.empty((400, 3))
    step.prevalence(share)
    kept = np.empty((3000, 3, 2))
    for i in range(-100, 3000):
        step.draw(counts, share, rng)
        kept[i] = step.coefficients  # warm-up lands at the end and is overwritten
    mode = LogisticRegression(C=0.49, fit_intercept=False, tol=1e-10).fit(x, z).coef_
    contrasts = kept - kept.mean(axis=1, keepdims=True)
    sd = contrasts.std(axis=0)
    assert np.all(np.abs(contrasts.mean(axis=0) - mode) < 0.15 * sd)
    level = kept.mean(axis=1)
    assert np.allclose(level.std(axis=0), 0.7 / np.sqrt(3), rtol=0.06)


def binary_table(n_items, prior=((1.0, 1.0), (1.0, 1.0))):
    builder = TableBuilder([2] * n_items, 2, (0,))
    for j in range(n_items):
        for k in range(2):
            builder.set_item(0, j, k, builder.block(np.array(prior[k])))
    return builder.build()


def cases(table, answers):
    n = len(answers)
    units = Units(
        answers.astype(np.int16), np.arange(n, dtype=np.int32) * 0, np.ones(n, int), np.arange(n)
    )
    compiled = compile_units(table, units)
    object.__setattr__(compiled, "prevalence_row", np.arange(n))
    return compiled


def test_rule_35_the_cut_is_unbiased_where_classes_imputed_without_x_attenuate():
    """P = .7 / .3, five items, slope 1, response probabilities known (rules 1 and 35)."""
    rng = np.random.default_rng(SEED)
    table, n, slopes = binary_table(5), 500, {"cut": [], "without": []}
    elements = np.tile([0.3, 0.7, 0.7, 0.3], 5)
    for replicate in range(16):
        x = rng.normal(size=n)
        z = (rng.random(n) > 1 / (1 + np.exp(-x))).astype(int)
        answers = rng.random((n, 5)) < np.where(z == 0, 0.7, 0.3)[:, None]
        units = cases(table, answers)
        design = np.column_stack([np.ones(n), x])

        def source(step_rng, design=design):
            return LogisticStep(design, np.array([5.0, 5.0]), 2, step_rng)

        task = joint_task(table, units, n, source)
        held = np.tile(elements, (1, 150, 1))
        drawn = sample_held(task, held, sweeps=6, warmup=100, seed=replicate, threads=1)
        beta = drawn.parameters["coefficients"]
        slopes["cut"].append(float(np.median(beta[0, :, 0, 1] - beta[0, :, 1, 1])))
        ((_, joint),) = log_joint(table, units, elements[None], np.full((1, n, 2), 0.5))
        shares = class_shares(joint)[:, :, 0].T
        drawn_class = (rng.random(n) > shares[:, 0]).astype(int)
        exact = error_matrix(np.eye(2)[drawn_class])
        plain = three_step_regression(design, exact, np.ones(n))
        slopes["without"].append(plain.coefficients[0, 1] - plain.coefficients[1, 1])
    mean = {name: np.mean(values) for name, values in slopes.items()}
    error = {name: np.std(values, ddof=1) / 4.0 for name, values in slopes.items()}
    assert abs(mean["cut"] - 1.0) < 3.5 * error["cut"] + 0.03
    assert error["cut"] < 0.08
    assert mean["without"] < 0.6


@pytest.mark.parametrize("correction", ["fixed_error_likelihood", "inverse_error_matrix"])
def test_three_steps_are_consistent_and_their_errors_are_right(correction):
    """Slope 1 at P = .8 / .2 from placements: unbiased; standard errors as the spread says."""
    rng = np.random.default_rng(SEED)
    table, n = binary_table(5), 800
    elements = np.tile([0.2, 0.8, 0.8, 0.2], 5)
    slope, said = [], []
    for _ in range(60):
        x = rng.normal(size=n)
        z = (rng.random(n) > 1 / (1 + np.exp(-x))).astype(int)
        answers = rng.random((n, 5)) < np.where(z == 0, 0.8, 0.2)[:, None]
        ((_, joint),) = log_joint(
            table, cases(table, answers), elements[None], np.full((1, n, 2), 0.5)
        )
        errors = error_matrix(class_shares(joint)[:, :, 0].T)
        design = np.column_stack([np.ones(n), x])
        found = three_step_regression(design, errors, np.ones(n), correction=correction)
        contrast = np.array([0.0, 1.0, 0.0, -1.0])
        slope.append(contrast @ found.coefficients.ravel())
        said.append(np.sqrt(contrast @ found.covariance @ contrast))
    spread = np.std(slope, ddof=1)
    assert abs(np.mean(slope) - 1.0) < 3.5 * spread / np.sqrt(60) + 0.02
    assert np.mean(said) == pytest.approx(spread, rel=4 / np.sqrt(2 * 59))


def calibration_ranks(replicates, n=50, draws=39, wrong=False):
    """Rank of the true slope, intercept and log likelihood among thinned draws, with L-moves."""
    rng = np.random.default_rng(SEED)
    table = binary_table(4, ((2.0, 4.0), (4.0, 2.0)))
    ranks = []
    for _ in range(replicates):
        x = rng.normal(size=n)
        design = np.column_stack([np.ones(n), x])
        beta = rng.normal(0.0, [1.0, 1.5], size=(2, 2))
        share = np.exp(design @ beta.T)
        share /= share.sum(axis=1, keepdims=True)
        z = (rng.random(n) > share[:, 0]).astype(int)
        yes = np.stack([rng.beta(4, 2, size=4), rng.beta(2, 4, size=4)])
        answers = rng.random((n, 4)) < yes[z]
        units = cases(table, answers)
        sd = np.array([1.0, 3.0 if wrong else 1.5])

        def source(step_rng, design=design, sd=sd):
            return LogisticStep(design, sd, 2, step_rng)

        task = joint_task(table, units, n, source)
        chain = JointChain(task, np.full(16, 0.5), np.random.default_rng(rng.integers(2**60)))
        chain.run(1, 150)
        kept = chain.run(draws, 12)
        slopes = kept.parameters["coefficients"]
        element = np.stack([1 - yes, yes], axis=2).transpose(1, 0, 2).ravel()
        ((_, joint),) = log_joint(table, units, element[None], share[None])
        truth = np.logaddexp(joint[0], joint[1]).sum()
        values = np.column_stack(
            [slopes[:, 0, 1] - slopes[:, 1, 1], slopes[:, 0, 0] - slopes[:, 1, 0],
             slopes[:, :, 1].sum(axis=1), kept.log_likelihood]
        )  # fmt: skip
        true = [beta[0, 1] - beta[1, 1], beta[0, 0] - beta[1, 0], beta[:, 1].sum(), truth]
        ranks.append((values < true).sum(axis=0))
    return np.array(ranks), draws


def test_the_joint_model_is_calibrated():
    """Simulation-based calibration (Talts et al. 2018) of slope, intercept, level, likelihood."""
    from scipy.stats import chisquare

    ranks, draws = calibration_ranks(160)
    for column in ranks.T:
        counts = np.bincount(column * 8 // (draws + 1), minlength=8)
        assert chisquare(counts).pvalue > 1e-4 / 4


def test_a_wrong_prior_is_found_by_calibration():
    from scipy.stats import chisquare

    ranks, draws = calibration_ranks(160, wrong=True)
    counts = np.bincount(ranks[:, 2] * 8 // (draws + 1), minlength=8)
    assert chisquare(counts).pvalue < 1e-4
