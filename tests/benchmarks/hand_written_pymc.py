"""A latent class model as a careful analyst writes it by hand in PyMC; for the benchmark only.

Run as a whole process: read the table, fit K classes for each K asked for, relabel by
prevalence, and print PSIS-LOO from ArviZ and WAIC (which ArviZ 1 no longer has).

    python hand_written_pymc.py TABLE.csv 1 2 3 4 5 6
"""

import sys

import arviz_stats
import numpy as np
import pandas as pd
import pymc as pm
from scipy.special import logsumexp


def read_cases(path):
    """Return the answers (case, item), one line for each case of the table of patterns."""
    table = pd.read_csv(path)
    answers = table.drop(columns="count").to_numpy()
    return np.repeat(answers, table["count"], axis=0)


def fit(answers, n_classes, seed, *, draws=1000, tune=1000, chains=4):
    """Sample a model with so many classes; return the tree and the log likelihood of cases."""
    coords = {
        "case": np.arange(answers.shape[0]),
        "item": np.arange(answers.shape[1]),
        "latent_class": np.arange(n_classes),
    }
    with pm.Model(coords=coords):
        prevalence = 1.0
        if n_classes > 1:
            prevalence = pm.Dirichlet("prevalence", np.ones(n_classes), dims="latent_class")
        yes = pm.Beta("yes", 1.0, 1.0, dims=("latent_class", "item"))
        by_class = pm.math.dot(answers, pm.math.log(yes).T)
        by_class += pm.math.dot(1 - answers, pm.math.log(1 - yes).T)
        joint = by_class + pm.math.log(prevalence)
        by_case = pm.math.logsumexp(joint, axis=1).flatten()
        pm.Deterministic("by_case", by_case, dims="case")
        pm.Potential("likelihood", by_case.sum())
        result = pm.sample(
            draws,
            tune=tune,
            chains=chains,
            random_seed=seed,
            progressbar=False,
            target_accept=0.9,
            compute_convergence_checks=False,
        )
    tree = result.to_datatree() if hasattr(result, "to_datatree") else result
    tree["log_likelihood"] = tree["posterior"].to_dataset()[["by_case"]]
    return tree


def relabelled(tree):
    """Return prevalences and response probabilities, classes by falling prevalence."""
    posterior = tree["posterior"]
    if "prevalence" not in posterior:
        return np.ones(1), posterior["yes"].mean(("chain", "draw")).values
    prevalence, yes = posterior["prevalence"].values, posterior["yes"].values
    order = np.argsort(-prevalence, axis=-1)
    prevalence = np.take_along_axis(prevalence, order, axis=-1)
    yes = np.take_along_axis(yes, order[..., None], axis=-2)
    return prevalence.mean((0, 1)), yes.mean((0, 1))


def waic(log_likelihood):
    """Return elpd and effective parameters by WAIC from (draw, case)."""
    lppd = logsumexp(log_likelihood, axis=0) - np.log(log_likelihood.shape[0])
    p = log_likelihood.var(axis=0, ddof=1)
    return float(np.sum(lppd - p)), float(p.sum())


def main(path, counts, **sampling):
    """Fit all numbers of classes and print the comparison."""
    answers = read_cases(path)
    rows = []
    for n_classes in counts:
        tree = fit(answers, n_classes, seed=n_classes, **sampling)
        loo = arviz_stats.loo(tree, var_name="by_case", pointwise=True)
        by_case = tree["log_likelihood"]["by_case"].values.reshape(-1, answers.shape[0])
        elpd_waic, p_waic = waic(by_case)
        prevalence, _ = relabelled(tree)
        rows.append(
            {
                "classes": n_classes,
                "elpd_loo": loo.elpd,
                "se": loo.se,
                "p_loo": loo.p,
                "elpd_waic": elpd_waic,
                "p_waic": p_waic,
                "smallest_class": prevalence.min(),
            }
        )
    print(pd.DataFrame(rows).round(2).to_string(index=False))


if __name__ == "__main__":
    main(sys.argv[1], [int(k) for k in sys.argv[2:]])
